"""The verb `assess`: one case through every model."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer
from rich.console import Console
from rich.markup import escape
from rich.padding import Padding

from fuelair.cli.console import bullets, show, terminal
from fuelair.cli.options import CaseFile, EngineOption, engine_named
from fuelair.errors import InputError, Problem

if TYPE_CHECKING:
    from fuelair.assessment import Assessment


def assess(
    case: CaseFile,
    json_file: Annotated[
        Path | None,
        typer.Option(
            "--json", metavar="FILE", help="Write everything as JSON; - for standard output, where nothing else goes then."
        ),
    ] = None,
    out: Annotated[
        Path | None, typer.Option("--out", metavar="FOLDER", help="Write JSON, CSV tables, the resolved case and a log there.")
    ] = None,
    every_state: Annotated[
        bool, typer.Option("--every-state", help="Print the states of every model, not only the headline's.")
    ] = False,
    engine: EngineOption = None,
) -> None:
    """Run a case through every cycle model and set the results side by side."""
    from fuelair import Case
    from fuelair import assess as run
    from fuelair.report import files, tables

    if out is not None and not str(out).strip("."):
        raise InputError(Problem("names no folder of its own", "--out", str(out), "a folder", "--out results"))
    result = run(Case.read(case), engine=engine_named(engine))
    to_stdout = str(json_file) == "-"
    if json_file is not None and not to_stdout:
        files.write_text(json_file, files.as_json(result), keep=case)
    written = files.write_folder(result, out, keep=case) if out is not None else []
    if to_stdout:
        print(files.as_json(result), end="")
        return
    console = terminal()
    _head(console, result)
    shown = tables.tables(result)
    if every_state:
        shown += [tables.states(result, m) for m in result.results if m != result.headline]
    for table in shown:
        show(console, table)
    bullets(console, "Mind", result.warnings)
    bullets(console, "Left to default (SI, degrees)", [", ".join(tables.defaults(result))])
    bullets(console, "Ledger", [tables.ledger(result)])
    bullets(console, "Rests on", [f"{s.reference} [{s.standing}]" for s in result.sources])
    bullets(console, "Caution", [tables.CAUTION])
    if json_file is not None:
        console.print(f"Wrote {escape(str(json_file))}")
    if written:
        console.print(f"Wrote {escape(str(out))}: {', '.join(p.name for p in written)}")


def _head(console: Console, a: Assessment) -> None:
    title = a.case.title or "Untitled case"
    console.print()
    console.print(f"[bold]{escape(title)}[/bold]")
    c = a.case.combustion
    limit = f" at {c.pressure_limit / 1e5:g} bar" if c.pressure_limit else ""
    console.print(
        f"{escape(a.fuel.name)}, {a.case.fuel.admission}, r = {a.case.engine.compression_ratio:g}, {c.heat_addition}{limit}",
        style="dim",
    )
    console.print()
    console.print(Padding(f"[bold]{escape(a.verdict)}[/bold]", (0, 2)))
    console.print()
