"""The verb `find`: from a wanted figure back to the input, or the best point within limits."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer
from rich.markup import escape

from fuelair.cli.console import bullets, show, study_head, terminal
from fuelair.cli.options import CaseFile, EngineOption, JsonOption, ModelOption, deliver, engine_of_study
from fuelair.errors import InputError, Problem

UNSOLVED = 3


def find(
    case: CaseFile,
    vary: Annotated[
        list[str],
        typer.Option(
            "--vary", metavar="KEY[=LOW:HIGH]", help="Number of the case that is looked for; default its allowed range."
        ),
    ],
    target: Annotated[
        str | None, typer.Option("--target", metavar="QUANTITY=VALUE", help='Wanted figure, e.g. "peak_pressure=200 bar".')
    ] = None,
    most: Annotated[
        str | None, typer.Option("--most", metavar="QUANTITY", help="Instead of a target: the most of this, within --hold.")
    ] = None,
    least: Annotated[str | None, typer.Option("--least", metavar="QUANTITY", help="The least of this, within --hold.")] = None,
    hold: Annotated[
        list[str] | None,
        typer.Option(
            "--hold", metavar="QUANTITY<=VALUE", help='Limit to keep, <= or >=, may be repeated; "limits": those of the case.'
        ),
    ] = None,
    model: ModelOption = None,
    engine: EngineOption = None,
    seed: Annotated[int, typer.Option("--seed", min=0, help="Of the scan with --most or --least.")] = 0,
    json_file: JsonOption = None,
) -> None:
    """Find which input gives a wanted figure, or the best inputs that keep several limits.

    Exit code 3 if nothing does, with the reason.
    """
    if target is None:
        _best(case, vary, most, least, hold or [], model, engine, seed, json_file)
        return
    if most is not None or least is not None or hold:
        extra = "--most" if most is not None else "--least" if least is not None else "--hold"
        raise InputError(Problem("does not go with --target", extra, allowed="--target, or --most or --least with --hold"))
    if len(vary) != 1:
        raise InputError(Problem("a target is met by one number", "--vary", ", ".join(vary), "one KEY with --target"))
    _target(case, vary[0], target, model, engine, json_file)


def _target(path: Path, vary: str, text: str, model: str | None, engine: str | None, json_file: Path | None) -> None:
    from fuelair import Case
    from fuelair.report import studies
    from fuelair.study import asked
    from fuelair.study.target import solve

    case = Case.read(path)
    varied, (quantity, value) = asked.read_varied(case, vary), asked.read_target(case, text)
    found = solve(case, varied, quantity, value, model, engine_of_study(engine))
    if not deliver(found.to_dict(), json_file, path):
        console = terminal()
        scan = f"{varied.words(varied.low)} to {varied.words(varied.high)}, {found.points} points, {found.spacing} spacing"
        study_head(
            console, case, found.model, found.engine, f"{varied.key} scanned from {scan}; {found.rows} rows", found.verdict
        )
        if found.roots:
            show(console, studies.roots(found))
        bullets(console, "Mind", found.notes())
        if json_file is not None:
            console.print(f"Wrote {escape(str(json_file))}")
    if found.outcome != "met":
        raise typer.Exit(UNSOLVED)


def _best(
    path: Path,
    vary: list[str],
    most: str | None,
    least: str | None,
    hold: list[str],
    model: str | None,
    engine: str | None,
    seed: int,
    json_file: Path | None,
) -> None:
    from fuelair import Case
    from fuelair.report import studies
    from fuelair.study import asked, figures
    from fuelair.study.optimum import solve

    if (most is None) == (least is None):
        hint = '--target "peak_pressure=200 bar", or --most imep_gross --hold "peak_pressure<=200 bar"'
        raise InputError(Problem("say what is wanted", "--target", allowed="one of --target, --most, --least", hint=hint))
    case = Case.read(path)
    varied = [asked.read_varied(case, text) for text in vary]
    holds = [one for text in hold for one in asked.read_holds(case, text)]
    quantity = figures.resolve(most if most is not None else least or "")
    chosen = engine_of_study(engine)
    found = solve(case, varied, quantity, holds, most=most is not None, model=model, engine=chosen, seed=seed)
    if not deliver(found.to_dict(), json_file, path):
        console = terminal()
        scan = f"{found.points} points scanned, seed {found.seed}; {found.rows} rows"
        study_head(console, case, found.model, found.engine, scan, found.verdict)
        for table in studies.optimum(found) if found.best is not None else []:
            show(console, table)
        bullets(console, "Mind", found.notes())
        if json_file is not None:
            console.print(f"Wrote {escape(str(json_file))}")
    if not found.feasible:
        raise typer.Exit(UNSOLVED)
