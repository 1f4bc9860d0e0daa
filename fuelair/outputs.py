"""The weekly outputs: power, flows, exhaust composition, dew point, carbon dioxide."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fuelair.air import water_dew_point
from fuelair.charge import Charge
from fuelair.charge.recipe import pure
from fuelair.cycle.breathing import short_circuit
from fuelair.cycle.fuel_air import Run
from fuelair.gas.complete import oxygen_excess
from fuelair.gas.engine import Array, Engine, GasState, Status, weighted
from fuelair.gas.species import FUEL
from fuelair.prepare import Prepared

CARBON_DIOXIDE_PER_CARBON = 44.0095 / 12.0107
"""Mass of carbon dioxide per mass of carbon."""


def engine_figures(prepared: Prepared, run: Run, engine: Engine) -> dict[str, Array]:
    """Power and flows of the whole engine (N,); NaN where geometry or speed are not given."""
    charge, volumes = run.charge, prepared.settings.volumes
    swept, rate = prepared.settings.swept_volume, prepared.cycles_per_second
    trapped = volumes.intake_closing * swept / charge.trapped.v
    per_second = trapped * rate * prepared.cylinders
    figures = run.result.figures
    fresh = charge.dry_air + charge.water_in
    passing = fresh * (1.0 + _bypass(prepared, charge))
    recipe = charge.recipe
    density = 1.0 / engine.state(recipe.table, "TP", recipe.temperature, recipe.pressure, _fresh(charge)).v
    return {
        "trapped_mass_kg": trapped,
        "fuel_mass_per_cycle_kg": charge.fuel_mass * trapped,
        "indicated_power_W": figures["work_J_per_kg"] * per_second,
        "net_indicated_power_W": figures["imep_net_Pa"] * swept * rate * prepared.cylinders,
        "air_mass_flow_kg_per_s": passing * per_second,
        "fuel_mass_flow_kg_per_s": charge.fuel_mass * per_second,
        "recirculated_mass_flow_kg_per_s": charge.recirculated * per_second,
        "exhaust_mass_flow_kg_per_s": (run.exhaust.leaving_mass + passing - fresh) * per_second,
        "volumetric_efficiency": fresh / charge.trapped.v * volumes.intake_closing / density,
        "effective_compression_ratio": volumes.effective_compression,
        "effective_expansion_ratio": volumes.effective_expansion,
    }


def exhaust_figures(prepared: Prepared, run: Run, engine: Engine) -> dict[str, Array]:
    """Composition of the exhaust after any short-circuited air, dew point, temperatures, carbon dioxide (N,).

    NaN for a dew point of dry gas, an equivalence ratio that the exhaust does not tell, carbon dioxide over no work.
    """
    charge = run.charge
    table = charge.recipe.table
    leaving = mixed_exhaust(prepared, run, engine)
    x = leaving.mole_fractions()
    part = {k: x[:, table.index(k)] for k in ("O2", "CO2", "H2O", "CO", "H2", "NO")}
    dry = 1.0 - part["H2O"]
    work = run.result.figures["work_J_per_kg"]
    carbon = CARBON_DIOXIDE_PER_CARBON * prepared.fuel.mass_fractions.get("C", 0.0)
    return {
        "exhaust_temperature_K": leaving.T,
        "exhaust_temperature_before_scavenge_air_K": run.exhaust.leaving.T,
        "exhaust_O2_wet": part["O2"],
        "exhaust_O2_dry": part["O2"] / dry,
        "exhaust_CO2_wet": part["CO2"],
        "exhaust_CO2_dry": part["CO2"] / dry,
        "exhaust_H2O_wet": part["H2O"],
        "exhaust_CO_dry": part["CO"] / dry,
        "exhaust_H2_dry": part["H2"] / dry,
        "exhaust_NO_wet": part["NO"],
        "exhaust_dew_point_K": water_dew_point(part["H2O"] * prepared.ambient_pressure),
        "exhaust_equivalence_ratio": exhaust_equivalence_ratio(charge, leaving.amounts),
        "co2_kg_per_J": np.where(work > 0.0, carbon * charge.fuel_mass / np.where(work > 0.0, work, 1.0), np.nan),
        "co2_kg_per_J_fuel": carbon / charge.lower_heating_value,
    }


def mixed_exhaust(prepared: Prepared, run: Run, engine: Engine) -> GasState:
    """Exhaust with the fresh air of a two-stroke engine that passed straight through."""
    charge = run.charge
    bypass = _bypass(prepared, charge)
    if not (bypass != 0.0).any():
        return run.exhaust.leaving
    table, recipe = charge.recipe.table, charge.recipe
    fresh = _fresh(charge)
    h = engine.state(table, "TP", recipe.temperature, recipe.pressure, fresh).h
    mixed = short_circuit(
        engine,
        table,
        run.exhaust,
        extra=(charge.dry_air + charge.water_in) * bypass,
        extra_enthalpy=h,
        extra_amounts=fresh,
        pressure=prepared.settings.exhaust_pressure,
    )
    alone, leaving = bypass == 0.0, run.exhaust.leaving  # not a bit may depend on the rows beside it
    return replace(mixed, T=np.where(alone, leaving.T, mixed.T), amounts=np.where(alone[:, None], leaving.amounts, mixed.amounts))


def _bypass(prepared: Prepared, charge: Charge) -> Array:
    """Fresh gas that passes straight through over fresh gas trapped (N,)."""
    ratio = prepared.scavenge_ratio
    return np.where(np.isfinite(ratio), ratio / (1.0 - charge.residual_fraction) - 1.0, 0.0)


def _fresh(charge: Charge) -> Array:
    """Humid air as trapped (N, S) [kmol/kg]."""
    table = charge.recipe.table
    dry = table.amounts({k: v for k, v in charge.recipe.air.composition().items() if v > 0.0})
    amounts = dry[None] * charge.dry_air[:, None]
    amounts[:, table.index("H2O")] += charge.water_in / table.molar_mass[table.index("H2O")]
    return np.asarray(amounts / (charge.dry_air + charge.water_in)[:, None])


def exhaust_equivalence_ratio(charge: Charge, amounts: Array) -> Array:
    """Equivalence ratio of the exhaust from its elements (N,), the water and carbon dioxide of the air taken out.

    Oxygen needed by carbon, hydrogen and sulfur over the oxygen that is not in water drawn in; the
    fuel's own oxygen counts against its need. Argon (nitrogen where the air has none) tells how much air
    the exhaust holds; NaN if it cannot, for a fuel with nitrogen in air without argon.
    """
    table = charge.recipe.table
    air = _fresh(charge)
    tracer = "Ar" if charge.recipe.air.Ar > 0.0 else "N"
    if tracer == "N" and any(e == "N" for e, _ in charge.recipe.fuel.atoms):
        return np.full(len(amounts), np.nan)
    column = table.elements.index(tracer)
    present = weighted(amounts, table.atoms)
    share = present[:, column] / weighted(air, table.atoms)[:, column]
    free = oxygen_excess(table, air) * share
    need = {"C": 2.0, "H": 0.5, "S": 2.0, "O": -1.0}
    excess = -sum(k * present[:, table.elements.index(e)] for e, k in need.items() if e in table.elements)
    return np.asarray((free - excess) / free)


def stoichiometric_flame_temperature(run: Run, engine: Engine) -> Array:
    """Temperature of a stoichiometric mixture of the trapped gas and injected fuel, burned at compression pressure (N,).

    The hottest a diffusion flame gets in equilibrium; NaN unless the fuel is injected at combustion and
    where the trapped gas has no oxygen left.
    """
    charge = run.charge
    n = len(charge.recipe)
    if charge.recipe.admission != "direct":
        return np.full(n, np.nan)
    table, compressed = charge.recipe.table, run.compression.state
    spare, demand = oxygen_excess(table, compressed.amounts), -oxygen_excess(table, pure(table, FUEL, n))
    injected = np.where(spare > 0.0, spare, np.nan) / demand
    amounts = (compressed.amounts + pure(table, FUEL, n) * injected[:, None]) / (1.0 + injected)[:, None]
    h = (compressed.h + injected * charge.fuel_enthalpy) / (1.0 + injected)
    state = engine.state(table, "HP", h, compressed.p, np.where(spare[:, None] > 0.0, amounts, compressed.amounts), "equilibrium")
    return np.where(state.status == Status.OK, state.T, np.nan)


def charge_figures(charge: Charge) -> dict[str, Array]:
    """Make-up of the trapped charge (N,)."""
    phi = charge.recipe.equivalence_ratio
    return {
        "equivalence_ratio": phi,
        "excess_air_ratio": 1.0 / phi,
        "air_fuel_ratio": charge.recipe.stoichiometric_air_fuel_ratio / phi,
        "oxygen_excess_ratio": charge.oxygen_excess_ratio(),
        "trapped_O2_mole_fraction": charge.trapped_oxygen(),
        "trapped_temperature_K": charge.trapped.T,
        "trapped_pressure_Pa": charge.trapped.p,
        "fuel_per_trapped_mass": charge.fuel_mass,
        "water_added_per_trapped_mass": charge.water_added,
        "drained_water_per_dry_air": charge.drained_water,
        "fuel_vapour_saturation_ratio": charge.saturation_ratio,
        "wall_heat_J_per_kg": charge.wall_heat,
    }
