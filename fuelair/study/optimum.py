"""Several limits at once: the most or least of a quantity over some numbers of the case, with others held."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from fuelair.case import Case
from fuelair.case.tolerance import USUAL_SEED
from fuelair.errors import InputError, Problem
from fuelair.gas.engine import Array, Codes
from fuelair.gas.engines import EngineName
from fuelair.study import asked, constrained, figures
from fuelair.study.asked import FORMAT, Hold, Varied, number, record
from fuelair.study.batch import Study
from fuelair.study.scaled import Limit

STATIONARY = 1e-3
"""Scaled gradient left over from which the point is said not to be a true optimum."""


@dataclass(frozen=True, slots=True)
class Optimum:
    """The best point found, or the nearest miss.

    Attributes
    ----------
    case, varied, quantity, most, holds : what was asked; SI.
    model, engine, versions, seed, points, rows : what it was computed with; points of the scan, all rows.
    best : what was found, see `fuelair.study.constrained.Best`; None if no point of the scan has every figure.
    figures : there, in SI.
    failed : failed points of the scan by status.
    """

    case: Case
    varied: tuple[Varied, ...]
    quantity: str
    most: bool
    holds: tuple[Hold, ...]
    model: str
    engine: EngineName
    versions: dict[str, str]
    seed: int
    points: int
    rows: int
    best: constrained.Best | None
    figures: dict[str, float]
    failed: dict[str, int]

    @property
    def feasible(self) -> bool:
        """Whether the point keeps every limit."""
        return self.best is not None and self.best.feasible

    @property
    def at(self) -> dict[str, float]:
        """The varied keys at the point, in stored units."""
        return {} if self.best is None else {v.key: float(x) for v, x in zip(self.varied, self.best.x, strict=True)}

    @property
    def binding(self) -> tuple[str, ...]:
        """What holds the point: limits that it lies on and ends of ranges, those that move the quantity."""
        b = self.best
        if b is None or not b.feasible:
            return ()
        limits = [h.words() for h, reached, s in zip(self.holds, b.reached, b.sensitivity, strict=True) if reached and s != 0.0]
        ends = [
            f"{v.key} at the {'upper' if end > 0 else 'lower'} end of its range, {v.words(v.high if end > 0 else v.low)}"
            for v, end, pull in zip(self.varied, b.ends, b.pull, strict=True)
            if end and pull != 0.0
        ]
        return (*limits, *ends)

    @property
    def verdict(self) -> str:
        """One sentence."""
        b, what = self.best, f"{'Most' if self.most else 'Least'} {asked.within(self.quantity)}"
        if b is None:
            return f"No point of the scan could be solved: {', '.join(f'{k} {n}' for k, n in self.failed.items())}"
        value = asked.worded(self.quantity, float(b.figures[0]))
        if not b.feasible:
            return f"No point meets all limits; the nearest miss has {asked.within(self.quantity)} {value}"
        held = f"held by {'; '.join(self.binding)}" if self.binding else "held by no limit"
        return f"{what}: {value}, {held}; best found from {b.starts} starts"

    def notes(self) -> list[str]:
        """What to mind."""
        b, out = self.best, []
        if b is not None and b.feasible:
            out.append(
                f"{b.agree} of {b.starts} starts end here; {b.kept} of {self.points} points of the scan keep every limit. "
                "The best of the starts tried is no proof that nothing better exists."
            )
            if b.stationarity > STATIONARY:
                out.append(
                    f"The gradient does not vanish here ({b.stationarity:.1e} of it is left): the point lies beside points that "
                    "cannot be solved, or at a bend; a narrower range may find a better one."
                )
        if self.failed:
            share = sum(self.failed.values()) / self.points
            out.append(f"{share:.1%} of the scan failed: {', '.join(f'{k} {n}' for k, n in self.failed.items())}.")
        return out

    def to_dict(self) -> dict[str, Any]:
        """Everything as plain numbers, text, lists and dictionaries; SI, null where there is no figure."""
        b = self.best
        return {
            "format": FORMAT,
            "versions": self.versions,
            "engine": self.engine,
            "model": self.model,
            "seed": self.seed,
            "case": self.case.resolved(),
            "vary": [v.to_dict() for v in self.varied],
            "objective": {"quantity": self.quantity, "sense": "most" if self.most else "least"},
            "scan": {
                "points": self.points,
                "rows": self.rows,
                "failed": self.failed,
                "keep_every_limit": 0 if b is None else b.kept,
            },
            "feasible": self.feasible,
            "verdict": self.verdict,
            "at": self.at,
            "figures": record(self.figures),
            "limits": [self._limit(i) for i in range(len(self.holds))],
            "ends": [self._end(i) for i in range(len(self.varied)) if b is not None and b.ends[i]],
            "starts": None if b is None else {"polished": b.starts, "agree": b.agree, "stationarity": number(b.stationarity)},
        }

    def _limit(self, i: int) -> dict[str, Any]:
        hold, b = self.holds[i], self.best
        out: dict[str, Any] = {"quantity": hold.quantity, "sense": "<=" if hold.upper else ">=", "bound": hold.bound}
        if b is None:
            return out | {"margin": None, "reached": None, "sensitivity": None}
        felt = number(b.sensitivity[i]) if b.feasible else None
        return out | {"margin": number(b.margins[i]), "reached": bool(b.reached[i]), "sensitivity": felt}

    def _end(self, i: int) -> dict[str, Any]:
        assert self.best is not None
        end = "high" if self.best.ends[i] > 0 else "low"
        return {"key": self.varied[i].key, "end": end, "sensitivity": number(self.best.pull[i]) if self.feasible else None}


def best(
    case: Case,
    vary: Mapping[str, tuple[float | str, float | str] | None],
    *,
    most: str | None = None,
    least: str | None = None,
    hold: Sequence[str] = (),
    model: str | None = None,
    engine: EngineName | None = None,
    seed: int = USUAL_SEED,
    points: int = constrained.ROWS,
) -> Optimum:
    """The most or least of a quantity over some numbers of the case, with limits on others.

    Parameters
    ----------
    vary : dotted key -> (low, high) in stored units or text with a unit; None: the key's allowed range.
    most, least : the quantity, one of the two, e.g. ``most="imep_gross"``.
    hold : limits such as ``"peak_pressure<=200 bar"`` or ``"exhaust_O2_dry>=3 %"``; ``"limits"``: those of the case.
    model : model id; default the headline model.
    engine : ``reference`` or ``compiled``; default compiled where numba is installed.
    seed : of the scan.
    points : of the scan, a power of two.

    Raises
    ------
    InputError : no such key, quantity or model, or a value, range or limit that cannot be.
    """
    varied = [asked.varied(case, key, *(span or (None, None))) for key, span in vary.items()]
    holds = [one for text in hold for one in asked.read_holds(case, text)]
    name = most if most is not None else least
    if name is None or (most is not None and least is not None):
        raise InputError(
            Problem("ask for the most or for the least of one quantity", "--most", allowed="--most QUANTITY or --least QUANTITY")
        )
    return solve(
        case, varied, figures.resolve(name), holds, most=most is not None, model=model, engine=engine, seed=seed, points=points
    )


def solve(
    case: Case,
    varied: Sequence[Varied],
    quantity: str,
    holds: Sequence[Hold],
    *,
    most: bool,
    model: str | None = None,
    engine: EngineName | None = None,
    seed: int = USUAL_SEED,
    points: int = constrained.ROWS,
) -> Optimum:
    """As :func:`best`, with what is asked already read."""
    if points < 2 or points & (points - 1):
        raise InputError(Problem("not a power of two", "points", points, "2, 4, 8, ..."))
    names = list(dict.fromkeys([quantity, *(hold.quantity for hold in holds)]))
    keys = [one.key for one in varied]
    study = Study(case, keys, model=model, engine=engine, quantities=names)

    def evaluate(x: Array) -> tuple[Array, Codes]:
        rows = study.run({key: x[:, i] for i, key in enumerate(keys)})
        return np.stack([rows.figures[name] for name in names], axis=1), rows.status

    limits = [Limit(names.index(hold.quantity), hold.upper, hold.bound) for hold in holds]
    low, high = [one.low for one in varied], [one.high for one in varied]
    search = constrained.search(evaluate, low, high, limits, most=most, seed=seed, rows=points)
    there: dict[str, float] = {}
    if search.best is not None:
        every = Study(case, keys, model=model, engine=engine, quantities=[*figures.MODEL_FIGURES, *names])
        rows = every.run({key: search.best.x[i : i + 1] for i, key in enumerate(keys)})
        there = {name: float(column[0]) for name, column in rows.figures.items()}
    return Optimum(
        case=case,
        varied=tuple(varied),
        quantity=quantity,
        most=most,
        holds=tuple(holds),
        model=study.model or "",
        engine=study.engine,
        versions=asked.versions(case, study.engine),
        seed=seed,
        points=points,
        rows=search.rows + 1,
        best=search.best,
        figures=there,
        failed=asked.failures(search.status),
    )
