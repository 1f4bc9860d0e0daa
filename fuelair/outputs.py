"""The weekly outputs: power, flows, exhaust composition, dew point, carbon dioxide."""

from __future__ import annotations

import numpy as np

from fuelair.air import water_dew_point
from fuelair.charge import Charge
from fuelair.cycle.breathing import short_circuit
from fuelair.cycle.fuel_air import Run
from fuelair.gas.complete import oxygen_excess
from fuelair.gas.engine import Array, Engine, GasState, weighted
from fuelair.gas.species import FUEL
from fuelair.prepare import Prepared

CARBON_DIOXIDE_PER_CARBON = 44.0095 / 12.0107
"""Mass of carbon dioxide per mass of carbon."""


def engine_figures(prepared: Prepared, run: Run, engine: Engine, cylinders: int) -> dict[str, float | None]:
    """Power and flows of the whole engine; None where geometry or speed are not given."""
    charge, swept, rate = run.charge, prepared.swept_volume, prepared.cycles_per_second
    volumes = prepared.settings.volumes
    trapped = None if swept is None else float(volumes.intake_closing[0] * swept / charge.trapped.v[0])
    per_second = None if trapped is None or rate is None else trapped * rate * cylinders
    figures = run.result.figures
    net = float(figures["imep_net_Pa"][0])
    fresh = float((charge.dry_air + charge.water_in)[0])
    passing = fresh * (1.0 + _bypass(prepared, charge))
    recipe = charge.recipe
    density = 1.0 / float(engine.state(recipe.table, "TP", recipe.temperature, recipe.pressure, _fresh(charge)).v[0])
    volumetric = fresh / float(charge.trapped.v[0]) * float(volumes.intake_closing[0]) / density

    def flow(mass: float) -> float | None:
        return None if per_second is None else mass * per_second

    return {
        "trapped_mass_kg": trapped,
        "fuel_mass_per_cycle_kg": None if trapped is None else float(charge.fuel_mass[0]) * trapped,
        "indicated_power_W": flow(float(figures["work_J_per_kg"][0])),
        "net_indicated_power_W": None if swept is None or rate is None else net * swept * rate * cylinders,
        "air_mass_flow_kg_per_s": flow(passing),
        "fuel_mass_flow_kg_per_s": flow(float(charge.fuel_mass[0])),
        "recirculated_mass_flow_kg_per_s": flow(float(charge.recirculated[0])),
        "exhaust_mass_flow_kg_per_s": flow(float(run.exhaust.leaving_mass[0]) + passing - fresh),
        "volumetric_efficiency": volumetric,
        "effective_compression_ratio": float(volumes.effective_compression[0]),
        "effective_expansion_ratio": float(volumes.effective_expansion[0]),
    }


def exhaust_figures(prepared: Prepared, run: Run, engine: Engine) -> dict[str, float | None]:
    """Composition of the exhaust after any short-circuited air, dew point, temperatures, carbon dioxide."""
    charge = run.charge
    table = charge.recipe.table
    leaving = mixed_exhaust(prepared, run, engine)
    x = leaving.mole_fractions()[0]
    part = {k: float(x[table.index(k)]) for k in ("O2", "CO2", "H2O", "CO", "H2", "NO")}
    dry = 1.0 - part["H2O"]
    work = float(run.result.figures["work_J_per_kg"][0])
    fuel = prepared.fuel
    carbon = CARBON_DIOXIDE_PER_CARBON * fuel.mass_fractions.get("C", 0.0)
    dew = float(water_dew_point(part["H2O"] * prepared.ambient.pressure)[0])
    return {
        "exhaust_temperature_K": float(leaving.T[0]),
        "exhaust_temperature_before_scavenge_air_K": float(run.exhaust.leaving.T[0]),
        "exhaust_O2_wet": part["O2"],
        "exhaust_O2_dry": part["O2"] / dry,
        "exhaust_CO2_wet": part["CO2"],
        "exhaust_CO2_dry": part["CO2"] / dry,
        "exhaust_H2O_wet": part["H2O"],
        "exhaust_CO_dry": part["CO"] / dry,
        "exhaust_H2_dry": part["H2"] / dry,
        "exhaust_NO_wet": part["NO"],
        "exhaust_dew_point_K": dew if np.isfinite(dew) else None,
        "exhaust_equivalence_ratio": exhaust_equivalence_ratio(charge, leaving.amounts),
        "co2_kg_per_J": carbon * float(charge.fuel_mass[0]) / work if work > 0.0 else None,
        "co2_kg_per_J_fuel": carbon / float(charge.lower_heating_value[0]),
    }


