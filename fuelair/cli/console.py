"""What verbs print with: tables, lists, errors, and the width they keep."""

from __future__ import annotations

import io
import os
import sys
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from typing import IO, TYPE_CHECKING, Literal, cast

from rich import box
from rich.console import Console
from rich.markup import escape
from rich.padding import Padding
from rich.table import Table as RichTable

if TYPE_CHECKING:
    from fuelair.case import Case
    from fuelair.report.tables import Table

NARROWEST, PIPED = 110, 120
"""Width of the output in characters: the least that cuts no table, and when it is not a terminal."""
LONGEST_CELL = 22
"""Width up to which a number or a word of a head is never cut."""


def show(console: Console, table: Table) -> None:
    """Print a table of a report."""
    grid(console, table.title, table.columns, table.rows, table.note, table.stressed)


def grid(
    console: Console,
    title: str,
    columns: Iterable[str],
    rows: Iterable[Iterable[str]],
    note: str = "",
    stressed: int | None = None,
) -> None:
    """Print columns and rows; columns of numbers to the right, column ``stressed`` in bold."""
    columns = tuple(columns)
    frame = RichTable(
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
        frame.add_column(escape(name), justify=justify, style=style, min_width=min(least, LONGEST_CELL), overflow="fold")
    for row in body:
        frame.add_row(*(escape(cell) for cell in row))
    console.print(Padding(frame, (0, 2)))
    if note:
        console.print(Padding(escape(note), (0, 2)), style="dim")
    console.print()


def _is_number(text: str) -> bool:
    return bool(text) and (text[0].isdigit() or text[0] in "+-")


def study_head(console: Console, case: Case, model: str, engine: str, scan: str, verdict: str) -> None:
    """Print what a study was asked and what came of it, before its tables."""
    console.print()
    console.print(f"[bold]{escape(case.title or 'Untitled case')}[/bold]")
    console.print(escape(f"{model}, {engine} engine; {scan}"), style="dim")
    console.print()
    console.print(Padding(f"[bold]{escape(verdict)}[/bold]", (0, 2)))
    console.print()


def bullets(console: Console, title: str, items: Iterable[str]) -> None:
    """Print items under a title, nothing if there are none."""
    items = list(items)
    if not items:
        return
    console.print(f"[bold]{title}[/bold]")
    for item in items:
        line = RichTable.grid(padding=(0, 1))
        line.add_column(width=2, justify="right")
        line.add_column(overflow="fold")
        line.add_row("-", escape(item))
        console.print(line)
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


def terminal(*, stderr: bool = False) -> Console:
    """Console on standard output (or error) whose lines hold the widest table."""
    if stderr:
        return Console(stderr=True, highlight=False)
    if sys.stdout.isatty():
        console = Console(highlight=False)
        return console if console.width >= NARROWEST else Console(highlight=False, width=NARROWEST)
    asked = os.environ.get("COLUMNS", "")
    width = max(int(asked), NARROWEST) if asked.isdigit() else PIPED
    return Console(file=cast("IO[str]", _Trimmed()), highlight=False, width=width)


def complain(text: str) -> None:
    """Say on standard error what is wrong."""
    print(f"fuelair: {text}", file=sys.stderr)


def remark(text: str) -> None:
    """Say something by the way on standard error."""
    terminal(stderr=True).print(escape(text), style="dim", soft_wrap=True)


@contextmanager
def progress(what: str) -> Iterator[Callable[[int, int], None]]:
    """A bar on standard error for work of so many rows; none where that is no terminal.

    Yields a function that takes rows done and rows in all.
    """
    if not sys.stderr.isatty():
        yield lambda done, rows: None
        return
    from rich import progress as bars

    console = terminal(stderr=True)
    columns = (
        bars.TextColumn("{task.description}"),
        bars.BarColumn(),
        bars.MofNCompleteColumn(),
        bars.TaskProgressColumn(),
        bars.TimeRemainingColumn(),
    )
    with bars.Progress(*columns, console=console, transient=True) as shown:
        task = shown.add_task(escape(what), total=None)
        yield lambda done, rows: shown.update(task, completed=done, total=rows)
