"""Rules between the spreads of [tolerance], the keys they belong to and the case; a spread as plain numbers."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from fuelair.case.fields import Within
from fuelair.case.keys import numbers
from fuelair.case.schema import SECTIONS
from fuelair.case.tolerance import Correlation, Distribution, Spread
from fuelair.errors import InputError, Problem
from fuelair.quantities import in_unit

if TYPE_CHECKING:
    from fuelair.case.rules import Draft

LEAST_MASS = 0.01
"""Share of a normal spread that must lie between its ends."""


@dataclass(frozen=True, slots=True)
class Marginal:
    """The spread of one key in stored units.

    Attributes
    ----------
    key, distribution : as written.
    centre : mean of the uncut normal, middle of the uniform, peak of the triangular spread.
    deviation : standard deviation of the uncut normal, NaN for the others.
    low, high : ends; a normal spread is cut there.
    """

    key: str
    distribution: Distribution
    centre: float
    deviation: float
    low: float
    high: float

    @property
    def cut(self) -> float:
        """Share of the uncut spread beyond the ends."""
        if self.distribution != "normal":
            return 0.0
        return 1.0 - _below((self.high - self.centre) / self.deviation) + _below((self.low - self.centre) / self.deviation)


def _below(z: float) -> float:
    return 0.5 * math.erfc(-z / math.sqrt(2.0))


def marginal(part: Spread, nominal: float) -> Marginal:
    """Return the spread of a key whose value in the case is ``nominal``; a normal one is cut at the key's range.

    Raises
    ------
    InputError : the figures contradict each other; keys of the problems are those of the part alone.
    """
    kind = numbers()[part.key]
    normal = part.distribution == "normal"
    needs, other = ("standard_deviation", "half_width") if normal else ("half_width", "standard_deviation")
    if getattr(part, other) is not None:
        goes = "a uniform or triangular" if normal else "a normal"
        raise InputError(Problem(f"belongs to {goes} spread", other, getattr(part, other), needs))
    width, ends = getattr(part, needs), (part.low, part.high)
    if normal and width is None:
        raise InputError(Problem("a normal spread needs it", needs, None, 'e.g. "3 K"'))
    if not normal and (width is None) == (None in ends):
        words = "half_width, or both low and high"
        raise InputError(Problem(f"a {part.distribution} spread has ends", needs, width, words))
    if not normal and width is not None and ends != (None, None):
        raise InputError(Problem("the ends are given twice", needs, width, "half_width, or both low and high"))
    if part.distribution == "uniform" and part.centre is not None and width is None:
        raise InputError(Problem("the middle lies halfway between low and high", "centre", part.centre, hint="remove it"))
    centre = nominal if part.centre is None else part.centre
    if width is not None and part.measure == "relative":
        if centre == 0.0:
            raise InputError(Problem("a share of zero is no width", needs, width, hint='measure = "absolute"'))
        width *= abs(centre)
    low, high = (kind.low if part.low is None else part.low), (kind.high if part.high is None else part.high)
    if not normal and width is not None:
        low, high = centre - width, centre + width
    elif part.distribution == "uniform":
        centre = 0.5 * (low + high)
    found = Marginal(part.key, part.distribution, centre, width if normal else math.nan, low, high)
    _sensible(found, kind)
    return found


def _sensible(spread: Marginal, kind: Within) -> None:
    """Refuse ends in the wrong order, beyond the key's range or away from the centre."""
    low, high, centre = (in_unit(x, kind.unit, kind.dimension) for x in (spread.low, spread.high, spread.centre))
    if not spread.low < spread.high:
        raise InputError(Problem(f"the lower end {low} is not below the upper end {high}", "low"))
    if not kind.low <= spread.low < spread.high <= kind.high:
        message = f"the spread from {low} to {high} leaves the range of {spread.key}"
        raise InputError(Problem(message, "half_width", None, kind.allowed()))
    if spread.distribution != "normal" and not spread.low <= spread.centre <= spread.high:
        raise InputError(Problem(f"{centre} does not lie between the ends {low} and {high}", "centre"))
    if spread.cut > 1.0 - LEAST_MASS:
        message = f"nearly the whole normal spread around {centre} lies beyond {low} to {high}"
        raise InputError(Problem(message, "standard_deviation"))


