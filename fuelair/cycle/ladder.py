"""The ladder: what each assumption costs, step by step, from the crudest to the fullest model."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

from fuelair.cycle.result import MODELS, REFERENCE_MODEL, CycleResult
from fuelair.gas.engine import Array, Status

QUANTITIES: tuple[str, ...] = (
    "compression_temperature_K",
    "compression_pressure_Pa",
    "peak_temperature_K",
    "peak_pressure_Pa",
    "release_temperature_K",
    "release_pressure_Pa",
    "exhaust_temperature_K",
    "imep_gross_Pa",
    "work_J_per_kg",
    "indicated_efficiency",
)
"""Quantities that the ladder and the overprediction table show."""

ASSUMPTION: dict[tuple[str, str], str] = {
    ("air-cold", "air-variable"): "specific heat rises with temperature",
    ("air-variable", "fuel-air-complete"): "real mixture burns instead of heat to air",
    ("fuel-air-complete", "fuel-air-frozen"): "dissociation at the peak",
    ("fuel-air-frozen", "fuel-air-equilibrium"): "recombination during expansion",
    ("fuel-air-equilibrium", "fuel-air-real-gas"): "real gas instead of ideal",
}


@dataclass(frozen=True, slots=True)
class Step:
    """One rung to the next: the change of every quantity (SI) when one assumption is dropped."""

    lower: str
    upper: str
    assumption: str
    change: dict[str, float]


SUPPLY_MODEL = "fuel-air-complete"
"""Model at which the supply state of the fuel gets a line of its own."""
SUPPLY_WORDS = "fuel as supplied, not at 298.15 K without injection pressure"
SUPPLY_THRESHOLD = 1.0
"""Change of peak temperature from which the supply state of the fuel gets its line [K]."""


def steps(results: dict[str, CycleResult], case: int = 0, *, at_rest: CycleResult | None = None) -> list[Step]:
    """Steps between neighbouring models that are solved, for one case of the batch.

    They add up to the difference between the last and the first. A model that failed is left out
    and its two steps become one, whose text joins the assumptions it drops. ``at_rest`` is the complete
    model with its fuel supplied at 298.15 K without injection pressure; where that moves the peak temperature
    by more than `SUPPLY_THRESHOLD`, the step to that model is split in two.
    """
    there = [m for m in MODELS if m in results and results[m].status[case] == Status.OK]
    out = []
    for lower, upper in pairwise(there):
        between = MODELS[MODELS.index(lower) : MODELS.index(upper) + 1]
        words = "; ".join(ASSUMPTION[pair] for pair in pairwise(between))
        a, b = results[lower].figures, results[upper].figures
        if upper == SUPPLY_MODEL and at_rest is not None and _matters(at_rest, results[upper], case):
            out.append(Step(lower, upper, words, _change(a, at_rest.figures, case)))
            lower, words, a = upper, SUPPLY_WORDS, at_rest.figures
        out.append(Step(lower, upper, words, _change(a, b, case)))
    return out


def _matters(at_rest: CycleResult, supplied: CycleResult, case: int) -> bool:
    moved = supplied.figures["peak_temperature_K"][case] - at_rest.figures["peak_temperature_K"][case]
    return bool(at_rest.status[case] == Status.OK and abs(moved) > SUPPLY_THRESHOLD)


def _change(a: dict[str, Array], b: dict[str, Array], case: int) -> dict[str, float]:
    return {k: float(b[k][case] - a[k][case]) for k in QUANTITIES}


def overprediction(
    results: dict[str, CycleResult], case: int = 0, *, against: str = REFERENCE_MODEL
) -> dict[str, dict[str, dict[str, float | None]]]:
    """Each solved model of the ladder against one of them, by default the fuel-air equilibrium cycle.

    Absolute (SI) and relative per quantity; empty if that one is not solved.
    """
    if against not in results or results[against].status[case] != Status.OK:
        return {}
    reference = results[against].figures
    out: dict[str, dict[str, dict[str, float | None]]] = {}
    for model in MODELS:
        if model == against or model not in results or results[model].status[case] != Status.OK:
            continue
        out[model] = {}
        for key in QUANTITIES:
            base, value = float(reference[key][case]), float(results[model].figures[key][case])
            out[model][key] = {"absolute": value - base, "relative": value / base - 1.0 if base else None}
    return out
