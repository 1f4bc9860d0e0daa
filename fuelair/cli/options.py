"""Arguments and options that several verbs take."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

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


def engine_named(text: str | None) -> EngineName | None:
    """The gas engine that ``--engine`` names; None if it was not given."""
    found: list[EngineName] = [name for name in ENGINES if name == text]
    if text is not None and not found:
        raise InputError(Problem("no such gas engine", "--engine", text, " or ".join(ENGINES)))
    return found[0] if found else None
