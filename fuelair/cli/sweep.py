"""The verb `sweep`: a case with some keys varied, one row a case, to one file."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from fuelair.cli.console import grid, progress, terminal
from fuelair.cli.options import (
    AuthorityOption,
    CaseFile,
    CertificateOption,
    EngineOption,
    KeyOption,
    ModelOption,
    RunnerOption,
    SchedulerOption,
    WorkersOption,
    engine_of_study,
    runner_named,
)
from fuelair.errors import InputError, Problem

if TYPE_CHECKING:
    from fuelair.case import Case
    from fuelair.study.batch import Study
    from fuelair.study.sampling import Design
    from fuelair.study.sweep import Summary

OverOption = Annotated[
    list[str] | None,
    typer.Option("--over", metavar="KEY=VALUES", help="A key to vary: START:STOP:COUNT, START:STOP:COUNT:log, or a,b,c. Repeat."),
]
SamplesOption = Annotated[
    Path | None, typer.Option("--samples", metavar="FILE", help="Rows from a .csv or .parquet file whose heads are keys.")
]
DesignOption = Annotated[
    str,
    typer.Option(
        "--design",
        metavar="grid|latin-hypercube|sobol",
        help="Every combination, the last key fastest; or --rows points over KEY=START:STOP.",
    ),
]
_FILLERS = "--over, --design, --rows and --seed"
OutOption = Annotated[Path, typer.Option("--out", metavar="FILE", help="Table to write, .csv or .parquet.")]


def sweep(
    case: CaseFile,
    out: OutOption,
    over: OverOption = None,
    samples: SamplesOption = None,
    design: DesignOption = "grid",
    rows: Annotated[int | None, typer.Option("--rows", metavar="N", help="Rows of a random design.")] = None,
    seed: Annotated[int | None, typer.Option("--seed", metavar="S", help="Seed of a random design; default 0.")] = None,
    model: ModelOption = None,
    quantities: Annotated[
        str | None, typer.Option("--quantities", metavar="A,B", help="Only these quantities; default the model's own.")
    ] = None,
    also: Annotated[str | None, typer.Option("--also", metavar="A,B", help="These quantities beside the model's own.")] = None,
    engine: EngineOption = None,
    workers: WorkersOption = None,
    runner: RunnerOption = None,
    scheduler: SchedulerOption = None,
    authority: AuthorityOption = None,
    certificate: CertificateOption = None,
    key: KeyOption = None,
    fresh: Annotated[bool, typer.Option("--fresh", help="Throw away the parts of an earlier run.")] = False,
    replace: Annotated[bool, typer.Option("--replace", help="Replace the file if it exists.")] = False,
) -> None:
    """Solve a case with some of its keys varied; one row a case, to one table."""
    from fuelair import Case
    from fuelair.study import formats
    from fuelair.study.batch import Study
    from fuelair.study.sweep import sweep as run

    formats.check(out)
    template = Case.read(case)
    made = _design(template, over or [], samples, design, rows, seed)
    study = Study(template, made.keys, model=model, engine=engine_of_study(engine), quantities=_quantities(quantities, also))
    for taken in (case, samples):
        if taken is not None and out.exists() and out.samefile(taken):
            raise InputError(Problem("is what the sweep reads, which would be lost", "--out", str(out), "another name"))
    where = runner_named(study.engine, runner, workers, scheduler, (authority, certificate, key))
    with progress(out.name) as shown:
        summary = run(study, made, out, runner=where, fresh=fresh, replace=replace, progress=shown)
    print(f"Wrote {out}: {summary.rows} rows, {summary.rows - summary.failed} solved by {study.model or 'headline models'}.")
    if summary.failed:
        _failures(study, made, summary)
        raise typer.Exit(1)


def _design(case: Case, over: list[str], samples: Path | None, method: str, rows: int | None, seed: int | None) -> Design:
    from fuelair.study import sampling
    from fuelair.study.samples import read_samples

    if samples is not None:
        if over or method != "grid" or rows is not None or seed is not None:
            raise InputError(Problem("holds every row", "--samples", str(samples), hint=f"leave out {_FILLERS}"))
        return read_samples(samples, case)
    given: dict[str, str] = {}
    for text in over:
        key, values = sampling.split(text)
        if key in given:
            raise InputError(Problem("is varied twice", key, values))
        given[key] = values
    return sampling.design(case, given, method=sampling.method_named(method), rows=rows, seed=seed)


def _quantities(only: str | None, also: str | None) -> list[str] | None:
    from fuelair.study.figures import MODEL_FIGURES

    if only is None and also is None:
        return None
    chosen = list(MODEL_FIGURES) if only is None else _names(only)
    return chosen + (_names(also) if also is not None else [])


def _names(text: str) -> list[str]:
    return [name.strip() for name in text.split(",") if name.strip()]


def _failures(study: Study, design: Design, summary: Summary) -> None:
    """Rows without figures by status, and why the first of each."""
    from fuelair.gas.engine import Status

    lines = []
    for status, count in summary.counts.items():
        if status is Status.OK:
            continue
        row = summary.first[status]
        reason = status.reason
        if status is Status.INPUT_REFUSED:
            reason = study.why({key: values[0] for key, values in design.columns(row, row + 1).items()}) or reason
        lines.append((status.label, str(count), str(row + 1), reason))
    grid(terminal(), "Rows without figures", ("status", "rows", "first at row", "reason"), lines)
