"""Mixes the streams to the trapped charge: fresh air, fuel, water, recirculated and residual gas."""

from __future__ import annotations

from dataclasses import dataclass

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
    table, n, x = recipe.table, len(recipe), burned.fraction
    before, steam = recipe.admission != "direct", table.index("H2O")
    streams = _streams(recipe, engine, burned)
    fuel, water = streams.fuel, streams.fuel * (0.0 if recipe.water_ratio is None else recipe.water_ratio)
    at_combustion = np.where(recipe.water_at_combustion, water, 0.0)
    early = water - at_combustion
    egr_mass = np.zeros(n) if streams.egr is None else _mass(table, streams.egr)
    humid = 1.0 + streams.vapour * table.molar_mass[steam]
    share = (1.0 - x) / (humid + egr_mass + early + (fuel if before else 0.0))  # kg of fresh dry air per kg trapped
    amounts = streams.dry * share[:, None]
    amounts[:, steam] += (streams.vapour + early / table.molar_mass[steam]) * share
    if streams.egr is not None:
        amounts += streams.egr * share[:, None]
    if before:
        amounts[:, table.index(FUEL)] += fuel * share / table.molar_mass[table.index(FUEL)]
    if x.any():
        amounts += burned.amounts * x[:, None]
    supplied = supply_enthalpy(recipe)
    enthalpy_in, wall = _intake_enthalpy(recipe, engine, streams, supplied, share)
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
        fuel_enthalpy=supplied,
        water_enthalpy=water_enthalpy(recipe),
        dry_air=share,
        water_in=streams.vapour * table.molar_mass[steam] * share,
        water_added=water * share,
        recirculated=egr_mass * share,
        residual_fraction=x,
        residual_amounts=burned.amounts,
        drained_water=streams.drained,
        receiver_vapour_pressure=streams.vapour_pressure,
        intake_enthalpy=enthalpy_in,
        wall_heat=wall,
        saturation_ratio=ratio,
        status=status,
    )


@dataclass(frozen=True, slots=True)
class _Streams:
    """What goes into the receiver, per kg of fresh dry air.

    ``dry`` (S,) and ``vapour`` (N,) amounts of the fresh air [kmol]; ``egr`` (N, S) recirculated gas [kmol], None if there is
    none; ``fuel``, ``drained`` water (N,) [kg]; ``vapour_pressure`` of the water in fresh and recirculated gas [Pa].
    """

    dry: Array
    vapour: Array
    egr: Array | None
    fuel: Array
    drained: Array
    vapour_pressure: Array

    def fresh(self, table: SpeciesTable) -> Array:
        """Fresh air with its vapour (N, S)."""
        out = np.tile(self.dry, (len(self.vapour), 1))
        out[:, table.index("H2O")] += self.vapour
        return out


def _streams(recipe: Recipe, engine: Engine, burned: BurnedGas) -> _Streams:
    table, T, p = recipe.table, recipe.temperature, recipe.pressure
    steam = table.index("H2O")
    mass = table.molar_mass[steam]
    dry = table.amounts({k: v for k, v in recipe.air.composition().items() if v > 0.0})
    fuel = recipe.equivalence_ratio / recipe.stoichiometric_air_fuel_ratio
    spare, drawn = float(total(dry[None])[0]), recipe.humidity / mass
    vapour = held(drawn, spare, T, p)
    if not recipe.egr_fraction.any():
        return _Streams(dry, vapour, None, fuel, (drawn - vapour) * mass, vapour / (spare + vapour) * p)
    egr = burned.amounts * (recipe.egr_fraction / (1.0 - recipe.egr_fraction) * (1.0 + recipe.humidity))[:, None]
    hot, cooled = egr[:, steam].copy(), _cooled(recipe)
    others = total(egr) - hot
    egr[:, steam] = held(hot, others, cooled, p)
    streams = _Streams(dry, vapour, egr, fuel, np.zeros(len(recipe)), np.zeros(len(recipe)))
    wet = vapour + egr[:, steam]
    kept = held(wet, spare + others, _mixing_temperature(recipe, engine, streams, cooled), p)
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.where(wet > 0.0, kept / wet, 1.0)
    egr[:, steam] *= share
    return _Streams(dry, vapour * share, egr, fuel, (drawn + hot - kept) * mass, kept / (spare + others + kept) * p)


def _cooled(recipe: Recipe) -> Array:
    """Temperature of the recirculated gas behind its cooler [K]."""
    return np.where(np.isfinite(recipe.egr_temperature), recipe.egr_temperature, recipe.temperature)


def _mixing_temperature(recipe: Recipe, engine: Engine, streams: _Streams, cooled: Array) -> Array:
    """Temperature [K] of fresh air and cooled recirculated exhaust after adiabatic mixing, before any fuel."""
    egr, table = streams.egr, recipe.table
    if egr is None or not np.any((recipe.egr_fraction > 0.0) & (cooled != recipe.temperature)):
        return recipe.temperature
    fresh = streams.fresh(table)
    mass = _mass(table, fresh + egr)
    h = _stream_enthalpy(engine, table, fresh, recipe.temperature, recipe.pressure)
    h = (h + _stream_enthalpy(engine, table, egr, cooled, recipe.pressure)) / mass
    mixed = engine.state(table, "HP", h, recipe.pressure, (fresh + egr) / mass[:, None]).T
    return np.where((recipe.egr_fraction > 0.0) & np.isfinite(mixed), mixed, recipe.temperature)


def held(water: Array, others: Array | float, T: Array, pressure: Array) -> Array:
    """Amount of ``water`` that gas of amount ``others`` holds as vapour (N,); the rest condenses and is drained."""
    if not water.any():
        return water
    saturation = water_saturation_pressure(T)
    with np.errstate(divide="ignore", invalid="ignore"):
        most = np.where(saturation < pressure, others * saturation / (pressure - saturation), np.inf)
    return np.minimum(water, most)


def _intake_enthalpy(recipe: Recipe, engine: Engine, streams: _Streams, supplied: Array, share: Array) -> tuple[Array, Array]:
    """Enthalpy brought in [J/kg trapped] and the part of it given by walls as latent heat."""
    table, fuel = recipe.table, streams.fuel * share
    enthalpy = np.full(len(recipe), np.nan)  # asked for only where it makes the trapped state
    if recipe.from_intake:
        enthalpy = _stream_enthalpy(engine, table, streams.fresh(table), recipe.temperature, recipe.pressure) * share
    if recipe.admission == "premixed":
        enthalpy = enthalpy + supplied * fuel
    if recipe.from_intake and streams.egr is not None:
        enthalpy = enthalpy + _stream_enthalpy(engine, table, streams.egr, _cooled(recipe), recipe.pressure) * share
    wall = np.zeros(len(recipe))
    if recipe.admission in ("port-liquid", "early-direct"):
        latent = recipe.fuel.latent_heat or 0.0
        wall = np.where(enters_as_liquid(recipe), (1.0 - recipe.evaporated_by_gas) * latent, 0.0) * fuel
        enthalpy = enthalpy + supplied * fuel + wall
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
    x = trapped.amounts[:, recipe.table.index(FUEL)] / total(trapped.amounts)
    return np.nan_to_num(x * trapped.p / recipe.fuel.vapour_limit(trapped.T))


def _mass(table: SpeciesTable, amounts: Array) -> Array:
    return total(amounts * table.molar_mass)
