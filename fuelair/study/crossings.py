"""Where a function of one number meets a target: every crossing that a scan can see.

The function is evaluated in batches only. It may fail at some points (gaps), jump, run level on the target, or
touch it and turn back; each is told apart. Complete means: complete on the scan, its extrema and the borders of
its gaps refined. What happens between two neighbours of the scan without showing in an extremum is not seen.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from fuelair import roots
from fuelair.gas.engine import Array, Codes, Mask, Status
from fuelair.study.brackets import Indices, borders, last, lowest, runs

Evaluate = Callable[[Array], tuple[Array, Codes]]
"""(N,) numbers -> (N,) values, NaN where failed, and (N,) status codes."""

POINTS = 257
"""Points of the scan."""
LOGARITHMIC_FROM = 100.0
"""Upper over lower end from which a scan is spaced logarithmically."""
MET = 1e-9
"""Miss at which the target counts as met, relative to the target (to the largest value for a target of zero)."""
FLAT = 1e-11
"""Change between neighbours of the scan, relative to the same, up to which the function counts as level."""
SLOPE_STEP = 1e-5
"""Half the width of the central difference, relative to the number."""
NEAR_ZERO = 1e-3
"""Share of the range that stands in for a smaller number where something is relative to it."""
ASIDE = 1e-9
"""Share of the range at which the values beside a jump are taken."""
NARROWEST = 1e-16
"""Width of a bracket at which a root is done, relative to the range."""


@dataclass(frozen=True, slots=True)
class Gap:
    """A stretch in which the function fails, between the last points that do not (or the end of the range)."""

    low: float
    high: float
    status: Status


@dataclass(frozen=True, slots=True)
class Jump:
    """A place where the function passes the target without meeting it, and its values just before and after."""

    at: float
    before: float
    after: float


@dataclass(frozen=True, slots=True)
class Crossings:
    """What a search found.

    Attributes
    ----------
    roots : where the target is met, ascending (R,).
    slopes : change of the function per change of its number there (R,), NaN where no neighbour is solved.
    touching : roots at which the function turns back (R,).
    levels : stretches on the target, (low, high) each.
    gaps, jumps : see there.
    constant : the function is level wherever it is solved.
    lowest, highest : (number, value) of the extremes seen; None if every point failed.
    rows : evaluations.
    """

    roots: Array
    slopes: Array
    touching: Mask
    levels: tuple[tuple[float, float], ...]
    gaps: tuple[Gap, ...]
    jumps: tuple[Jump, ...]
    constant: bool
    lowest: tuple[float, float] | None
    highest: tuple[float, float] | None
    rows: int


def logarithmic(low: float, high: float) -> bool:
    """Whether a range is scanned with logarithmic spacing.

    >>> logarithmic(0.01, 5.0), logarithmic(1.5, 60.0), logarithmic(0.0, 1.0)
    (True, False, False)
    """
    return low > 0.0 and high / low > LOGARITHMIC_FROM


def spaced(low: float, high: float, points: int = POINTS) -> Array:
    """Points of a scan from ``low`` to ``high``, both included."""
    grid = np.geomspace(low, high, points) if logarithmic(low, high) else np.linspace(low, high, points)
    grid[0], grid[-1] = low, high
    return np.asarray(grid)


def crossings(evaluate: Evaluate, low: float, high: float, target: float, *, points: int = POINTS) -> Crossings:
    """Every crossing of ``target`` between ``low`` and ``high`` that a scan of ``points`` points can see.

    Elements of ``evaluate`` must not influence each other.
    """
    return _Search(evaluate, low, high, target).run(points)


class _Search:
    """One search: the points known so far (ascending, NaN where failed) and what was found among them."""

    def __init__(self, evaluate: Evaluate, low: float, high: float, target: float) -> None:
        self.function, self.low, self.high, self.target = evaluate, low, high, target
        self.rows, self.met = 0, MET * abs(target)
        self.x = self.y = np.empty(0)
        self.gaps: list[Gap] = []
        self.jumps: list[Jump] = []

    def run(self, points: int) -> Crossings:
        """Scan, refine, and gather."""
        scan = spaced(self.low, self.high, points)
        y, status = self.evaluate(scan)
        size = abs(self.target) or float(np.max(np.abs(y), where=np.isfinite(y), initial=0.0)) or 1.0
        self.met = MET * size
        self._add(scan, y)
        self._borders(status)
        pairs = self._pairs()
        flat = pairs & (np.abs(np.diff(self.y)) <= FLAT * size)
        levels, taken = self._levels(pairs)
        exact, turns = self._exact(taken)
        brackets = self._signs(pairs, taken)
        turned, touching = self._extrema(pairs, flat, taken)
        found = self._refined(brackets + turned)
        touch = np.concatenate([np.zeros(len(found), bool), turns, np.ones(len(touching), bool)])
        x, touch = self._merged(np.concatenate([found, exact, touching]), touch)
        known = np.isfinite(self.y)
        ends = [(float(self.x[known][i]), float(self.y[known][i])) for i in _ends(self.y[known])]
        return Crossings(
            roots=x,
            slopes=self._slopes(x),
            touching=touch,
            levels=levels,
            gaps=tuple(sorted(self.gaps, key=lambda gap: gap.low)),
            jumps=tuple(self.jumps),
            constant=bool(flat[pairs].all()) and bool(pairs.any()),
            lowest=ends[0] if ends else None,
            highest=ends[-1] if ends else None,
            rows=self.rows,
        )

    def evaluate(self, x: Array) -> tuple[Array, Codes]:
        """The function, evaluations counted."""
        self.rows += len(x)
        return self.function(x) if len(x) else (x, np.zeros(0, np.int8))

    def miss(self, x: Array) -> Array:
        """Value less target."""
        return np.asarray(self.evaluate(x)[0] - self.target)

    def _add(self, x: Array, y: Array) -> None:
        order = np.argsort(np.concatenate([self.x, x]), kind="stable")
        self.x, self.y = np.concatenate([self.x, x])[order], np.concatenate([self.y, y])[order]

    def _pairs(self) -> Mask:
        """Neighbours of which both are solved (N - 1,)."""
        known = np.isfinite(self.y)
        return np.asarray(known[:-1] & known[1:])

    def _borders(self, status: Codes) -> None:
        """Note the gaps, and add the last solved point at each of their borders."""
        known = np.isfinite(self.y)
        inside, outside = borders(known)
        edge = last(lambda x: np.isfinite(self.miss(x)), self.x[inside], self.x[outside])
        at = dict(zip(np.minimum(inside, outside).tolist(), edge.tolist(), strict=True))
        for first, final in runs(~known):
            usual = Status(int(np.bincount(status[first : final + 1]).argmax()))
            self.gaps.append(Gap(at.get(first - 1, self.low), at.get(final, self.high), usual))
        if len(edge):
            self._add(edge, self.evaluate(edge)[0])

    def _levels(self, pairs: Mask) -> tuple[tuple[tuple[float, float], ...], Mask]:
        """Stretches on the target, and which points lie on one."""
        on = np.abs(self.y - self.target) <= self.met
        both = np.flatnonzero(pairs & on[:-1] & on[1:])
        middle = self.miss(0.5 * (self.x[both] + self.x[both + 1]))
        level = np.zeros(len(pairs), bool)
        level[both] = np.abs(middle) <= self.met
        taken = np.zeros(len(on), bool)
        stretches = []
        for first, final in runs(level):
            taken[first : final + 2] = True
            stretches.append([first, final + 1])
        ends = np.array(stretches, dtype=np.int64).reshape(-1, 2)
        places = [self._end(ends[:, side], step) for side, step in ((0, -1), (1, 1))]
        return tuple((float(a), float(b)) for a, b in zip(*places, strict=True)), taken

    def _end(self, at: Indices, step: int) -> Array:
        """How far stretches on the target reach beyond their last point ``at`` of the scan."""
        beyond = np.clip(at + step, 0, len(self.x) - 1)
        return last(lambda x: np.abs(self.miss(x)) <= self.met, self.x[at], self.x[beyond])

    def _signs(self, pairs: Mask, taken: Mask) -> list[tuple[float, float]]:
        """Neighbours on both sides of the target."""
        sign = np.sign(self.y - self.target)
        with np.errstate(invalid="ignore"):
            crossed = pairs & (sign[:-1] * sign[1:] < 0.0) & ~taken[:-1] & ~taken[1:]
        return [(float(self.x[i]), float(self.x[i + 1])) for i in np.flatnonzero(crossed)]

    def _exact(self, taken: Mask) -> tuple[Array, Mask]:
        """Scan points exactly on the target, and whether the function turns back there."""
        at = np.flatnonzero((self.y == self.target) & ~taken)
        sign = np.sign(np.concatenate([[np.nan], self.y - self.target, [np.nan]]))
        return self.x[at], np.asarray(sign[at] == sign[at + 2])

    def _extrema(self, pairs: Mask, flat: Mask, taken: Mask) -> tuple[list[tuple[float, float]], Array]:
        """Refine the points nearest to the target among neighbours on one side of it.

        Returns brackets where the refined extremum lies beyond the target, and extrema that just touch it.
        """
        miss = self.y - self.target
        left, right = np.concatenate([[False], pairs]), np.concatenate([pairs, [False]])
        level = np.concatenate([[True], flat]) & np.concatenate([flat, [True]])
        a, b = np.arange(len(miss)) - left, np.arange(len(miss)) + right
        with np.errstate(invalid="ignore"):
            nearest = (np.abs(miss) <= np.abs(miss[a])) & (np.abs(miss) <= np.abs(miss[b]))
            one_side = (miss * miss[a] > 0.0) & (miss * miss[b] > 0.0)
        i = np.flatnonzero(nearest & one_side & (left | right) & ~level & ~taken & self._may_reach(miss, a, b))
        side, a, b = np.sign(miss[i]), self.x[a[i]], self.x[b[i]]
        x, least = lowest(lambda at, k: side[k] * self.miss(at), a, b)
        if len(x):
            self._add(x, self.target + side * least)
        beyond = least < 0.0
        brackets = [pair for one in zip(a[beyond], x[beyond], b[beyond], strict=True) for pair in (one[:2], one[1:])]
        return [(float(p), float(q)) for p, q in brackets], x[~beyond & (least <= self.met)]

    def _may_reach(self, miss: Array, a: Indices, b: Indices) -> Mask:
        """Where the target lies no farther than the change over the neighbours ``a`` to ``b``, at a border over two steps.

        A parabola sinks by an eighth of that change below the lowest of three points, a kink by half of it.
        """
        n = np.arange(len(miss))
        farther = np.clip(np.where(a == n, b + 1, a - 1), 0, len(miss) - 1)
        around = np.abs(np.stack([miss[a], miss[b], np.where((a == n) != (b == n), miss[farther], 0.0)]))
        change = np.max(around, axis=0, where=np.isfinite(around), initial=0.0) - np.abs(miss)
        return np.asarray(change >= np.abs(miss))

    def _refined(self, brackets: list[tuple[float, float]]) -> Array:
        """Roots in the brackets; a bracket without one holds a jump or a gap, which is noted."""
        if not brackets:
            return np.empty(0)
        low, high = np.array(brackets).T
        failed = np.zeros(len(low), np.int8)

        def miss(x: Array) -> Array:
            y, status = self.evaluate(x)
            failed[:] = np.where(np.isfinite(y) | (failed != Status.OK), failed, status)
            return np.asarray(y - self.target)

        x, found = roots.bracketed(miss, low, high, width=NARROWEST * (self.high - self.low))
        met = found & (np.abs(miss(x)) <= self.met)
        for i in np.flatnonzero(failed != Status.OK):
            self.gaps.append(Gap(float(low[i]), float(high[i]), Status(int(failed[i]))))
        leaps = np.flatnonzero(~met & (failed == Status.OK))
        if len(leaps):
            aside = ASIDE * (self.high - self.low)
            sides = [self.evaluate(np.clip(x[leaps] + d, self.low, self.high))[0] for d in (-aside, aside)]
            self.jumps += [Jump(float(x[i]), float(p), float(q)) for i, p, q in zip(leaps, *sides, strict=True)]
        return np.asarray(x[met])

    def _merged(self, x: Array, touching: Mask) -> tuple[Array, Mask]:
        """Ascending roots; two between which the target is met throughout are one."""
        order = np.argsort(x, kind="stable")
        x, touching = x[order], touching[order]
        if len(x) < 2:
            return x, touching
        same = np.abs(self.miss(0.5 * (x[:-1] + x[1:]))) <= self.met
        first = np.concatenate([[True], ~same])
        group = np.cumsum(first) - 1
        return x[first], np.asarray(np.bincount(group, touching) > 0.0)

    def _slopes(self, x: Array) -> Array:
        if not len(x):
            return np.empty(0)
        step = SLOPE_STEP * np.maximum(np.abs(x), NEAR_ZERO * (self.high - self.low))
        places = np.stack([np.maximum(x - step, self.low), x, np.minimum(x + step, self.high)])
        y = self.evaluate(places.ravel())[0].reshape(3, -1)
        known = np.isfinite(y)
        left, right = np.where(known[0], 0, 1), np.where(known[2], 2, 1)
        each = np.arange(len(x))
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.asarray((y[right, each] - y[left, each]) / (places[right, each] - places[left, each]))


def _ends(y: Array) -> list[int]:
    return [int(y.argmin()), int(y.argmax())] if len(y) else []
