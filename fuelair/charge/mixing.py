"""Mixes the streams to the trapped charge: fresh air, fuel, water, recirculated and residual gas."""

from __future__ import annotations

import numpy as np

from fuelair.air import water_saturation_pressure
from fuelair.charge.recipe import Recipe, enters_as_liquid, supply_enthalpy, water_enthalpy
from fuelair.charge.trapped import BurnedGas, Charge, water_saturation_ratio
from fuelair.gas.engine import Array, Engine, GasState, Status, total
from fuelair.gas.species import FUEL, SpeciesTable

COLDEST = 200.0
"""Below this [K] a charge that liquid cooled counts as too cold to hold it as vapour."""


def compose(recipe: Recipe, engine: Engine, burned: BurnedGas) -> Charge:
    """Mix the trapped charge from the recipe and burned gas that comes back.

    Raises nothing for a charge that cannot be; its ``status`` says why.
    """
    table, n = recipe.table, len(recipe)
    before = recipe.admission != "direct"
    fresh, egr, fuel, drained, vapour = _streams(recipe, engine, burned)
    water = fuel * (0.0 if recipe.water_ratio is None else recipe.water_ratio)
    at_combustion = np.where(recipe.water_at_combustion, water, 0.0)
    early = water - at_combustion
    x = burned.fraction
    fresh_mass = _mass(table, fresh)
    egr_mass = _mass(table, egr)
    intake = fresh + egr
    if before:
        intake[:, table.index(FUEL)] += fuel / table.molar_mass[table.index(FUEL)]
    intake[:, table.index("H2O")] += early / table.molar_mass[table.index("H2O")]
    intake_mass = fresh_mass + egr_mass + early + (fuel if before else 0.0)
    share = (1.0 - x) / intake_mass  # kg of fresh dry air per kg trapped
    amounts = intake * share[:, None] + burned.amounts * x[:, None]
    enthalpy_in, wall = _intake_enthalpy(recipe, engine, fresh, egr, fuel, share)
    if recipe.water_ratio is not None:
        enthalpy_in = enthalpy_in + early * share * water_enthalpy(recipe)
    if recipe.from_intake:
        returned = burned.h + burned.v * (recipe.pressure - recipe.exhaust_pressure)
        h1 = enthalpy_in + np.where(x > 0.0, x * returned, 0.0)
        trapped = engine.state(table, "HP", h1, recipe.pressure, amounts)
    else:
        trapped = engine.state(table, "TP", recipe.temperature, recipe.pressure, amounts)
    ratio = _saturation_ratio(recipe, trapped, before)
    status = trapped.status.copy()
    cold = ratio > 1.0
    if (early > 0.0).any():
        cold |= (water_saturation_ratio(table, trapped) > 1.0) & (early > 0.0)
    evaporates = (enters_as_liquid(recipe) & before) | (early > 0.0)
    frigid = evaporates & recipe.from_intake & (trapped.status != Status.OK) & ~(trapped.T > COLDEST) & (x < 1.0)
    status[((status == Status.OK) | (status == Status.OUTSIDE_DATA)) & cold | frigid] = Status.VAPOUR_ABOVE_SATURATION
    status[x >= 1.0] = Status.NO_FRESH_CHARGE
    return Charge(
        recipe=recipe,
        trapped=trapped,
        fuel_mass=fuel * share,
        fuel_injected=np.zeros(n) if before else fuel * share,
        water_injected=at_combustion * share,
        fuel_enthalpy=supply_enthalpy(recipe),
        water_enthalpy=water_enthalpy(recipe),
        dry_air=share,
        water_in=(fresh_mass - 1.0) * share,
        water_added=water * share,
        recirculated=egr_mass * share,
        residual_fraction=x,
        residual_amounts=burned.amounts,
        drained_water=drained,
        receiver_vapour_pressure=vapour,
        intake_enthalpy=enthalpy_in,
        wall_heat=wall,
        saturation_ratio=ratio,
        status=status,
    )


