"""Defaults of a case that follow from other keys."""

from __future__ import annotations

from typing import Any

from fuelair.case.rules import INTAKE_PAIR, TRAPPED_PAIR, Draft
from fuelair.case.schema import BOTTOM_BEFORE, GAS_EXCHANGE_CENTRE
from fuelair.quantities import STANDARD_ATMOSPHERE


def follow(draft: Draft) -> dict[str, Any]:
    """Return the defaults that follow from other keys; None-safe, so a draft need not be sound.

    Values of the draft may be columns of many rows; what follows from them is a column too.
    """
    two_stroke = draft.get("engine.strokes_per_cycle", 4) == 2
    intake = draft.has("charge.intake_pressure")
    pressure, temperature = (draft.get(key) for key in (INTAKE_PAIR if intake else TRAPPED_PAIR))
    efficiency = draft.get("charge.scavenging_efficiency")
    defaults: dict[str, Any] = {
        "engine.exhaust_closing": BOTTOM_BEFORE if two_stroke else GAS_EXCHANGE_CENTRE,
        "charge.exhaust_pressure": pressure,
        "charge.egr_temperature": temperature if _some(draft.get("charge.egr_fraction")) else None,
        "charge.water_admission": "intake" if _some(draft.get("charge.water_fuel_ratio")) else None,
        "charge.water_temperature": 298.15 if _some(draft.get("charge.water_fuel_ratio")) else None,
        "charge.residual_fraction": 0.0 if efficiency is None else 1.0 - efficiency,
    }
    outside = ambient(draft.get("charge.altitude"), draft.get("charge.reference"))
    for name, value in zip(("pressure", "temperature"), outside, strict=False):
        defaults[f"charge.ambient_{name}"] = value
    defaults["charge.relative_humidity"] = outside[2]
    return {key: value for key, value in defaults.items() if value is not None and not draft.has(key)}


def _some(value: Any) -> bool:
    """Whether a number, or any of a column, is there and not zero."""
    return value is not None and bool(value.any() if hasattr(value, "any") else value)


def ambient(altitude: Any, reference: str | None) -> tuple[Any, Any, float]:
    """Return pressure [Pa], temperature [K] and relative humidity of the air outside for a case that gives none.

    Without altitude and reference: one standard atmosphere, 298.15 K, dry. The altitude [m] may be a column.
    """
    if altitude is None and reference is None:
        return STANDARD_ATMOSPHERE, 298.15, 0.0
    from fuelair import air  # only here, for it loads numpy

    outside = air.REFERENCE[reference or "isa"]
    if altitude is None:
        return outside.pressure, outside.temperature, outside.relative_humidity
    temperature, pressure = air.standard_atmosphere(altitude)
    return pressure, temperature, outside.relative_humidity
