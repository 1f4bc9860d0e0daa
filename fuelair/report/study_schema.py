"""JSON Schemas of what `fuelair find --json` and `fuelair band --json` write."""

from __future__ import annotations

from typing import Any

from fuelair.cycle.result import FREEZE_MODEL, MODELS
from fuelair.errors import InputError, Problem
from fuelair.gas.engine import Status
from fuelair.gas.engines import ENGINES
from fuelair.report.schema import DIALECT, NUMBER, as_list, as_record
from fuelair.study.asked import FORMAT

_TEXT: dict[str, Any] = {"type": "string"}
_REAL: dict[str, Any] = {"type": "number"}
_COUNT: dict[str, Any] = {"type": "integer", "minimum": 0}
_TRUTH: dict[str, Any] = {"type": "boolean"}
_SHARE: dict[str, Any] = {"type": "number", "minimum": 0, "maximum": 1}
_FIGURES: dict[str, Any] = {"type": "object", "additionalProperties": NUMBER}
_COUNTS: dict[str, Any] = {"type": "object", "additionalProperties": _COUNT}
_HEAD: dict[str, Any] = {
    "format": {"const": FORMAT},
    "versions": {"type": "object", "additionalProperties": _TEXT},
    "engine": {"enum": list(ENGINES)},
    "model": {"enum": ["", *MODELS, FREEZE_MODEL]},
    "case": {"type": "object"},
}
_VARIED = as_record({"key": _TEXT, "unit": _TEXT, "low": _REAL, "high": _REAL})


def named(name: str) -> dict[str, Any]:
    """The schema of ``find`` (with a target), ``best`` (find with --most or --least) or ``band``; InputError for others."""
    known = {"find": find_schema, "best": optimum_schema, "band": band_schema}
    if name not in known:
        raise InputError(Problem("no such schema", "--study-schema", name, ", ".join(known)))
    return known[name]()


def find_schema() -> dict[str, Any]:
    """JSON Schema (draft 2020-12) of `fuelair find --target`; null stands for a figure that there is not."""
    root = as_record({"value": _REAL, "figures": _FIGURES, "slope": NUMBER, "condition": NUMBER, "touching": _TRUTH})
    extreme = {"anyOf": [{"type": "null"}, as_record({"at": _REAL, "value": _REAL})]}
    parts = _HEAD | {
        "vary": _VARIED,
        "target": as_record({"quantity": _TEXT, "value": _REAL}),
        "scan": as_record({"points": _COUNT, "spacing": {"enum": ["linear", "logarithmic"]}, "rows": _COUNT}),
        "outcome": {"enum": ["met", "none", "not-determined"]},
        "reason": _TEXT,
        "roots": as_list(root),
        "on_target": as_list(as_record({"low": _REAL, "high": _REAL})),
        "gaps": as_list(as_record({"low": _REAL, "high": _REAL, "status": {"enum": [s.label for s in Status]}})),
        "jumps": as_list(as_record({"at": _REAL, "before": NUMBER, "after": NUMBER})),
        "lowest": extreme,
        "highest": extreme,
    }
    return {"$schema": DIALECT, "title": "fuelair find", **as_record(parts)}


def optimum_schema() -> dict[str, Any]:
    """JSON Schema of `fuelair find --most` or `--least`."""
    limit = {"quantity": _TEXT, "sense": {"enum": ["<=", ">="]}, "bound": _REAL, "margin": NUMBER, "sensitivity": NUMBER}
    starts = as_record({"polished": _COUNT, "agree": _COUNT, "stationarity": NUMBER})
    parts = _HEAD | {
        "seed": _COUNT,
        "vary": as_list(_VARIED),
        "objective": as_record({"quantity": _TEXT, "sense": {"enum": ["most", "least"]}}),
        "scan": as_record({"points": _COUNT, "rows": _COUNT, "failed": _COUNTS, "keep_every_limit": _COUNT}),
        "feasible": _TRUTH,
        "verdict": _TEXT,
        "at": {"type": "object", "additionalProperties": _REAL},
        "figures": _FIGURES,
        "limits": as_list(as_record(limit | {"reached": {"type": ["boolean", "null"]}})),
        "ends": as_list(as_record({"key": _TEXT, "end": {"enum": ["low", "high"]}, "sensitivity": NUMBER})),
        "starts": {"anyOf": [{"type": "null"}, starts]},
    }
    return {"$schema": DIALECT, "title": "fuelair find", **as_record(parts)}


def band_schema() -> dict[str, Any]:
    """JSON Schema of `fuelair band`."""
    spread = {"key": _TEXT, "distribution": {"enum": ["normal", "uniform", "triangular"]}, "cut_off": _SHARE}
    spread |= {"centre": _REAL, "standard_deviation": NUMBER, "low": _REAL, "high": _REAL}
    band = dict.fromkeys(("nominal", "mean", "deviation", "p5", "p50", "p95", "p99", "p95_within"), NUMBER)
    indices = ("first", "first_within", "total", "total_within", "rank", "rank_within")
    peak = ("relative", "coverage", "nominal_mean", "nominal_design", "p95_mean", "p95_design")
    parts = _HEAD | {
        "seed": _COUNT,
        "rows": _COUNT,
        "index_rows": _COUNT,
        "randomisations": _COUNT,
        "confidence": _SHARE,
        "correlated": _TRUTH,
        "spreads": as_list(as_record(spread)),
        "failed": _COUNTS,
        "failed_share": _SHARE,
        "quantities": {"type": "object", "additionalProperties": as_record(band)},
        "influence": {
            "type": "object",
            "additionalProperties": as_list(as_record({"key": _TEXT} | dict.fromkeys(indices, NUMBER))),
        },
        "design_peak": {"anyOf": [{"type": "null"}, as_record(dict.fromkeys(peak, NUMBER))]},
        "notes": as_list(_TEXT),
    }
    return {"$schema": DIALECT, "title": "fuelair band", **as_record(parts)}
