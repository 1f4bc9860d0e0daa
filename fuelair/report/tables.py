"""An assessment as plain tables of text: one row model behind every face.

Pure functions of the result. Pressures in bar, temperatures in K, energies in kJ/kg; every column
carries its unit.
"""

from __future__ import annotations

from dataclasses import dataclass

from fuelair.assessment import Assessment
from fuelair.cycle.result import REFERENCE_MODEL
from fuelair.gas.engine import Status
from fuelair.quantities import QUANTITIES, header, shown, shown_value

CAUTION = (
    "Concept estimate from an ideal cycle; verify by test and detailed analysis. Local codes, class rules and licensed "
    "practice decide."
)

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
COST_HEADS = {
    "compression_pressure_Pa": "compression\np [bar]",
    "peak_temperature_K": "peak\nT [K]",
    "peak_pressure_Pa": "peak\np [bar]",
    "exhaust_temperature_K": "exhaust\nT [K]",
    "imep_gross_Pa": "gross imep\n[bar]",
    "indicated_efficiency": "efficiency\n[points]",
}
"""Quantities of the ladder and overprediction tables and their column heads."""


@dataclass(frozen=True, slots=True)
class Table:
    """A table of text: title, column heads, rows, a note below, and the column to stress (or None)."""

    title: str
    columns: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    note: str = ""
    stressed: int | None = None


def tables(a: Assessment) -> list[Table]:
    """Every table of an assessment in reading order."""
    return [charge(a), models(a), costs(a), over(a), *companions(a), states(a), engine(a), exhaust(a), exergy(a)]


def models(a: Assessment) -> Table:
    """Models side by side."""
    names = list(a.results)
    figures = {m: a.figures(m) for m in names}
    rows = [(header(key), *(shown(key, figures[m][key], unit=False) for m in names)) for key in MODEL_ROWS]
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
    """The ladder: what each assumption costs."""
    rows = [(s.assumption, s.upper, *(_signed(k, s.change[k]) for k in COST_HEADS)) for s in a.ladder]
    if a.ladder:
        total = {k: sum(s.change[k] for s in a.ladder) for k in COST_HEADS}
        rows.append(("all together", a.ladder[-1].upper, *(_signed(k, total[k]) for k in COST_HEADS)))
    start = a.ladder[0].lower if a.ladder else "air-cold"
    return Table(
        "What each assumption costs",
        (f"on top of {start}", "leads to", *COST_HEADS.values()),
        tuple(rows),
        "Each row is the change from the model above it; the rows add up to the last. Efficiency in percentage points.",
    )


