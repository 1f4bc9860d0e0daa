"""Runs the validation book: computes every row, judges it, sums up.

Nothing is printed here. A row passes when computed less published, less the expected difference if
the row states one, lies within the tolerance. A range is met anywhere inside it.
"""

from __future__ import annotations

import fnmatch
import importlib.util
import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, NamedTuple

from fuelair.errors import DataError, FuelairError
from fuelair.proof.computations import COMPUTATIONS, LOOKUPS
from fuelair.proof.reading import FACTORS, Row, read_book
from fuelair.proof.registry import Function

MOST_DIGITS = 15.0


@dataclass(frozen=True, slots=True)
class RowResult:
    """One row after the run; figures in the published ``unit``.

    Attributes
    ----------
    file, id, source, standing, quantity, unit, own, explained : as in the book.
    computed, published : the two figures; of a range, the nearest figure inside it. None if skipped or failed to run.
    difference : computed less published.
    expected_difference : the known part of it, zero if none is stated.
    tolerance : allowed deviation of the rest.
    passed : whether it holds; None if skipped.
    digits : matching digits, -log10 of the relative difference, at most 15; None if undefined.
    skipped : why it was not run, or empty.
    error : why it could not be computed, or empty.
    """

    file: str
    id: str
    source: str
    standing: str
    quantity: str
    unit: str
    own: bool
    explained: str
    computed: float | None = None
    published: float | None = None
    difference: float | None = None
    expected_difference: float = 0.0
    tolerance: float | None = None
    passed: bool | None = None
    digits: float | None = None
    skipped: str = ""
    error: str = ""

    @property
    def used(self) -> float:
        """Part of the tolerance that is used: 1 at its edge; infinite if not computed, 0 if skipped."""
        if self.passed is None:
            return 0.0
        if self.difference is None or not self.tolerance:
            return math.inf
        return abs(self.difference - self.expected_difference) / self.tolerance


@dataclass(frozen=True, slots=True)
class Summary:
    """Counts of a run, and the row that used most of its tolerance (None if nothing ran)."""

    rows: int
    passed: int
    failed: int
    skipped: int
    worst: RowResult | None

    @property
    def good(self) -> bool:
        """Whether something ran and nothing failed."""
        return self.failed == 0 and self.passed > 0


class Sheet(NamedTuple):
    """What a face shows of one file: title, column heads, and text cells row by row."""

    title: str
    heads: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]


def load(folder: Path | None = None) -> list[Row]:
    """Every row of the book, not run; see `fuelair.proof.reading.read_book`."""
    return read_book(folder)


def run(pattern: str | None = None, *, folder: Path | None = None) -> list[RowResult]:
    """Run the rows of the book.

    Parameters
    ----------
    pattern : shell-style pattern or plain part of row id, file name or source key; None runs all.
    folder : of the book's files; default those that come with the package.

    Raises
    ------
    DataError : a file of the book is damaged. A pattern that no row fits gives an empty list.
    """
    rows = [row for row in load(folder) if pattern is None or _fits(row, pattern)]
    for row in rows:
        _check_names(row)
    return [run_row(row) for row in rows]


def run_row(row: Row) -> RowResult:
    """Compute and judge one row; an error in the computation fails the row and is kept as text."""
    base = RowResult(
        file=row.file,
        id=row.id,
        source=row.source,
        standing=row.standing,
        quantity=row.quantity,
        unit=row.published.unit,
        own=row.own,
        explained=_explained(row),
    )
    missing = [name for name in row.needs if importlib.util.find_spec(name) is None]
    if missing:
        return replace(base, skipped=f"needs the package {', '.join(missing)}: python -m pip install 'fuelair[test]'")
    try:
        computed = _call(COMPUTATIONS, row.compute, row)
        published, expected, tolerance = _figures(row, computed)
    except (FuelairError, ArithmeticError, LookupError, TypeError, ValueError) as error:
        return replace(base, passed=False, error=f"{type(error).__name__}: {error}")
    difference = computed - published
    return replace(
        base,
        computed=computed,
        published=published,
        difference=difference,
        expected_difference=expected,
        tolerance=tolerance,
        passed=abs(difference - expected) <= tolerance,  # False for NaN
        digits=_digits(difference, published),
    )


