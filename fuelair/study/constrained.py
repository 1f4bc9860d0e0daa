"""The most or least of one figure with others held: a Sobol scan, then a polish of its best points.

The polish is sequential quadratic programming (SLSQP; D. Kraft, DFVLR-FB 88-28, 1988, from memory; through scipy).
What it finds is the best of the starts tried, no proof that nothing better exists.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from fuelair.gas.engine import Array, Codes, Mask
from fuelair.study.draws import nets
from fuelair.study.scaled import Figures, Limit, Scaled

ROWS = 512
"""Points of the scan."""
STARTS, APART = 6, 0.1
"""Starts of the polish, and how far apart they are at least in one scaled variable."""
DRAWN_IN = 1e-8
"""Share of its size by which the polish holds a limit tighter than it is, so that the point found keeps it."""
FLAT = 1e-12
"""Room up to which a figure counts as lying on its limit."""
KEPT = 1e-9
"""Miss, over the size of the limit, at which a limit still counts as kept."""
AT_LIMIT, AT_END = 1e-6, 1e-9
"""Scaled distance from a limit, and from the end of a range, up to which it counts as reached."""
PRECISION, MOST_STEPS, ROUNDS = 1e-12, 60, 3
"""Of the polish: change of the scaled objective at which it ends, steps of a round, rounds."""
HOPELESS = 0.5
"""Share of the miss left after a round from which a start that misses a limit is given up."""
ALIKE = 1e-6
"""Difference of the scaled objective up to which two ends are the same."""


@dataclass(frozen=True, slots=True)
class Best:
    """What was found.

    Attributes
    ----------
    x : the point (D,).
    figures : there (F,).
    feasible : every limit is kept; if not, this is the nearest miss: the least of the largest relative misses.
    margins : distance of each limit from its bound, positive inside, in the figure's unit (L,).
    reached : limits that the point lies on (L,).
    ends : -1 at the low end of a variable's range, +1 at the high end, else 0 (D,).
    sensitivity : change of the objective per unit of each bound; zero where it does not bind (L,).
    pull : change of the objective per unit of each variable, where the end of its range binds, else zero (D,).
    stationarity : what is left of the scaled gradient when the binding limits and ends are taken out, over the gradient.
    starts, agree : starts polished, and how many of them end at this optimum.
    kept : points of the scan that keep every limit.
    """

    x: Array
    figures: Array
    feasible: bool
    margins: Array
    reached: Mask
    ends: Array
    sensitivity: Array
    pull: Array
    stationarity: float
    starts: int
    agree: int
    kept: int


@dataclass(frozen=True, slots=True)
class Search:
    """A search: what was found (None if no point of the scan was solved), status codes of the scan, rows computed."""

    best: Best | None
    status: Codes
    rows: int


def search(
    evaluate: Figures,
    low: Sequence[float],
    high: Sequence[float],
    limits: Sequence[Limit],
    *,
    most: bool,
    seed: int = 1,
    rows: int = ROWS,
) -> Search:
    """The most (or least) of the first figure with every limit kept, or the nearest miss.

    Parameters
    ----------
    evaluate : the figures; rows must not influence each other.
    low, high : ranges of the variables (D,).
    seed, rows : of the scrambled Sobol scan; rows a power of two.
    """
    problem = Scaled(evaluate, low, high, limits, most=most)
    u = nets(len(low), rows, seed, 1)[0]
    figures, status = problem.evaluate(u)
    solved = np.flatnonzero(np.isfinite(figures).all(axis=1))
    if not len(solved):
        return Search(None, status, problem.rows)
    problem.scale(figures[solved])
    f, c = problem.scaled(figures[solved])
    miss = np.maximum(-np.min(c, axis=1, initial=0.0), 0.0)
    order = solved[np.lexsort([f, miss])]
    starts, kept = _apart(u[order]), int((miss <= 0.0).sum())
    ends = [*(_polished(problem, start) for start in starts), u[order[0]]]
    f, miss = _judged(problem, ends)
    if (miss > KEPT).all():
        nearest = _nearest(problem, ends[int(miss.argmin())])
        ends = [_polished(problem, nearest), nearest]
        f, miss = _judged(problem, ends)
        if (miss > KEPT).all():
            return Search(_report(problem, nearest, len(starts), 0, kept), status, problem.rows)
    good = np.where(miss <= KEPT, f, np.inf)
    agree = int((good[: len(starts)] <= good.min() + ALIKE).sum())
    return Search(_report(problem, ends[int(good.argmin())], len(starts), agree, kept), status, problem.rows)


def _judged(problem: Scaled, points: Sequence[Array]) -> tuple[Array, Array]:
    """Scaled objective and largest relative miss of a limit at some points (N,)."""
    values = np.array([problem.values(point) for point in points])
    return values[:, 0], np.maximum(-np.min(values[:, 1:], axis=1, initial=0.0), 0.0)


def _apart(points: Array) -> list[Array]:
    """The first points that keep their distance from those before them."""
    chosen: list[Array] = []
    for point in points:
        if all(np.abs(point - other).max() >= APART for other in chosen):
            chosen.append(point)
        if len(chosen) == STARTS:
            break
    return chosen


def _polished(problem: Scaled, start: Array) -> Array:
    """The best point reached from a start."""
    limits = len(problem.bounds)
    u = start
    for _ in range(ROUNDS):
        before = problem.values(u)
        u = _slsqp(
            lambda p: problem.values(p)[0],
            lambda p: problem.gradient(p)[0],
            (lambda p: _drawn_in(problem.values(p)[1:])) if limits else None,
            lambda p: problem.gradient(p)[1:],
            u,
            np.ones(len(u)),
        )
        after = problem.values(u)
        was, is_now = (-np.min(one[1:], initial=0.0) for one in (before, after))
        settled = abs(after[0] - before[0]) <= PRECISION if is_now <= KEPT else is_now > HOPELESS * was
        if settled:
            break
    return u


def _drawn_in(left: Array) -> Array:
    """Room that the limits leave, a little less of it; where a figure lies flat on its limit, it keeps it as it is.

    Peak pressure held at a pressure limit does: drawn in there, no step could mend it.
    """
    return np.where(np.abs(left) <= FLAT, FLAT, left - DRAWN_IN)


def _nearest(problem: Scaled, start: Array) -> Array:
    """The point whose largest relative miss is least: minimise t with every limit at least -t."""
    size, limits = len(start), len(problem.bounds)
    worst = -np.min(problem.values(start)[1:])
    slack = np.ones((limits, 1))
    found = _slsqp(
        lambda p: float(p[-1]),
        lambda p: np.eye(size + 1)[-1],
        lambda p: _drawn_in(problem.values(p[:-1])[1:] + p[-1]),
        lambda p: np.concatenate([problem.gradient(p[:-1])[1:], slack], axis=1),
        np.append(start, worst),
        np.append(np.ones(size), max(10.0 * worst, 1.0)),
    )[:-1]
    return found if -np.min(problem.values(found)[1:]) < worst else start


def _slsqp(
    value: Callable[[Array], float],
    slope: Callable[[Array], Array],
    limits: Callable[[Array], Array] | None,
    limit_slopes: Callable[[Array], Array],
    start: Array,
    top: Array,
) -> Array:
    """One run of the optimiser between 0 and ``top``; what it returns may miss limits."""
    from scipy.optimize import minimize

    def inside(function: Callable[[Array], Array]) -> Callable[[Array], Array]:
        return lambda p: function(np.clip(p, 0.0, top))  # rounding may leave the box by a bit

    held: Any = [{"type": "ineq", "fun": inside(limits), "jac": inside(limit_slopes)}] if limits is not None else []
    run: Any = minimize
    result = run(
        lambda p: value(np.clip(p, 0.0, top)),
        start,
        jac=inside(slope),
        bounds=[(0.0, end) for end in top],
        constraints=held,
        method="SLSQP",
        options={"ftol": PRECISION, "maxiter": MOST_STEPS},
    )
    return np.asarray(np.clip(result.x, 0.0, top))


def _report(problem: Scaled, u: Array, starts: int, agree: int, kept: int) -> Best:
    """What holds the point, and how hard: multipliers by least squares that keep their sign."""
    from scipy.optimize import nnls

    values, slopes, figures = problem.values(u), problem.gradient(u), problem.figures(u)
    reached = np.abs(values[1:]) <= AT_LIMIT
    ends = np.where(u <= AT_END, -1.0, np.where(u >= 1.0 - AT_END, 1.0, 0.0))
    walls = -np.diag(ends)[ends != 0.0]
    active = np.concatenate([slopes[1:][reached], walls])
    multipliers, left = nnls(active.T, slopes[0]) if len(active) else (np.empty(0), float(np.linalg.norm(slopes[0])))
    holds, pulls = np.zeros(len(reached)), np.zeros(len(u))
    holds[reached], pulls[ends != 0.0] = multipliers[: reached.sum()], multipliers[reached.sum() :]
    per_number = _per_number(problem, u)
    return Best(
        x=problem.numbers(u),
        figures=figures,
        feasible=bool(np.min(values[1:], initial=0.0) >= -KEPT),
        margins=values[1:] * problem.sizes,
        reached=np.asarray(reached),
        ends=ends,
        sensitivity=-problem.sign * problem.size * problem.side * holds / problem.sizes,
        pull=-problem.sign * problem.size * ends * pulls * per_number,
        stationarity=left / (float(np.linalg.norm(slopes[0])) or 1.0),
        starts=starts,
        agree=agree,
        kept=kept,
    )


def _per_number(problem: Scaled, u: Array) -> Array:
    """Change of each scaled variable per change of its number."""
    span = problem.high - problem.low
    with np.errstate(invalid="ignore", divide="ignore"):
        log = np.log(problem.high) - np.log(problem.low)
        return np.asarray(np.where(problem.log, 1.0 / (problem.numbers(u) * log), 1.0 / span))
