"""Tables around the comparison: charge, engine, exhaust, exergy; defaults and ledger in words."""

from __future__ import annotations

from fuelair.assessment import Assessment
from fuelair.cycle.breathing import DEFAULT_FREEZE
from fuelair.cycle.exergy import water_exergy
from fuelair.cycle.result import LEDGER_LIMIT
from fuelair.gas.engine import Status
from fuelair.quantities import QUANTITIES, shown
from fuelair.report.table import Table, percent, plain


def charge(a: Assessment) -> Table:
    """What is trapped."""
    f = a.charge_figures()
    basis = "liquid" if a.liquid_fuel else "vapour"
    rows = [
        ("Fuel", f"{a.fuel.title}, {a.case.fuel.admission}"),
        ("Equivalence ratio, fresh fuel over fresh dry air", plain(f["equivalence_ratio"], ".3f")),
        ("Free oxygen over oxygen needed, all sources", plain(f["oxygen_excess_ratio"], ".3f")),
        (
            "Air-fuel ratio (stoichiometric)",
            f"{plain(f['air_fuel_ratio'], '.2f')} ({plain(f['stoichiometric_air_fuel_ratio'], '.2f')})",
        ),
        (
            "Trapped pressure and temperature",
            f"{shown('p_Pa', f['trapped_pressure_Pa'])}, {shown('T_K', f['trapped_temperature_K'])}",
        ),
        (
            "Residual / recirculated gas, by mass",
            f"{percent(f['residual_fraction'])} / {percent(f['recirculated_per_trapped_mass'])}",
        ),
        ("O2 in the trapped charge", f"{percent(f['trapped_O2_mole_fraction'])} by volume"),
        (
            f"Lower heating value ({basis}: as it enters)",
            f"{(f['lower_heating_value_J_per_kg'] or 0.0) / 1e6:.3f} MJ/kg{_other(a)}",
        ),
        ("Fuel energy given to every model, per kg trapped", shown("heat_added_J_per_kg", f["heat_added_J_per_kg"])),
        (
            "Ambient air",
            f"{a.ambient.pressure / 1e5:.3f} bar, {a.ambient.temperature - 273.15:.1f} degC, "
            f"{100 * a.ambient.relative_humidity:.0f} % humid, {(f['humidity_ratio'] or 0.0) * 1e3:.1f} g water per kg dry air",
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
        rows.append(
            ("Least work to press the fuel (not deducted)", f"{f['fuel_pump_work_J_per_kg_fuel'] / 1e3:.1f} kJ per kg fuel")
        )
    return Table("The trapped charge", ("", ""), tuple(rows))


CHARGING = "Charging efficiency (fresh gas trapped over swept volume)"


def _mass(kilograms: float) -> str:
    """A mass in kg, g or mg, four digits."""
    factor, unit = next((f, u) for f, u in ((1.0, "kg"), (1e3, "g"), (1e6, "mg")) if kilograms * f >= 1.0 or u == "mg")
    return f"{kilograms * factor:.4g} {unit}"


def engine(a: Assessment) -> Table:
    """Power and flows."""
    e = a.engine_figures
    two_stroke = a.case.engine.strokes_per_cycle == 2
    rows = [
        (CHARGING if two_stroke and k == "volumetric_efficiency" else QUANTITIES[k].label, shown(k, e[k]))
        for k in (
            "indicated_power_W",
            "net_indicated_power_W",
            "air_mass_flow_kg_per_s",
            "fuel_mass_flow_kg_per_s",
            "exhaust_mass_flow_kg_per_s",
            *(["recirculated_mass_flow_kg_per_s"] if a.charge.recirculated[0] > 0.0 else []),
            "volumetric_efficiency",
            "effective_compression_ratio",
            "effective_expansion_ratio",
        )
    ]
    trapped, fuel = e["trapped_mass_kg"], e["fuel_mass_per_cycle_kg"]
    if trapped is not None and fuel is not None:
        rows.append(("Trapped mass, fuel per cylinder and cycle", f"{_mass(trapped)}, {_mass(fuel)}"))
    note = "" if e["indicated_power_W"] is not None else "Give bore, stroke and speed in [engine] for power and flows."
    count = a.case.engine.cylinders
    return Table(f"The engine ({count} cylinder{'s' if count > 1 else ''})", ("", ""), tuple(rows), note)


def exhaust(a: Assessment) -> Table:
    """Exhaust composition and carbon dioxide."""
    x = a.exhaust_figures
    f = a.figures()
    before, after = x["exhaust_temperature_before_scavenge_air_K"], x["exhaust_temperature_K"]
    freeze = a.case.gas.freeze_temperature or DEFAULT_FREEZE
    mean = "Mean exhaust temperature" + ("" if before == after else " after the scavenge air")
    rows = [
        (mean, shown("exhaust_temperature_K", x["exhaust_temperature_K"])),
        *([("Mean exhaust temperature before it", shown("exhaust_temperature_K", before))] if before != after else []),
        ("O2, wet / dry", f"{percent(x['exhaust_O2_wet'])} / {percent(x['exhaust_O2_dry'])}"),
        ("CO2, wet / dry", f"{percent(x['exhaust_CO2_wet'])} / {percent(x['exhaust_CO2_dry'])}"),
        ("H2O, wet", percent(x["exhaust_H2O_wet"])),
        ("CO, H2, dry", f"{percent(x['exhaust_CO_dry'])}, {percent(x['exhaust_H2_dry'])}"),
        ("Equivalence ratio by elements", plain(x["exhaust_equivalence_ratio"], ".3f")),
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
    return Table("The exhaust", ("", ""), tuple(rows), f"By volume; composition leaves equilibrium at {freeze:g} K.")


def exergy(a: Assessment) -> Table:
    """Where the fuel's exergy goes: what comes in adds up to what goes out."""
    e = a.exergy
    names = ("fuel", "trapped", "release", "work", "destroyed_by_entropy", "leaving", "remaining", "destroyed_blowdown")
    v = {k: float(getattr(e, k)[0]) for k in names}
    mixed = 0.0 if a.charge.fuel_injected[0] > 0.0 else v["fuel"]
    pushed = v["leaving"] + v["remaining"] + v["destroyed_blowdown"] - v["release"]
    parts = (
        ("in: the fuel", v["fuel"]),
        ("in: the trapped gas and added water", v["trapped"] - mixed + _water_exergy(a)),
        ("in: the exhaust stroke", pushed),
        ("out: destroyed by combustion", v["destroyed_by_entropy"]),
        ("out: work up to release, against ambient pressure", v["work"]),
        ("out: leaves with the exhaust", v["leaving"]),
        ("out: stays in the cylinder", v["remaining"]),
        ("out: destroyed in the blowdown", v["destroyed_blowdown"]),
    )
    rows = tuple((name, f"{value / 1e3:.1f}", f"{100 * value / v['fuel']:.1f} %") for name, value in parts)
    basis = "the Szargut-Styrylo ratio" if e.from_correlation else "species data"
    return Table(
        "Where the fuel's exergy goes",
        ("", "kJ per kg trapped", "of the fuel's"),
        rows,
        f"Dead state 298.15 K, 101.325 kPa, Szargut's reference gases; the fuel's exergy from {basis}.",
    )


def _water_exergy(a: Assessment) -> float:
    return float((a.charge.water_injected * water_exergy(a.charge))[0])


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
    words = "close in every model" if worst <= LEDGER_LIMIT else "do not close"
    what = name.replace("_", " ")
    return f"Mass, elements, energy and entropy {words}; worst relative residual {worst:.0e} ({what}, {model})."


def _other(a: Assessment) -> str:
    other = a.other_heating_value
    if other is None:
        return ""
    return f"; {'vapour' if a.liquid_fuel else 'liquid'} {other / 1e6:.3f}"
