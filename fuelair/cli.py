"""The command line: verbs, exit codes, printing. The only module that prints.

Exit codes: 0 done, 1 some rows failed, 2 the input is wrong, 3 could not be solved, 4 unexpected,
130 interrupted.
"""

from __future__ import annotations

import io
import json
import os
import sys
import traceback
from collections.abc import Iterable
from pathlib import Path
from typing import IO, TYPE_CHECKING, Annotated, Literal, cast

import typer
from rich import box
from rich.console import Console
from rich.markup import escape
from rich.padding import Padding
from rich.table import Table as RichTable

from fuelair.errors import FuelairError, InputError, MissingExtraError, Problem
from fuelair.version import __version__

if TYPE_CHECKING:
    from fuelair.assessment import Assessment
    from fuelair.report.tables import Table

NARROWEST, PIPED = 110, 120
"""Width of the output in characters: the least that cuts no table, and when it is not a terminal."""
INTERRUPTED = 130
LONGEST_CELL = 22
"""Width up to which a number or a word of a head is never cut."""
TRACEBACK_VARIABLE = "FUELAIR_TRACEBACK"

app = typer.Typer(
    add_completion=False,
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    rich_markup_mode="rich",
    help="The fuel-air engine cycle beside the air-standard cycles: peak temperature and pressure to expect, and which "
    "assumption costs how many kelvin, bar and percent.",
    epilog="Exit codes: 0 done, 1 some rows failed, 2 the input is wrong, 3 could not be solved, 4 unexpected, 130 interrupted.",
)
CaseFile = Annotated[Path, typer.Argument(metavar="CASE.toml", help="Case file; `fuelair new` writes one to start from.")]


def main() -> None:
    """Entry point: run a verb, turn every expected error into one clear message and its exit code."""
    try:
        app(standalone_mode=True)
    except FuelairError as error:
        _complain(str(error))
        raise SystemExit(error.exit_code) from None
    except (KeyboardInterrupt, SystemExit) as end:
        if isinstance(end, SystemExit) and end.code != INTERRUPTED:
            raise
        _complain("interrupted; nothing half written")
        raise SystemExit(INTERRUPTED) from None
    except OSError as error:
        if not isinstance(error, BrokenPipeError):
            _complain(f"cannot write standard output: {error.strerror or error}")
            raise SystemExit(2) from None
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        raise SystemExit(0) from None
    except Exception as error:
        if os.environ.get(TRACEBACK_VARIABLE):
            traceback.print_exc()
        _complain(
            f"unexpected {type(error).__name__}: {error}\nPlease report it with the case file. "
            f"{TRACEBACK_VARIABLE}=1 shows where it happened."
        )
        raise SystemExit(4) from None


@app.callback(invoke_without_command=True)
def _version(
    version: Annotated[bool, typer.Option("--version", help="Print the version and stop.")] = False,
) -> None:
    if version:
        print(f"fuelair {__version__}")
        raise typer.Exit


@app.command()
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
) -> None:
    """Run a case through every cycle model and set the results side by side."""
    from fuelair import Case
    from fuelair import assess as run
    from fuelair.report import files, tables

    if out is not None and not str(out).strip("."):
        raise InputError(Problem("names no folder of its own", "--out", str(out), "a folder", "--out results"))
    result = run(Case.read(case))
    to_stdout = str(json_file) == "-"
    if json_file is not None and not to_stdout:
        files.write_text(json_file, files.as_json(result), keep=case)
    written = files.write_folder(result, out, keep=case) if out is not None else []
    if to_stdout:
        print(files.as_json(result), end="")
        return
    console = _console()
    _head(console, result)
    shown = tables.tables(result)
    if every_state:
        shown += [tables.states(result, m) for m in result.results if m != result.headline]
    for table in shown:
        _table(console, table)
    _list(console, "Mind", result.warnings)
    _list(console, "Left to default (SI, degrees)", [", ".join(tables.defaults(result))])
    _list(console, "Ledger", [tables.ledger(result)])
    _list(console, "Rests on", [f"{s.reference} [{s.standing}]" for s in result.sources])
    _list(console, "Caution", [tables.CAUTION])
    if json_file is not None:
        console.print(f"Wrote {escape(str(json_file))}")
    if written:
        console.print(f"Wrote {escape(str(out))}: {', '.join(p.name for p in written)}")


@app.command()
def check(
    case: Annotated[Path | None, typer.Argument(metavar="CASE.toml", help="Case file to validate.")] = None,
    schema: Annotated[
        bool, typer.Option("--schema", help="Print the JSON Schema of the case file (for editors) and stop.")
    ] = False,
    result_schema: Annotated[
        bool, typer.Option("--result-schema", help="Print the JSON Schema of what assess --json writes and stop.")
    ] = False,
) -> None:
    """Validate a case file without running it, and show every value it resolves to."""
    from fuelair import Case

    if schema:
        print(json.dumps(Case.json_schema(), indent=2))
        return
    if result_schema:
        from fuelair.report.schema import assessment_schema

        print(json.dumps(assessment_schema(), indent=2))
        return
    if case is None:
        raise InputError(Problem("no case file given", "CASE.toml", hint="fuelair check CASE.toml, or fuelair check --schema"))
    read = Case.read(case)
    print(read.to_toml(), end="")
    _console(stderr=True).print(f"{escape(str(case))}: good. Defaults stand above as comments.", style="green")


