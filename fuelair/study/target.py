"""The inverse question: which value of one number of the case gives the wanted figure."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from fuelair.case import Case
from fuelair.gas.engine import Array, Codes, Status
from fuelair.gas.engines import EngineName
from fuelair.study import asked, figures
from fuelair.study.asked import FORMAT, Varied, number, record, worded
from fuelair.study.batch import Study
from fuelair.study.crossings import NEAR_ZERO, POINTS, Crossings, crossings, logarithmic

LOOSE = 1e4
"""Condition number from which a value is said to be only loosely determined."""
Outcome = Literal["met", "none", "not-determined"]


@dataclass(frozen=True, slots=True)
class Root:
    """A value that meets the target.

    Attributes
    ----------
    value : of the varied key, in stored units.
    figures : there, in SI, NaN for a figure that this case does not have.
    slope : change of the quantity per unit of the key, NaN if no neighbour is solved.
    condition : relative change of the key per relative change of the quantity; large where the quantity hardly moves.
    touching : the quantity turns back here: two values have fallen into one.
    """

    value: float
    figures: dict[str, float]
    slope: float
    condition: float
    touching: bool


@dataclass(frozen=True, slots=True)
class Found:
    """Every value of one key that gives a quantity its target, as far as the scan can see.

    Attributes
    ----------
    case, varied, quantity, target : what was asked; SI.
    model, engine, versions : what it was computed with.
    points, rows : of the scan; all rows that were computed.
    roots : ascending.
    search : gaps, jumps, stretches on the target, extremes.
    outcome, reason : met, none or not-determined; in words if there are no roots.
    """

    case: Case
    varied: Varied
    quantity: str
    target: float
    model: str
    engine: EngineName
    versions: dict[str, str]
    points: int
    rows: int
    roots: tuple[Root, ...]
    search: Crossings
    outcome: Outcome
    reason: str

    @property
    def spacing(self) -> str:
        """How the scan is spaced."""
        return "logarithmic" if logarithmic(self.varied.low, self.varied.high) else "linear"

    @property
    def verdict(self) -> str:
        """One sentence."""
        v, what = self.varied, f"{asked.label(self.quantity)} {worded(self.quantity, self.target)}"
        if self.outcome != "met":
            return f"{what}: {self.reason}"
        values = [v.words(root.value) for root in self.roots]
        values += [f"anything from {v.words(low)} to {v.words(high)}" for low, high in self.search.levels]
        return f"{what} with {v.key} = {' or '.join(values)}"

    def notes(self) -> list[str]:
        """What to mind: failed stretches, jumps, values that are hardly determined."""
        v, out = self.varied, []
        for root in self.roots:
            if root.touching or root.condition > LOOSE:
                why = "the quantity turns back there" if root.touching else f"its condition number is {root.condition:.2g}"
                out.append(f"{v.key} = {v.words(root.value)} is only loosely determined: {why}.")
        for jump in self.search.jumps:
            before, after = (worded(self.quantity, value) for value in (jump.before, jump.after))
            out.append(f"At {v.key} = {v.words(jump.at)} the quantity jumps across the target, from {before} to {after}.")
        for gap in self.search.gaps:
            status = gap.status
            why = f"{status.label}: {status.reason}" if status is not Status.OK else "this case has no such figure there"
            out.append(f"Nothing is known of {v.key} from {v.words(gap.low)} to {v.words(gap.high)}; {why}.")
        if self.outcome == "met":
            out.append(
                f"Complete on the scan of {self.points} points with its extrema refined; what hides between two is not seen."
            )
        return out

    def to_dict(self) -> dict[str, Any]:
        """Everything as plain numbers, text, lists and dictionaries; SI, null where there is no figure."""
        s = self.search
        return {
            "format": FORMAT,
            "versions": self.versions,
            "engine": self.engine,
            "model": self.model,
            "case": self.case.resolved(),
            "vary": self.varied.to_dict(),
            "target": {"quantity": self.quantity, "value": self.target},
            "scan": {"points": self.points, "spacing": self.spacing, "rows": self.rows},
            "outcome": self.outcome,
            "reason": self.reason,
            "roots": [
                {
                    "value": root.value,
                    "figures": record(root.figures),
                    "slope": number(root.slope),
                    "condition": number(root.condition),
                    "touching": root.touching,
                }
                for root in self.roots
            ],
            "on_target": [{"low": low, "high": high} for low, high in s.levels],
            "gaps": [{"low": gap.low, "high": gap.high, "status": gap.status.label} for gap in s.gaps],
            "jumps": [{"at": jump.at, "before": number(jump.before), "after": number(jump.after)} for jump in s.jumps],
            "lowest": None if s.lowest is None else {"at": s.lowest[0], "value": s.lowest[1]},
            "highest": None if s.highest is None else {"at": s.highest[0], "value": s.highest[1]},
        }


def find(
    case: Case,
    key: str,
    quantity: str,
    target: float | str,
    *,
    low: float | str | None = None,
    high: float | str | None = None,
    model: str | None = None,
    engine: EngineName | None = None,
    points: int = POINTS,
) -> Found:
    """Every value of one number of the case that gives a quantity its target.

    Parameters
    ----------
    key : dotted key of a physical number, e.g. ``charge.equivalence_ratio``.
    quantity : e.g. ``peak_pressure`` or ``peak_pressure_Pa``.
    target : in SI, or text with a unit, e.g. ``"200 bar"``.
    low, high : ends of the range, in stored units or text with a unit; default the key's allowed range.
    model : model id; default the headline model.
    engine : ``reference`` or ``compiled``; default compiled where numba is installed.
    points : of the scan.

    Raises
    ------
    InputError : no such key, quantity or model, or a value or range that is not allowed.
    """
    name = figures.resolve(quantity)
    return solve(case, asked.varied(case, key, low, high), name, asked.value_of(case, name, target), model, engine, points)


def solve(
    case: Case,
    varied: Varied,
    quantity: str,
    target: float,
    model: str | None = None,
    engine: EngineName | None = None,
    points: int = POINTS,
) -> Found:
    """As :func:`find`, with what is asked already read."""
    one = Study(case, [varied.key], model=model, engine=engine, quantities=[quantity])
    every = Study(case, [varied.key], model=model, engine=engine, quantities=[*figures.MODEL_FIGURES, quantity])

    def evaluate(x: Array) -> tuple[Array, Codes]:
        rows = one.run({varied.key: x})
        return rows.figures[quantity], rows.status

    search = crossings(evaluate, varied.low, varied.high, target, points=points)
    outcome, reason = _outcome(varied, quantity, search)
    return Found(
        case=case,
        varied=varied,
        quantity=quantity,
        target=target,
        model=one.model or "",
        engine=one.engine,
        versions=asked.versions(case, one.engine),
        points=points,
        rows=search.rows + len(search.roots),
        roots=_roots(every, varied, quantity, search),
        search=search,
        outcome=outcome,
        reason=reason,
    )


def _roots(study: Study, varied: Varied, quantity: str, search: Crossings) -> tuple[Root, ...]:
    if not len(search.roots):
        return ()
    rows = study.run({varied.key: search.roots})
    least = NEAR_ZERO * (varied.high - varied.low)
    found = []
    for i, (x, slope) in enumerate(zip(search.roots.tolist(), search.slopes.tolist(), strict=True)):
        there = {name: float(column[i]) for name, column in rows.figures.items()}
        with np.errstate(divide="ignore"):
            condition = float(np.abs(there[quantity] / np.float64(slope)) / max(abs(x), least))
        found.append(Root(x, there, slope, condition, bool(search.touching[i])))
    return tuple(found)


def _outcome(varied: Varied, quantity: str, search: Crossings) -> tuple[Outcome, str]:
    """What came of it, and why there are no roots."""
    span = f"for {varied.key} from {varied.words(varied.low)} to {varied.words(varied.high)}"
    if search.lowest is None or search.highest is None:
        gap = search.gaps[0]
        return "none", f"none, because no point of the scan has a figure {span}: {gap.status.label}"
    solved = " wherever it is solved" if search.gaps else ""
    value = f"{asked.within(quantity)} is {worded(quantity, search.lowest[1])}{solved}"
    if search.constant:
        return "not-determined", f"not determined by this input: {value} {span}"
    if len(search.roots) or search.levels:
        return "met", ""
    low, high = (worded(quantity, end[1]) for end in (search.lowest, search.highest))
    if search.jumps:
        at = ", ".join(varied.words(jump.at) for jump in search.jumps)
        return "none", f"none, because {asked.within(quantity)} jumps across the target at {at}"
    stays = f"{asked.within(quantity)} stays between {low} and {high}{solved} {span}"
    return "none", f"none, because {stays}"