def mixed_exhaust(prepared: Prepared, run: Run, engine: Engine) -> GasState:
    """Exhaust with the fresh air of a two-stroke engine that passed straight through."""
    charge = run.charge
    bypass = _bypass(prepared, charge)
    if bypass == 0.0:
        return run.exhaust.leaving
    table, recipe = charge.recipe.table, charge.recipe
    fresh = _fresh(charge)
    h = engine.state(table, "TP", recipe.temperature, recipe.pressure, fresh).h
    extra = (charge.dry_air + charge.water_in) * bypass
    return short_circuit(
        engine,
        table,
        run.exhaust,
        extra=extra,
        extra_enthalpy=h,
        extra_amounts=fresh,
        pressure=prepared.settings.exhaust_pressure,
    )


def _bypass(prepared: Prepared, charge: Charge) -> float:
    """Fresh gas that passes straight through over fresh gas trapped."""
    ratio = prepared.scavenge_ratio
    if ratio is None:
        return 0.0
    return float(ratio / (1.0 - charge.residual_fraction[0]) - 1.0)


def _fresh(charge: Charge) -> Array:
    """Humid air as trapped (1, S) [kmol/kg]."""
    table = charge.recipe.table
    dry = table.amounts({k: v for k, v in charge.recipe.air.composition().items() if v > 0.0})
    amounts = dry[None] * charge.dry_air[:, None]
    amounts[:, table.index("H2O")] += charge.water_in / table.molar_mass[table.index("H2O")]
    return np.asarray(amounts / (charge.dry_air + charge.water_in)[:, None])


def exhaust_equivalence_ratio(charge: Charge, amounts: Array) -> float | None:
    """Equivalence ratio of the exhaust from its elements, the water and carbon dioxide of the air taken out.

    Oxygen needed by carbon, hydrogen and sulfur over the oxygen that is not in water drawn in; the
    fuel's own oxygen counts against its need. Argon (nitrogen where the air has none) tells how much air
    the exhaust holds; None if it cannot, for a fuel with nitrogen in air without argon.
    """
    table = charge.recipe.table
    air = _fresh(charge)
    tracer = "Ar" if charge.recipe.air.Ar > 0.0 else "N"
    if tracer == "N" and any(e == "N" for e, _ in charge.recipe.fuel.atoms):
        return None
    column = table.elements.index(tracer)
    share = float(weighted(amounts, table.atoms)[0, column] / weighted(air, table.atoms)[0, column])
    free = float(oxygen_excess(table, air)[0]) * share
    present = weighted(amounts, table.atoms)[0]
    need = {"C": 2.0, "H": 0.5, "S": 2.0, "O": -1.0}
    excess = -sum(k * float(present[table.elements.index(e)]) for e, k in need.items() if e in table.elements)
    return float((free - excess) / free)


def stoichiometric_flame_temperature(run: Run, engine: Engine) -> float | None:
    """Temperature of a stoichiometric mixture of the trapped gas and injected fuel, burned at compression pressure.

    The hottest a diffusion flame gets in equilibrium; None unless the fuel is injected at combustion or
    where the trapped gas has no oxygen left.
    """
    charge = run.charge
    if charge.recipe.admission != "direct":
        return None
    table, compressed = charge.recipe.table, run.compression.state
    pure = np.zeros((1, len(table)))
    pure[0, table.index(FUEL)] = 1.0 / table.molar_mass[table.index(FUEL)]
    spare, demand = oxygen_excess(table, compressed.amounts), -oxygen_excess(table, pure)
    if not spare[0] > 0.0:
        return None
    injected = spare / demand
    amounts = (compressed.amounts + pure * injected[:, None]) / (1.0 + injected)[:, None]
    h = (compressed.h + injected * charge.fuel_enthalpy) / (1.0 + injected)
    state = engine.state(table, "HP", h, compressed.p, amounts, "equilibrium")
    return float(state.T[0]) if state.status[0] == 0 else None


__all__ = ["engine_figures", "exhaust_equivalence_ratio", "exhaust_figures", "mixed_exhaust", "stoichiometric_flame_temperature"]