def rule(draft: Draft) -> Iterator[Problem]:
    """Every problem between the spreads, their keys and the case."""
    parts: tuple[Spread, ...] | None = draft.get("tolerance.spread")
    if parts is None:
        return
    if not parts:
        yield Problem("nothing spreads", "tolerance.spread", None, "at least one key")
    from fuelair.case import defaults  # only here, for it imports the rules, which import this module

    following = defaults.follow(draft)
    keys = [part.key for part in parts]
    for number, part in enumerate(parts):
        place = f"tolerance.spread[{number}]"
        if part.key in keys[:number]:
            yield Problem(f"{part.key} spreads twice", f"{place}.key", part.key, hint="keep one of the two")
        nominal = _nominal(draft, part.key, following)
        if nominal is None:
            yield from _no_value(draft, part.key, place)
            continue
        try:
            marginal(part, nominal)
        except InputError as error:
            for problem in error.problems:
                yield replace(problem, key=f"{place}.{problem.key}")
    yield from _correlations(draft, keys)


def _nominal(draft: Draft, key: str, following: Mapping[str, Any]) -> float | None:
    section, _, name = key.partition(".")
    value = draft.get(key) if draft.has(key) else following.get(key, SECTIONS[section].model_fields[name].default)
    return value if isinstance(value, float) else None


def _no_value(draft: Draft, key: str, place: str) -> Iterator[Problem]:
    if draft.get(key) == "solve":
        yield Problem(
            f'{key} = "solve" follows from the cycle and cannot spread', f"{place}.key", key, hint="give it as a number"
        )
    elif not draft.has(key):
        yield Problem(f"the case gives no {key}", f"{place}.key", key, "a key that has a value in this case")


def _correlations(draft: Draft, keys: list[str]) -> Iterator[Problem]:
    pairs: tuple[Correlation, ...] = draft.get("tolerance.correlation") or ()
    seen: list[set[str]] = []
    for number, pair in enumerate(pairs):
        place = f"tolerance.correlation[{number}]"
        for name, key in (("key", pair.key), ("other", pair.other)):
            if key not in keys:
                yield Problem(f"{key} does not spread", f"{place}.{name}", key, ", ".join(keys))
        if pair.key == pair.other:
            yield Problem("a key cannot be correlated with itself", f"{place}.other", pair.other)
        elif {pair.key, pair.other} in seen:
            yield Problem("the pair stands twice", place, None, hint="keep one of the two")
        seen.append({pair.key, pair.other})
    if cholesky(correlation_matrix(keys, pairs)) is None:
        message = "the coefficients contradict each other: their matrix is not positive definite"
        yield Problem(message, "tolerance.correlation", None, hint="smaller coefficients, or correlate the third pair too")


def correlation_matrix(keys: list[str], pairs: tuple[Correlation, ...]) -> list[list[float]]:
    """Return the matrix of coefficients in the order of the keys, ones on its diagonal."""
    matrix = [[1.0 if i == j else 0.0 for j in range(len(keys))] for i in range(len(keys))]
    for pair in pairs:
        if pair.key in keys and pair.other in keys and pair.key != pair.other:
            i, j = keys.index(pair.key), keys.index(pair.other)
            matrix[i][j] = matrix[j][i] = pair.coefficient
    return matrix


def cholesky(matrix: list[list[float]]) -> list[list[float]] | None:
    """Return the lower triangular root of a symmetric matrix, None if it is not positive definite."""
    size = len(matrix)
    root = [[0.0] * size for _ in range(size)]
    for i in range(size):
        for j in range(i + 1):
            rest = matrix[i][j] - sum(root[i][k] * root[j][k] for k in range(j))
            if i == j:
                if not rest > 0.0:
                    return None
                root[i][i] = math.sqrt(rest)
            else:
                root[i][j] = rest / root[j][j]
    return root
