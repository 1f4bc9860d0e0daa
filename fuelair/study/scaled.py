"""An objective and limits over scaled variables, remembered where they were computed, with their gradients.

Variables run from 0 to 1 over their range, logarithmically where it spans more than a hundredfold. The objective is
divided by its spread over a scan and is to be small; a limit is its distance from the bound over the size of
the bound, positive inside.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from fuelair.gas.engine import Array, Codes
from fuelair.study.crossings import logarithmic

Figures = Callable[[Array], tuple[Array, Codes]]
"""(N, D) numbers -> (N, F) figures, NaN where failed, and (N,) status codes."""

STEP = 1e-4
"""Step of the differences in scaled variables."""
PENALTY = 1.0
"""Added to the worst scaled objective where no figures are found, and the miss of every limit there."""


@dataclass(frozen=True, slots=True)
class Limit:
    """A limit on a column of the figures: at most ``bound`` if ``upper``, else at least."""

    column: int
    upper: bool
    bound: float


class Scaled:
    """The problem in scaled form; column 0 of the figures is the objective.

    Parameters
    ----------
    evaluate : the figures; rows must not influence each other.
    low, high : ranges of the variables (D,).
    most : the objective is to be large, not small.
    """

    def __init__(
        self, evaluate: Figures, low: Sequence[float], high: Sequence[float], limits: Sequence[Limit], *, most: bool
    ) -> None:
        self.function = evaluate
        self.low, self.high = np.array(low, float), np.array(high, float)
        self.log = np.array([logarithmic(a, b) for a, b in zip(low, high, strict=True)])
        self.sign = -1.0 if most else 1.0
        self.columns = [limit.column for limit in limits]
        self.bounds = np.array([limit.bound for limit in limits])
        self.side = np.array([1.0 if limit.upper else -1.0 for limit in limits])
        self.size, self.sizes, self.worst = 1.0, np.ones(len(limits)), 0.0
        self.rows = 0
        self._figures: dict[bytes, Array] = {}
        self._gradients: dict[bytes, Array] = {}

    def numbers(self, u: Array) -> Array:
        """Variables in their own units for scaled ones (..., D)."""
        with np.errstate(invalid="ignore", divide="ignore"):
            log = np.exp(np.log(self.low) + u * (np.log(self.high) - np.log(self.low)))
        return np.asarray(np.clip(np.where(self.log, log, self.low + u * (self.high - self.low)), self.low, self.high))

    def evaluate(self, u: Array) -> tuple[Array, Codes]:
        """Figures (N, F) and status (N,) at scaled points (N, D), rows counted."""
        self.rows += len(u)
        return self.function(self.numbers(u))

    def scale(self, figures: Array) -> None:
        """Take the scales from solved rows of a scan."""
        self.size = float(np.ptp(figures[:, 0])) or float(np.abs(figures[:, 0]).max()) or 1.0
        spreads = np.ptp(figures[:, self.columns], axis=0)
        self.sizes = np.where(self.bounds != 0.0, np.abs(self.bounds), np.where(spreads > 0.0, spreads, 1.0))
        self.worst = float((self.sign * figures[:, 0]).max() / self.size) + PENALTY

    def scaled(self, figures: Array) -> tuple[Array, Array]:
        """Objective (N,) and limits (N, L) in scaled form; where there are no figures: a bad objective, limits missed."""
        f = self.sign * figures[:, 0] / self.size
        c = self.side * (self.bounds - figures[:, self.columns]) / self.sizes
        failed = np.asarray(~np.isfinite(figures).all(axis=1))
        return np.where(failed, self.worst, f), np.where(failed[:, None], -PENALTY, c)

    def figures(self, u: Array) -> Array:
        """Figures (F,) at one point."""
        key = u.tobytes()
        if key not in self._figures:
            self._figures[key] = self.evaluate(u[None])[0][0]
        return self._figures[key]

    def values(self, u: Array) -> Array:
        """Scaled objective and limits (1 + L,) at one point."""
        f, c = self.scaled(self.figures(u)[None])
        return np.concatenate([f, c[0]])

    def gradient(self, u: Array) -> Array:
        """Gradients (1 + L, D) at one point, by differences of second order that stay within the range."""
        key = u.tobytes()
        if key not in self._gradients:
            steps = np.where(u < STEP, STEP, np.where(u > 1.0 - STEP, -STEP, 0.0))  # one-sided at the ends
            near, far = np.where(steps == 0.0, -STEP, steps), np.where(steps == 0.0, STEP, 2.0 * steps)
            own, one = self.values(u), np.eye(len(u))
            points = np.concatenate([u + one * near[:, None], u + one * far[:, None]])
            figures = self.evaluate(points)[0]
            f, c = self.scaled(figures)
            both = np.concatenate([f[:, None], c], axis=1).reshape(2, len(u), -1)
            solved = np.isfinite(figures).all(axis=1).reshape(2, len(u), 1)
            a, b = near[:, None], far[:, None]
            left, right = (both[0] - own) / a, (both[1] - own) / b
            slope = np.where(solved[0] & solved[1], (left * b - right * a) / (b - a), np.where(solved[0], left, right))
            # in rows one after the other: the optimiser of scipy 1.17 misreads a transposed array without a word
            self._gradients[key] = np.ascontiguousarray(np.where(solved[0] | solved[1], slope, 0.0).T)
        return self._gradients[key]
