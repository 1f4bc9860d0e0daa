"""Tables that compare: models side by side, the ladder, how far each model is off, states."""

from __future__ import annotations

from fuelair.assessment import Assessment
from fuelair.cycle import ladder
from fuelair.cycle.result import MODELS
from fuelair.gas.engine import Status
from fuelair.quantities import header, shown
from fuelair.report.table import Table, signed

SHORT = {
    "air-cold": "air,\nconstant k",
    "air-variable": "air,\nvariable cp",
    "fuel-air-complete": "fuel-air,\ncomplete",
    "fuel-air-frozen": "fuel-air,\nfrozen",
    "fuel-air-equilibrium": "fuel-air,\nequilibrium",
    "fuel-air-real-gas": "fuel-air,\nreal gas",
    "fuel-air-freeze-below": "fuel-air,\nfreeze below",
}
"""Column heads of the models."""

MODEL_ROWS = (
    "compression_temperature_K",
    "compression_pressure_Pa",
    "peak_temperature_K",
    "peak_pressure_Pa",
    "release_temperature_K",
    "release_pressure_Pa",
    "exhaust_temperature_K",
    "blowdown_temperature_K",
    "cutoff_ratio",
    "work_J_per_kg",
    "imep_gross_Pa",
    "pmep_Pa",
    "imep_net_Pa",
    "indicated_efficiency",
    "isfc_kg_per_J",
)
POLYTROPIC_ROWS = ("compression_heat_J_per_kg",)
COST_HEADS = {
    "compression_pressure_Pa": "compression\np [bar]",
    "peak_temperature_K": "peak\nT [K]",
    "peak_pressure_Pa": "peak\np [bar]",
    "exhaust_temperature_K": "exhaust\nT [K]",
    "imep_gross_Pa": "gross imep\n[bar]",
    "indicated_efficiency": "efficiency\n[points]",
}
"""Quantities of the ladder and overprediction tables and their column heads."""


def models(a: Assessment) -> Table:
    """Models side by side."""
    names = list(a.results)
    figures = {m: a.figures(m) for m in names}
    rows = [
        (header(key), *(shown(key, figures[m][key], unit=False) for m in names))
        for key in MODEL_ROWS + (POLYTROPIC_ROWS if a.case.gas.compression_exponent else ())
    ]
    failed = [(m, a.status(m)) for m in names if a.status(m) is not Status.OK]
    if failed:
        rows.insert(0, ("status", *(a.status(m).label for m in names)))
    return Table(
        "The same charge through every model",
        ("", *(SHORT[m] for m in names)),
        tuple(rows),
        "Same trapped state, ratio and fuel energy per kg in every column; temperatures at the peak are mass means. "
        f"Verdict: {a.headline}.",
        1 + names.index(a.headline),
    )


def costs(a: Assessment) -> Table:
    """The ladder: what each assumption costs, with the sum up to the headline."""
    rows = []
    sums = dict.fromkeys(COST_HEADS, 0.0)
    for number, step in enumerate(a.ladder, start=1):
        rows.append((step.assumption, step.upper, *(signed(k, step.change[k]) for k in COST_HEADS)))
        sums = {k: sums[k] + step.change[k] for k in COST_HEADS}
        last = number == len(a.ladder)
        if last or (step.upper == a.headline and a.ladder[number].lower != a.ladder[number].upper):
            name = "all together" if last else "up to the headline"
            rows.append((name, step.upper, *(signed(k, sums[k]) for k in COST_HEADS)))
    start = a.ladder[0].lower if a.ladder else MODELS[0]
    return Table(
        "What each assumption costs",
        (f"on top of {start}", "gives", *COST_HEADS.values()),
        tuple(rows),
        "Each row is the change from the model above it; the rows add up. Efficiency in percentage points.",
    )


def over(a: Assessment) -> Table:
    """How far each model is off the headline."""
    rows = []
    for model, quantities in ladder.overprediction(a.results, against=a.headline).items():
        cells = []
        for key in COST_HEADS:
            absolute, relative = quantities[key]["absolute"], quantities[key]["relative"]
            share = "" if relative is None else f" ({relative:{'+.1%' if abs(relative) < 0.0995 else '+.0%'}})"
            cells.append(signed(key, absolute or 0.0) + share)
        rows.append((model, *cells))
    return Table(
        f"How far each model is off {a.headline}",
        ("model", *COST_HEADS.values()),
        tuple(rows),
        "Difference to the headline model, and in percent of it; + means too much.",
    )


def companions(a: Assessment) -> list[Table]:
    """Air-standard cycles on another basis: the same cut-off ratio, or heat limited by oxygen."""
    keys = ("heat_added_J_per_kg", "peak_temperature_K", "peak_pressure_Pa", "imep_gross_Pa", "indicated_efficiency")
    titles = {
        "same-cutoff-ratio": "Air-standard cycles on the headline's cut-off ratio instead of its fuel energy",
        "oxygen-limited-heat": "Air-standard cycles on the heat that the trapped oxygen allows",
    }
    out = []
    for basis, group in a.companions.items():
        rows = [
            (m, *(shown(k, float(r.figures[k][0]), unit=False) if r.status[0] == Status.OK else "-" for k in keys))
            for m, r in group.items()
        ]
        note = "Efficiency over the heat added on this basis."
        out.append(Table(titles[basis], ("model", *(header(k) for k in keys)), tuple(rows), note))
    return out


def states(a: Assessment, model: str | None = None) -> Table:
    """Named states of a model (default the headline)."""
    keys = ("T_K", "p_Pa", "v_m3_per_kg", "u_J_per_kg", "h_J_per_kg", "s_J_per_kgK")
    frame = a.to_states(model)
    rows = [(str(s["state"]), *(shown(k, s[k], unit=False) for k in keys), f"{s['mass_per_trapped']:.4f}") for s in frame]
    return Table(
        f"States of {model or a.headline}",
        ("state", *(header(k) for k in keys), "mass per trapped"),
        tuple(rows),
        "Per kg of the gas present; u and h from the elements at 298.15 K.",
    )
