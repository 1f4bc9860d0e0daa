"""Rules between numbers of a case, alike for one case and for columns of many.

Each takes numbers or arrays and says where they contradict each other; `fuelair.case.rules` adds the words for a
case, `refused` answers for a study of many rows.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from fuelair.case.rules import Draft

EXHAUST_CLOSING = {4: (300.0, 430.0), 2: (-180.0, -30.0)}
"""Range of the exhaust closing by strokes per cycle [deg]."""


def limit_too_low(limit: Any, pressure: Any) -> Any:
    """Where a pressure limit is not above the pressure before compression."""
    return limit <= pressure


def delivers_too_little(delivered: Any, trapped: Any) -> Any:
    """Where less fresh charge is delivered than trapped."""
    return delivered < trapped


def shortest_rod(stroke: Any, offset: Any) -> Any:
    """Length above which a rod lets the crank turn."""
    return stroke / 2 + abs(offset)


def out_of_time(angle: Any, strokes: int) -> Any:
    """Where the exhaust closes outside its range."""
    low, high = EXHAUST_CLOSING[strokes]
    return (angle < low) | (angle > high)


def trapped_share(draft: Draft) -> tuple[Any, str]:
    """Fresh charge over trapped mass, and the words for it; None if the draft does not say."""
    efficiency, residual = (draft.get(f"charge.{key}") for key in ("scavenging_efficiency", "residual_fraction"))
    if efficiency is not None or residual is None or isinstance(residual, str):
        return efficiency, "charge.scavenging_efficiency"
    return 1.0 - residual, "1 - charge.residual_fraction"


def refused(draft: Draft) -> Any:
    """Where the numbers of a draft contradict each other: a truth, or a mask if some values are columns."""
    out: Any = False
    limit, pressure = draft.get("combustion.pressure_limit"), draft.pressure()
    if limit is not None and pressure is not None and draft.get("combustion.heat_addition") == "pressure-limited":
        out = out | limit_too_low(limit, pressure)
    strokes = draft.get("engine.strokes_per_cycle", 4)
    delivered, kept = draft.get("charge.scavenge_ratio"), trapped_share(draft)[0]
    if strokes == 2 and delivered is not None and kept is not None:
        out = out | delivers_too_little(delivered, kept)
    rod, stroke = draft.get("engine.rod_length"), draft.get("engine.stroke")
    if rod is not None and stroke is not None:
        out = out | (rod <= shortest_rod(stroke, draft.get("engine.pin_offset", 0.0)))
    closing = draft.get("engine.exhaust_closing")
    if closing is not None:
        out = out | out_of_time(closing, strokes)
    return out
