"""JSON Schema of the assessment that `fuelair assess --json` writes."""

from __future__ import annotations

from typing import Any

from fuelair.assessment import FORMAT
from fuelair.cycle.ladder import QUANTITIES as LADDER
from fuelair.cycle.result import FREEZE_MODEL, MODELS
from fuelair.gas.engine import Status

DIALECT = "https://json-schema.org/draft/2020-12/schema"
STATES = ("trapped", "compressed", "limit", "burned", "release", "blown-down", "exhaust")
STATE_NUMBERS = (
    "T_K", "p_Pa", "v_m3_per_kg", "u_J_per_kg", "h_J_per_kg", "s_J_per_kgK", "mass_per_trapped", "V_m3", "mass_kg",
)  # fmt: skip
MODEL_NUMBERS = (
    "compression_temperature_K", "compression_pressure_Pa", "peak_temperature_K", "peak_pressure_Pa", "release_temperature_K",
    "release_pressure_Pa", "exhaust_temperature_K", "blowdown_temperature_K", "cutoff_ratio", "residual_fraction",
    "imep_gross_Pa", "imep_net_Pa", "pmep_Pa", "indicated_efficiency", "isfc_kg_per_J", "work_J_per_kg",
    "heat_supplied_J_per_kg", "heat_added_J_per_kg", "compression_heat_J_per_kg", "blowdown_energy_J_per_kg",
)  # fmt: skip
NUMBER: dict[str, Any] = {"type": ["number", "null"]}


def assessment_schema() -> dict[str, Any]:
    """JSON Schema (draft 2020-12) of an assessment; null stands for a figure that was not solved."""
    text, numbers = {"type": "string"}, {"type": "object", "additionalProperties": NUMBER}
    model = as_record(
        {"status": {"enum": [s.label for s in Status]}, "reason": text, "flags": as_list(text)}
        | dict.fromkeys(MODEL_NUMBERS, NUMBER)
    )
    state = as_record(
        {"state": {"enum": list(STATES)}} | dict.fromkeys(STATE_NUMBERS, NUMBER),
        optional={"mole_fractions": {"type": "object", "additionalProperties": {"type": "number", "minimum": 0, "maximum": 1}}},
    )
    step = as_record({"from": text, "to": text, "assumption": text} | dict.fromkeys(LADDER, NUMBER))
    offset = as_record({"absolute": NUMBER, "relative": NUMBER})
    source = as_record(
        {"key": text, "reference": text, "standing": {"enum": ["read", "computed", "from memory", "common practice"]}}
    )
    models = [*MODELS, FREEZE_MODEL]
    parts = {
        "format": {"const": FORMAT}, "versions": {"type": "object", "additionalProperties": text}, "engine": text,
        "headline": {"enum": models}, "verdict": text, "case": {"type": "object"}, "defaulted": as_list(text), "charge": numbers,
        "models": _by_model(model, MODELS, models), "companions": {"type": "object"},
        "states": _by_model(as_list(state), MODELS, models), "ladder": as_list(step),
        "overprediction": _by_model({"type": "object", "additionalProperties": offset}, (), models),
        "exergy": {"type": "object"}, "second_opinion": numbers, "engine_figures": numbers, "exhaust": numbers,
        "ledger": {"type": "object", "additionalProperties": numbers}, "warnings": as_list(text), "sources": as_list(source),
    }  # fmt: skip
    return {"$schema": DIALECT, "title": "fuelair assessment", **as_record(parts)}


def as_record(properties: dict[str, Any], optional: dict[str, Any] | None = None) -> dict[str, Any]:
    """Schema of an object with these properties and no others."""
    return {
        "type": "object", "properties": properties | (optional or {}), "required": list(properties),
        "additionalProperties": False,
    }  # fmt: skip


def as_list(items: dict[str, Any]) -> dict[str, Any]:
    """Schema of an array of such items."""
    return {"type": "array", "items": items}


def _by_model(item: dict[str, Any], required: tuple[str, ...], allowed: list[str]) -> dict[str, Any]:
    return {
        "type": "object", "properties": dict.fromkeys(allowed, item), "required": list(required), "additionalProperties": False,
    }  # fmt: skip
