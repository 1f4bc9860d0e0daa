"""The verb `validate`: the book of published values."""

from __future__ import annotations

from typing import Annotated

import typer
from rich.markup import escape

from fuelair.cli.console import grid, terminal
from fuelair.errors import InputError, MissingExtraError, Problem


def validate(
    pattern: Annotated[str | None, typer.Argument(metavar="[TEXT]", help="Only rows whose id or source holds this text.")] = None,
    failed_only: Annotated[bool, typer.Option("--failed-only", help="Print only rows that fail.")] = False,
) -> None:
    """Compute every published value of the validation book and compare; exit 1 if a row fails."""
    from fuelair.proof import book

    results = book.run(pattern)
    if not results:
        raise InputError(Problem("no row of the validation book matches", "TEXT", pattern))
    console = terminal()
    for title, columns, rows in book.rows_for_print([r for r in results if not (failed_only and r.passed)]):
        grid(console, title, columns, rows)
    console.print(escape(book.summary(results)), soft_wrap=True)
    if any(r.skipped for r in results):
        console.print(escape(str(MissingExtraError("test", "Every skipped row"))))
    if any(not r.passed and not r.skipped for r in results):
        raise typer.Exit(1)