def over(a: Assessment) -> Table:
    """How far each model is off the fuel-air equilibrium cycle."""
    rows = []
    for model, quantities in a.overprediction.items():
        cells = []
        for key in COST_HEADS:
            absolute, relative = quantities[key]["absolute"], quantities[key]["relative"]
            share = "" if relative is None else f" ({relative:{'+.1%' if abs(relative) < 0.0995 else '+.0%'}})"
            cells.append(_signed(key, absolute or 0.0) + share)
        rows.append((model, *cells))
    return Table(
        f"How far each model is off {REFERENCE_MODEL}",
        ("model", *COST_HEADS.values()),
        tuple(rows),
        "Difference to the fuel-air equilibrium cycle, and in percent of it; + is too much.",
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


def charge(a: Assessment) -> Table:
    """What is trapped."""
    f = a.charge_figures()
    basis = "liquid" if a.liquid_fuel else "vapour"
    rows = [
        ("Fuel", f"{a.fuel.title}, {a.case.fuel.admission}"),
        ("Equivalence ratio, fresh fuel over fresh dry air", _plain(f["equivalence_ratio"], ".3f")),
        ("Free oxygen over oxygen needed, all sources", _plain(f["oxygen_excess_ratio"], ".3f")),
        (
            "Air-fuel ratio (stoichiometric)",
            f"{_plain(f['air_fuel_ratio'], '.2f')} ({_plain(f['stoichiometric_air_fuel_ratio'], '.2f')})",
        ),
        (
            "Trapped pressure and temperature",
            f"{shown('p_Pa', f['trapped_pressure_Pa'])}, {shown('T_K', f['trapped_temperature_K'])}",
        ),
        (
            "Residual / recirculated gas, by mass",
            f"{_percent(f['residual_fraction'])} / {_percent(f['recirculated_per_trapped_mass'])}",
        ),
        ("O2 in the trapped charge", f"{_percent(f['trapped_O2_mole_fraction'])} by volume"),
        (
            f"Lower heating value ({basis}: as it enters)",
            f"{(f['lower_heating_value_J_per_kg'] or 0.0) / 1e6:.3f} MJ/kg{_other(a)}",
        ),
        ("Fuel energy that burns, per kg trapped", shown("heat_added_J_per_kg", f["heat_added_J_per_kg"])),
        (
            "Ambient air",
            f"{a.ambient.pressure / 1e5:.4g} bar, {a.ambient.temperature - 273.15:.1f} degC, "
            f"{a.ambient.relative_humidity:.0%} humid, {(f['humidity_ratio'] or 0.0) * 1e3:.1f} g water per kg dry air",
        ),
    ]
    if f["water_added_per_trapped_mass"]:
        rows.append(
            (
                "Liquid water added, per kg trapped",
                f"{f['water_added_per_trapped_mass'] * 1e3:.1f} g, {a.case.charge.water_admission}",
            )
        )
    if f["fuel_pump_work_J_per_kg_fuel"]:
        rows.append(("Least fuel pump work (not deducted)", f"{f['fuel_pump_work_J_per_kg_fuel'] / 1e3:.1f} kJ per kg fuel"))
    return Table("The trapped charge", ("", ""), tuple(rows))


def engine(a: Assessment) -> Table:
    """Power and flows."""
    e = a.engine_figures
    rows = [
        (QUANTITIES[k].label, shown(k, e[k]))
        for k in (
            "indicated_power_W",
            "net_indicated_power_W",
            "air_mass_flow_kg_per_s",
            "fuel_mass_flow_kg_per_s",
            "exhaust_mass_flow_kg_per_s",
            "volumetric_efficiency",
            "effective_compression_ratio",
            "effective_expansion_ratio",
        )
    ]
    trapped, fuel = e["trapped_mass_kg"], e["fuel_mass_per_cycle_kg"]
    if trapped is not None and fuel is not None:
        rows.append(("Trapped mass, fuel per cylinder and cycle", f"{trapped * 1e3:.4g} g, {fuel * 1e6:.4g} mg"))
    note = "" if e["indicated_power_W"] is not None else "Give bore, stroke and speed in [engine] for power and flows."
    count = a.case.engine.cylinders
    return Table(f"The engine ({count} cylinder{'s' if count > 1 else ''})", ("", ""), tuple(rows), note)


def exhaust(a: Assessment) -> Table:
    """Exhaust composition and carbon dioxide."""
    x = a.exhaust_figures
    f = a.figures()
    rows = [
        ("Mean exhaust temperature", shown("exhaust_temperature_K", x["exhaust_temperature_K"])),
        *(
            [("before the scavenge air that passes through", shown("exhaust_temperature_K", before))]
            if (before := x["exhaust_temperature_before_scavenge_air_K"]) != x["exhaust_temperature_K"]
            else []
        ),
        ("O2, wet / dry", f"{_percent(x['exhaust_O2_wet'])} / {_percent(x['exhaust_O2_dry'])}"),
        ("CO2, wet / dry", f"{_percent(x['exhaust_CO2_wet'])} / {_percent(x['exhaust_CO2_dry'])}"),
        ("H2O, wet", _percent(x["exhaust_H2O_wet"])),
        ("CO, H2, dry", f"{_percent(x['exhaust_CO_dry'])}, {_percent(x['exhaust_H2_dry'])}"),
        ("Equivalence ratio by elements", _plain(x["exhaust_equivalence_ratio"], ".3f")),
        (
            "Dew point at ambient pressure",
            "-" if x["exhaust_dew_point_K"] is None else f"{x['exhaust_dew_point_K'] - 273.15:.0f} degC",
        ),
        (
            "CO2 per indicated work, per fuel energy",
            f"{shown('co2_kg_per_J', x['co2_kg_per_J'])}, {shown('co2_kg_per_J_fuel', x['co2_kg_per_J_fuel'])}",
        ),
        ("Blowdown energy per kg trapped", shown("blowdown_energy_J_per_kg", f["blowdown_energy_J_per_kg"])),
    ]
    if a.flame_temperature is not None:
        rows.append(
            ("Stoichiometric flame at compression pressure", shown("stoichiometric_flame_temperature_K", a.flame_temperature))
        )
    return Table("The exhaust", ("", ""), tuple(rows), "By volume; composition leaves equilibrium at the freeze temperature.")


def exergy(a: Assessment) -> Table:
    """Where the fuel's exergy goes."""
    e = a.exergy
    fuel = float(e.fuel[0])
    parts = (
        ("brought by the fuel", fuel),
        ("brought by the trapped gas", float(e.trapped[0]) - (0.0 if a.charge.fuel_injected[0] > 0.0 else fuel)),
        ("destroyed by combustion", float(e.destroyed_by_entropy[0])),
        ("indicated work", float(e.indicated_work[0])),
        ("leaves with the exhaust", float(e.leaving[0])),
        ("destroyed in the blowdown", float(e.destroyed_blowdown[0])),
    )
    rows = tuple((name, f"{value / 1e3:.1f}", f"{value / fuel:.1%}") for name, value in parts)
    basis = "Szargut-Styrylo ratio" if e.from_correlation else "species data"
    return Table(
        "Where the fuel's exergy goes",
        ("", "kJ per kg trapped", "of the fuel's"),
        rows,
        f"Dead state 298.15 K, 101.325 kPa, Szargut's reference gases; fuel from {basis}. Work counts in full; the "
        "surroundings give and take the rest through intake and exhaust strokes.",
    )


def defaults(a: Assessment) -> list[str]:
    """Keys that the case left to their default, with the value used."""
    resolved = a.case.resolved()
    out = []
    for key in sorted(a.case.defaulted):
        section, _, name = key.partition(".")
        value = resolved[section][name] if name else resolved[section]
        if not isinstance(value, dict):
            out.append(f"{key} = {value:g}" if isinstance(value, float) else f"{key} = {value}")
    return out


def ledger(a: Assessment) -> str:
    """The worst relative residual of mass, elements, energy and entropy over all solved models."""
    rows = [
        (abs(float(v[0])), name, model)
        for model, result in a.results.items()
        if a.status(model) is Status.OK
        for name, v in result.ledger.items()
    ]
    worst, name, model = max(rows)
    return f"Mass, elements, energy and entropy close in every model; worst relative residual {worst:.0e} ({name} of {model})."


def _signed(key: str, value: float) -> str:
    row = QUANTITIES[key]
    return f"{shown_value(key, value + row.offset):+{row.style}}"


def _plain(value: float | None, style: str) -> str:
    return "-" if value is None else f"{value:{style}}"


def _percent(value: float | None) -> str:
    if value is None:
        return "-"
    return f"{value * 100.0:.3g} %" if value >= 1e-4 or value == 0.0 else f"{value * 1e6:.3g} ppm"


def _other(a: Assessment) -> str:
    other = a.other_heating_value
    if other is None:
        return ""
    return f"; {'vapour' if a.liquid_fuel else 'liquid'} {other / 1e6:.3f}"