def _explained(row: Row) -> str:
    return " ".join(part for part in (row.explained, row.expected.reason if row.expected else "") if part)


def tally(results: Sequence[RowResult]) -> Summary:
    """Count a run and name its worst row."""
    ran = [r for r in results if r.passed is not None]
    return Summary(
        rows=len(results),
        passed=sum(r.passed is True for r in ran),
        failed=sum(r.passed is False for r in ran),
        skipped=len(results) - len(ran),
        worst=max(ran, key=lambda r: r.used) if ran else None,
    )


def summary(results: Sequence[RowResult]) -> str:
    """One line on a run: counts, and the row that used most of its tolerance."""
    t = tally(results)
    line = f"{t.rows} rows: {t.passed} passed, {t.failed} failed, {t.skipped} skipped"
    if t.worst is None:
        return line
    if math.isinf(t.worst.used):
        return f"{line}; not computed: {t.worst.id}"
    return f"{line}; closest to its tolerance: {t.worst.id} ({100.0 * t.worst.used:.0f} % of it)"


def rows_for_print(results: Iterable[RowResult]) -> list[Sheet]:
    """One sheet of text cells per file, in the order of the run."""
    heads = (
        "row",
        "computed",
        "published",
        "unit",
        "difference",
        "expected",
        "tolerance",
        "digits",
        "standing",
        "verdict",
    )
    files: dict[str, list[RowResult]] = {}
    for result in results:
        files.setdefault(result.file, []).append(result)
    return [Sheet(f"{name} ({of[0].source})", heads, tuple(_cells(r) for r in of)) for name, of in files.items()]


def _cells(r: RowResult) -> tuple[str, ...]:
    standing = f"{r.standing}, own" if r.own else r.standing
    verdict = f"skipped: {r.skipped.partition(':')[0]}" if r.passed is None else "ok" if r.passed else f"FAILED {r.error}".strip()
    known = f"{r.expected_difference:+.3g}" if r.expected_difference else ""
    return (
        r.id,
        _shown(r.computed),
        _shown(r.published),
        "" if r.unit == "1" else r.unit,
        "-" if r.difference is None else f"{r.difference:+.3g}",
        known,
        "-" if r.tolerance is None else f"{r.tolerance:.2g}",
        "-" if r.digits is None else f"{r.digits:.1f}",
        standing,
        verdict,
    )


def _shown(value: float | None) -> str:
    return "-" if value is None else f"{value:.6g}"


def _fits(row: Row, pattern: str) -> bool:
    names = (row.id, row.file, row.source)
    return any(pattern in name or fnmatch.fnmatchcase(name, pattern) for name in names)


def _check_names(row: Row) -> None:
    wanted = [(COMPUTATIONS, row.compute), (LOOKUPS, row.published.lookup)]
    wanted.append((LOOKUPS, row.expected.lookup if row.expected else ""))
    for register, name in wanted:
        if name and name not in register:
            raise DataError(f"{row.file}, row {row.id!r}: {name!r} is none of {', '.join(sorted(register))}")


def _call(register: dict[str, Function], name: str, row: Row, further: Mapping[str, Any] | None = None) -> float:
    """Value of a named function on the row's inputs, in the published unit."""
    return float(register[name](**{**row.inputs, **(further or {})})) / FACTORS[row.published.unit]


def _figures(row: Row, computed: float) -> tuple[float, float, float]:
    """Published figure, expected difference and tolerance in the published unit."""
    if row.published.range is not None:
        published = min(max(computed, row.published.range[0]), row.published.range[1])
    elif row.published.value is not None:
        published = row.published.value
    else:
        published = _call(LOOKUPS, row.published.lookup, row)
    expected = 0.0
    if row.expected is not None:
        if row.expected.lookup:
            expected = _call(LOOKUPS, row.expected.lookup, row, row.expected.inputs)
        else:
            expected = row.expected.value or (row.expected.relative or 0.0) * published
    relative = row.tolerance.relative
    return published, expected, row.tolerance.absolute or 0.0 if relative is None else relative * abs(published)


def _digits(difference: float, published: float) -> float | None:
    if not published or not math.isfinite(difference):
        return None
    return MOST_DIGITS if difference == 0.0 else min(-math.log10(abs(difference / published)), MOST_DIGITS)
