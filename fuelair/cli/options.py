"""Arguments and options that several verbs take."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any

import typer

from fuelair.errors import InputError, Problem
from fuelair.gas.engines import ENGINES, EngineName

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


def engine_named(text: str | None) -> EngineName | None:
    """The gas engine that ``--engine`` names; None if it was not given."""
    found: list[EngineName] = [name for name in ENGINES if name == text]
    if text is not None and not found:
        raise InputError(Problem("no such gas engine", "--engine", text, " or ".join(ENGINES)))
    return found[0] if found else None