def _streams(recipe: Recipe, engine: Engine, burned: BurnedGas) -> tuple[Array, Array, Array, Array, Array]:
    """Fresh air with vapour and recirculated gas (N, S), fuel and drained water [kg], per kg dry air; vapour pressure [Pa]."""
    table, n = recipe.table, len(recipe)
    water = table.index("H2O")
    dry = table.amounts({k: v for k, v in recipe.air.composition().items() if v > 0.0})
    fresh = np.tile(dry, (n, 1))
    fresh[:, water] += recipe.humidity / table.molar_mass[water]
    recirculated = recipe.egr_fraction / (1.0 - recipe.egr_fraction) * (1.0 + recipe.humidity)
    egr = burned.amounts * recirculated[:, None]
    cooled = np.where(np.isfinite(recipe.egr_temperature), recipe.egr_temperature, recipe.temperature)
    drained = drain(table, fresh, recipe.temperature, recipe.pressure) + drain(table, egr, cooled, recipe.pressure)
    whole = fresh + egr
    condensed = drain(table, whole, _mixing_temperature(recipe, engine, fresh, egr, cooled), recipe.pressure)
    wet = fresh[:, water] + egr[:, water]
    with np.errstate(divide="ignore", invalid="ignore"):
        keep = np.where(wet > 0.0, whole[:, water] / wet, 1.0)
    fresh[:, water] *= keep
    egr[:, water] *= keep
    vapour = whole[:, water] / total(whole) * recipe.pressure
    fuel = recipe.equivalence_ratio / recipe.stoichiometric_air_fuel_ratio
    return fresh, egr, fuel, (drained + condensed), vapour


def _mixing_temperature(recipe: Recipe, engine: Engine, fresh: Array, egr: Array, cooled: Array) -> Array:
    """Temperature [K] of fresh air and cooled recirculated exhaust after adiabatic mixing, before any fuel."""
    if not np.any((recipe.egr_fraction > 0.0) & (cooled != recipe.temperature)):
        return recipe.temperature
    table, mass = recipe.table, _mass(recipe.table, fresh + egr)
    h = _stream_enthalpy(engine, table, fresh, recipe.temperature, recipe.pressure)
    h = (h + _stream_enthalpy(engine, table, egr, cooled, recipe.pressure)) / mass
    mixed = engine.state(table, "HP", h, recipe.pressure, (fresh + egr) / mass[:, None]).T
    return np.where((recipe.egr_fraction > 0.0) & np.isfinite(mixed), mixed, recipe.temperature)


def drain(table: SpeciesTable, amounts: Array, T: Array, pressure: Array) -> Array:
    """Take water above saturation out of ``amounts`` (in place); returns the mass taken, same basis [kg]."""
    water = table.index("H2O")
    if not amounts[:, water].any():
        return np.zeros(len(amounts))
    others = total(amounts) - amounts[:, water]
    saturation = water_saturation_pressure(T)
    with np.errstate(divide="ignore", invalid="ignore"):
        most = np.where(saturation < pressure, others * saturation / (pressure - saturation), np.inf)
    kept = np.minimum(amounts[:, water], most)
    taken = (amounts[:, water] - kept) * table.molar_mass[water]
    amounts[:, water] = kept
    return np.asarray(taken)


def _intake_enthalpy(recipe: Recipe, engine: Engine, fresh: Array, egr: Array, fuel: Array, share: Array) -> tuple[Array, Array]:
    """Enthalpy brought in [J/kg trapped] and the part of it given by walls as latent heat."""
    table = recipe.table
    cooled = np.where(np.isfinite(recipe.egr_temperature), recipe.egr_temperature, recipe.temperature)
    enthalpy = np.full(len(recipe), np.nan)  # asked for only where it makes the trapped state
    if recipe.from_intake:
        enthalpy = _stream_enthalpy(engine, table, fresh, recipe.temperature, recipe.pressure) * share
    if recipe.admission == "premixed":
        enthalpy = enthalpy + supply_enthalpy(recipe) * fuel * share
    if recipe.from_intake and np.any(recipe.egr_fraction > 0.0):
        enthalpy = enthalpy + _stream_enthalpy(engine, table, egr, cooled, recipe.pressure) * share
    wall = np.zeros(len(recipe))
    if recipe.admission in ("port-liquid", "early-direct"):
        latent = recipe.fuel.latent_heat or 0.0
        wall = np.where(enters_as_liquid(recipe), (1.0 - recipe.evaporated_by_gas) * latent, 0.0) * fuel * share
        enthalpy = enthalpy + supply_enthalpy(recipe) * fuel * share + wall
    return enthalpy, wall


def _stream_enthalpy(engine: Engine, table: SpeciesTable, amounts: Array, T: Array, pressure: Array) -> Array:
    """Enthalpy of a stream given by its amounts per kg of dry air [J/kg dry air]; zero where it is empty."""
    mass = _mass(table, amounts)
    there = mass > 0.0
    state = engine.state(table, "TP", T, pressure, amounts / np.where(there, mass, 1.0)[:, None])
    return np.where(there, mass * np.where(there, state.h, 0.0), 0.0)


def _saturation_ratio(recipe: Recipe, trapped: GasState, before: bool) -> Array:
    if not before:
        return np.zeros(len(recipe))
    x = trapped.mole_fractions()[:, recipe.table.index(FUEL)]
    return np.nan_to_num(x * trapped.p / recipe.fuel.vapour_limit(trapped.T))


def _mass(table: SpeciesTable, amounts: Array) -> Array:
    return total(amounts * table.molar_mass)
