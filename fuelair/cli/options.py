"""Arguments and options that several verbs take."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from fuelair.cli.console import remark
from fuelair.errors import InputError, Problem
from fuelair.gas.engines import ENGINES, EngineName, can_compile, is_cold, usual

if TYPE_CHECKING:
    from fuelair.study.spread import Runner

CaseFile = Annotated[Path, typer.Argument(metavar="CASE.toml", help="Case file; `fuelair new` writes one to start from.")]
EngineOption = Annotated[
    str | None,
    typer.Option(
        "--engine",
        metavar="|".join(ENGINES),
        help="Gas engine; default reference for assess, for studies compiled where numba is installed.",
    ),
]
ModelOption = Annotated[str | None, typer.Option("--model", metavar="ID", help="Model; default the headline of the case.")]
JsonOption = Annotated[
    Path | None,
    typer.Option("--json", metavar="FILE", help="Write everything as JSON; - for standard output, where nothing else goes then."),
]


def deliver(data: dict[str, Any], json_file: Path | None, case: Path) -> bool:
    """Write a result as JSON where ``--json`` says; True if that was standard output, where nothing else may go.

    ``case`` is the file that must not be replaced.
    """
    from fuelair.report import files

    if json_file is None:
        return False
    if str(json_file) == "-":
        print(files.json_text(data), end="")
        return True
    files.write_text(json_file, files.json_text(data), keep=case)
    return False


WorkersOption = Annotated[int | None, typer.Option("--workers", metavar="N", help="Workers here; default the cores there are.")]
RunnerOption = Annotated[
    str | None,
    typer.Option(
        "--runner",
        metavar="threads|processes|dask",
        help="Where rows are solved; default threads, and processes with the reference engine, which threads cannot share.",
    ),
]
SchedulerOption = Annotated[
    str | None,
    typer.Option("--scheduler", metavar="ADDRESS", help="Dask scheduler, e.g. tcp://127.0.0.1:8786; none: a cluster here."),
]
AuthorityOption = Annotated[
    Path | None, typer.Option("--tls-ca", metavar="FILE", help="Authority of a tls:// scheduler's certificate (PEM).")
]
CertificateOption = Annotated[Path | None, typer.Option("--tls-cert", metavar="FILE", help="Own certificate for it (PEM).")]
KeyOption = Annotated[Path | None, typer.Option("--tls-key", metavar="FILE", help="Key of the own certificate (PEM).")]


def engine_named(text: str | None) -> EngineName | None:
    """The gas engine that ``--engine`` names; None if it was not given."""
    found: list[EngineName] = [name for name in ENGINES if name == text]
    if text is not None and not found:
        raise InputError(Problem("no such gas engine", "--engine", text, " or ".join(ENGINES)))
    return found[0] if found else None


def engine_of_study(text: str | None) -> EngineName:
    """The gas engine of a study; says so where it is the slow one for want of numba, or has to be compiled first."""
    if text is None and not can_compile():
        remark("numba is not installed, so the reference engine runs; python -m pip install 'fuelair[fast]' is far faster")
    name = engine_named(text) or usual()
    if name == "compiled" and is_cold():
        remark("The gas engine is compiled first, which takes a minute or so; `fuelair warmup` does it ahead")
    return name


def runner_named(
    engine: EngineName,
    runner: str | None,
    workers: int | None,
    scheduler: str | None,
    certificates: tuple[Path | None, Path | None, Path | None],
) -> Runner:
    """Where the rows of a study are solved, from the options of a verb; ``certificates`` as authority, own, key."""
    from fuelair.study.spread import RUNNERS, Certificates, Runner, RunnerName

    usual_name: RunnerName = "dask" if scheduler else "threads" if engine == "compiled" else "processes"
    found: list[RunnerName] = [name for name in RUNNERS if name == runner]
    if runner is not None and not found:
        raise InputError(Problem("no such runner", "--runner", runner, ", ".join(RUNNERS)))
    authority, own, key = certificates
    tls = Certificates(authority, own, key) if authority and own and key else None
    if tls is None and any(certificates):
        raise InputError(Problem("go together", "--tls-ca, --tls-cert, --tls-key", hint="all three"))
    return Runner(found[0] if found else usual_name, workers, scheduler, tls)