@app.command()
def new(
    name: Annotated[str | None, typer.Argument(metavar="NAME", help="Demo case to start from; none: list them.")] = None,
    to: Annotated[
        Path | None, typer.Option("--to", metavar="FILE", help="File to write; default NAME.toml here; - prints it.")
    ] = None,
    replace: Annotated[bool, typer.Option("--replace", help="Replace the file if it exists.")] = False,
) -> None:
    """Write a commented demo case to start from."""
    from fuelair.case import templates
    from fuelair.report import files

    if name is None:
        for one in templates.names():
            print(one)
        return
    text = templates.template(name)
    if str(to) == "-":
        print(text, end="")
        return
    target = to or Path(f"{name}.toml")
    if target.exists() and not replace:
        raise InputError(Problem("exists already", "--to", str(target), hint="--replace, or another --to FILE"))
    files.write_text(target, text, "--to")
    print(f"Wrote {target}. Next: fuelair assess {target}")


@app.command()
def fuels(
    name: Annotated[
        str | None, typer.Argument(metavar="NAME", help="Show this fuel's card with the source of every value.")
    ] = None,
) -> None:
    """List the fuels, or show one fuel's card."""
    from fuelair.report.fuels import fuel_card, fuel_list

    _table(_console(), fuel_list() if name is None else fuel_card(name))


@app.command()
def validate(
    pattern: Annotated[str | None, typer.Argument(metavar="[TEXT]", help="Only rows whose id or source holds this text.")] = None,
    failed_only: Annotated[bool, typer.Option("--failed-only", help="Print only rows that fail.")] = False,
) -> None:
    """Compute every published value of the validation book and compare; exit 1 if a row fails."""
    from fuelair.proof import book

    results = book.run(pattern)
    if not results:
        raise InputError(Problem("no row of the validation book matches", "TEXT", pattern))
    console = _console()
    for title, columns, rows in book.rows_for_print([r for r in results if not (failed_only and r.passed)]):
        _grid(console, title, columns, rows)
    console.print(escape(book.summary(results)), soft_wrap=True)
    if any(r.skipped for r in results):
        console.print(escape(str(MissingExtraError("test", "Every skipped row"))))
    if any(not r.passed and not r.skipped for r in results):
        raise typer.Exit(1)


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


def _table(console: Console, table: Table) -> None:
    _grid(console, table.title, table.columns, table.rows, table.note, table.stressed)


def _grid(
    console: Console,
    title: str,
    columns: Iterable[str],
    rows: Iterable[Iterable[str]],
    note: str = "",
    stressed: int | None = None,
) -> None:
    columns = tuple(columns)
    grid = RichTable(
        box=box.SIMPLE_HEAD,
        title=f"[bold cyan]{escape(title)}[/bold cyan]",
        title_style="not italic",
        title_justify="left",
        pad_edge=False,
        show_header=any(columns),
        show_edge=False,
    )
    body = [tuple(row) for row in rows]
    for i, name in enumerate(columns):
        numeric = i > 0 and any(columns) and sum(_is_number(row[i]) for row in body) * 2 > len(body)
        words = [w for line in name.splitlines() for w in line.split()]
        least = max([len(w) for w in words] + [len(row[i]) for row in body if numeric], default=1)
        justify: Literal["right", "left"] = "right" if numeric else "left"
        style = "bold" if i == stressed else ""
        grid.add_column(escape(name), justify=justify, style=style, min_width=min(least, LONGEST_CELL), overflow="fold")
    for row in body:
        grid.add_row(*(escape(cell) for cell in row))
    console.print(Padding(grid, (0, 2)))
    if note:
        console.print(Padding(escape(note), (0, 2)), style="dim")
    console.print()


def _is_number(text: str) -> bool:
    return bool(text) and (text[0].isdigit() or text[0] in "+-")


def _list(console: Console, title: str, items: Iterable[str]) -> None:
    items = list(items)
    if not items:
        return
    console.print(f"[bold]{title}[/bold]")
    for item in items:
        grid = RichTable.grid(padding=(0, 1))
        grid.add_column(width=2, justify="right")
        grid.add_column(overflow="fold")
        grid.add_row("-", escape(item))
        console.print(grid)
    console.print()


class _Trimmed(io.TextIOBase):
    """Standard output without the blanks that tables leave at line ends."""

    def __init__(self) -> None:
        self.rest = ""

    def write(self, text: str) -> int:
        *lines, self.rest = (self.rest + text).split("\n")
        sys.stdout.writelines(line.rstrip() + "\n" for line in lines)
        return len(text)

    def flush(self) -> None:
        sys.stdout.flush()


def _console(*, stderr: bool = False) -> Console:
    if stderr:
        return Console(stderr=True, highlight=False)
    if sys.stdout.isatty():
        console = Console(highlight=False)
        return console if console.width >= NARROWEST else Console(highlight=False, width=NARROWEST)
    asked = os.environ.get("COLUMNS", "")
    width = max(int(asked), NARROWEST) if asked.isdigit() else PIPED
    return Console(file=cast("IO[str]", _Trimmed()), highlight=False, width=width)


def _complain(text: str) -> None:
    print(f"fuelair: {text}", file=sys.stderr)


if __name__ == "__main__":
    main()
