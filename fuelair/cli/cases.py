"""Verbs about what a case is made of: `check`, `new`, `fuels`."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Annotated

import typer
from rich.markup import escape

from fuelair.cli.console import show, terminal
from fuelair.errors import InputError, Problem


def check(
    case: Annotated[Path | None, typer.Argument(metavar="CASE.toml", help="Case file to validate.")] = None,
    schema: Annotated[
        bool, typer.Option("--schema", help="Print the JSON Schema of the case file (for editors) and stop.")
    ] = False,
    result_schema: Annotated[
        bool, typer.Option("--result-schema", help="Print the JSON Schema of what assess --json writes and stop.")
    ] = False,
    study_schema: Annotated[
        str | None,
        typer.Option("--study-schema", metavar="find|best|band", help="The same for find --target, find --most, band."),
    ] = None,
) -> None:
    """Validate a case file without running it, and show every value it resolves to."""
    from fuelair import Case

    if study_schema is not None:
        from fuelair.report.study_schema import named

        print(json.dumps(named(study_schema), indent=2))
        return
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
    terminal(stderr=True).print(f"{escape(str(case))}: good. Defaults stand above as comments.", style="green")


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


def fuels(
    name: Annotated[
        str | None, typer.Argument(metavar="NAME", help="Show this fuel's card with the source of every value.")
    ] = None,
) -> None:
    """List the fuels, or show one fuel's card."""
    from fuelair.report.fuels import fuel_card, fuel_list

    show(terminal(), fuel_list() if name is None else fuel_card(name))
