"""The verb `band`: what the spreads of [tolerance] do to every quantity."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer
from rich.markup import escape

from fuelair.cli.console import bullets, progress, show, study_head, terminal
from fuelair.cli.options import (
    CaseFile,
    EngineOption,
    JsonOption,
    ModelOption,
    RunnerOption,
    WorkersOption,
    deliver,
    engine_of_study,
    runner_named,
)
from fuelair.errors import InputError, Problem


def band(
    case: CaseFile,
    rows: Annotated[
        int | None, typer.Option("--rows", metavar="N", help="Size of the sample, a power of two; default that of the case.")
    ] = None,
    seed: Annotated[int | None, typer.Option("--seed", help="Of the random numbers; default that of the case.")] = None,
    quantities: Annotated[
        str | None,
        typer.Option(
            "--quantities", metavar="NAME,...", help="Quantities to report, e.g. peak_pressure,imep_gross; default all."
        ),
    ] = None,
    model: ModelOption = None,
    engine: EngineOption = None,
    workers: WorkersOption = None,
    runner: RunnerOption = None,
    json_file: JsonOption = None,
    out: Annotated[
        Path | None, typer.Option("--out", metavar="FOLDER", help="Write JSON, CSV tables and the resolved case there.")
    ] = None,
) -> None:
    r"""Give every quantity a band from the spreads in \[tolerance], and say what moves it most."""
    from fuelair import Case
    from fuelair.report import files, studies
    from fuelair.study import tolerance

    if out is not None and not str(out).strip("."):
        raise InputError(Problem("names no folder of its own", "--out", str(out), "a folder", "--out results"))
    names = None if quantities is None else [name.strip() for name in quantities.split(",") if name.strip()]
    read = Case.read(case)
    chosen = engine_of_study(engine)
    where = runner_named(chosen, runner, workers, None, (None, None, None))
    with progress("band") as shown:
        found = tolerance.band(
            read, rows=rows, seed=seed, quantities=names, model=model, engine=chosen, runner=where, progress=shown
        )
    written = files.write_texts(studies.band_files(found), out, keep=case) if out is not None else []
    if deliver(found.to_dict(), json_file, case):
        return
    console = terminal()
    spread = ", ".join(one.key for one in found.spreads)
    study_head(console, read, found.model, found.engine, f"spread: {spread}; {found.rows + found.extra + 1} rows", found.verdict)
    seen = studies.seen(found, chosen=names is not None)
    show(console, studies.bands(found, seen))
    show(console, studies.movers(found, seen))
    for name in seen:
        if name == tolerance.PEAK or names is not None:
            show(console, studies.influence(found, name))
    peak = studies.design_peak(found)
    if peak is not None:
        show(console, peak)
    bullets(console, "Mind", found.notes())
    if json_file is not None:
        console.print(f"Wrote {escape(str(json_file))}")
    if written:
        console.print(f"Wrote {escape(str(out))}: {', '.join(p.name for p in written)}")
