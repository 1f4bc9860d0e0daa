"""The rows of a band: the case itself, two independent samples of its spreads, and their mixtures."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np

from fuelair.case.spreads import Marginal
from fuelair.gas.engine import Array
from fuelair.study import draws
from fuelair.study.batch import Study
from fuelair.study.spread import Runner, spread
from fuelair.study.sweep import TASK_ROWS, Progress, solve

RANDOMISATIONS: Final = 8
"""Independently scrambled nets whose scatter gives every confidence interval."""


class Mixtures:
    """Rows of a study: the case itself, two independent samples, and their mixtures for the indices.

    Every net has two halves of coordinates: one gives sample A, the other sample B. Mixture i is A with key i from B.
    """

    def __init__(self, study: Study, spreads: Sequence[Marginal], root: list[list[float]] | None, rows: int, seed: int) -> None:
        self.study, self.keys, self.rows = study, study.keys, rows
        size, n = len(spreads), rows // (2 * RANDOMISATIONS)
        net = draws.nets(2 * size, n, seed, RANDOMISATIONS)
        parts = [net[:, :, :size], net[:, :, size:]]
        if root is None:
            for i in range(size):
                mixed = parts[0].copy()
                mixed[:, :, i] = parts[1][:, :, i]
                parts.append(mixed)
        self.shape = (len(parts), RANDOMISATIONS, n)
        self.extra = (len(parts) - 2) * RANDOMISATIONS * n
        value = study.case.values()
        own = np.array([[value(key) for key in self.keys]])
        self.x = np.concatenate([own, draws.values(spreads, np.concatenate(parts).reshape(-1, size), root)])

    def solve(self, runner: Runner | None, progress: Progress) -> None:
        """Solve every row, in tasks."""
        total, step = len(self.x), TASK_ROWS[self.study.engine]
        columns = dict(zip(self.keys, self.x.T, strict=True))
        tasks = ({key: column[at : at + step] for key, column in columns.items()} for at in range(0, total, step))
        figures, status = [], []
        progress(0, total)
        for task, (some, codes) in spread(solve, self.study, tasks, runner):
            figures.append(some)
            status.append(codes)
            progress(min((task + 1) * step, total), total)
        self.figures = dict(zip(self.study.quantities, np.concatenate(figures, axis=1), strict=True))
        self.base_status = np.concatenate(status)[1 : 1 + self.rows]

    def nominal(self, name: str) -> float:
        """Figure at the case's own values."""
        return float(self.figures[name][0])

    def parts(self, name: str) -> Array:
        """Figure on A, B and the mixtures (2 + D, R, N)."""
        return np.asarray(self.figures[name][1:].reshape(self.shape))

    def base(self, name: str) -> Array:
        """Figure on A and B together (R, 2 N)."""
        return np.concatenate(list(self.parts(name)[:2]), axis=1)

    def inputs(self) -> Array:
        """Values of the keys on A and B together (R, 2 N, D)."""
        halves = self.x[1 : 1 + self.rows].reshape(2, RANDOMISATIONS, -1, len(self.keys))
        return np.concatenate(list(halves), axis=1)
