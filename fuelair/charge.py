"""From air, fuel, recirculated exhaust and residual gas to the trapped charge.

Streams are kept per kg of fresh dry air and mixed at the end; results are per kg of trapped gas.
Trapped gas holds the fuel when it is admitted before compression (``premixed``, ``port-liquid``,
``early-direct``); with ``direct`` the fuel joins at combustion and the trapped gas holds none.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
import numpy.typing as npt

from fuelair.air import DryAir, water_dew_point, water_saturation_pressure
from fuelair.fuel import Fuel
from fuelair.gas.complete import oxygen_excess
from fuelair.gas.engine import Array, Codes, Engine, GasState, Status, total
from fuelair.gas.mixture import mix
from fuelair.gas.species import FUEL, T_STANDARD, UNBURNED, SpeciesTable

Admission = Literal["premixed", "port-liquid", "early-direct", "direct"]
WATER_LATENT_HEAT = 44.004e6 / 18.01528
"""Vapour less liquid water at 298.15 K [J/kg]: enthalpies of formation -241.826 and -285.830 kJ/mol (CRC)."""
WATER_CP = 75.3e3 / 18.01528
"""Specific heat of liquid water at 298.15 K [J/(kg K)], CRC."""
ADMISSIONS: tuple[Admission, ...] = ("premixed", "port-liquid", "early-direct", "direct")


@dataclass(frozen=True, slots=True)
class Recipe:
    """What is to be trapped, as arrays of shape (N,) in SI units.

    Attributes
    ----------
    table, fuel, air, admission : species, fuel, dry air, way of admission.
    equivalence_ratio : fresh fuel over fresh dry air, relative to stoichiometric [-].
    humidity : water vapour per dry air as drawn in, before any draining [kg/kg].
    pressure, temperature : of the trapped charge, or of the receiver if ``from_intake`` [Pa], [K].
    from_intake : whether pressure and temperature are those of the receiver.
    exhaust_pressure : [Pa].
    egr_fraction : recirculated over fresh humid air plus recirculated [-].
    egr_temperature : of the cooled recirculated exhaust [K]; NaN: the receiver's.
    combustion_efficiency : share of the fuel that burns [-].
    fuel_temperature, fuel_pressure : supply state of the fuel [K], [Pa].
    evaporated_by_gas : share of the latent heat that the charge gives [-].
    water_ratio, water_temperature : liquid water added per fuel [kg/kg], and its temperature [K]; None: no water.
    water_at_combustion : whether that water joins at combustion; else it evaporates in the intake.
    """

    table: SpeciesTable
    fuel: Fuel
    air: DryAir
    admission: Admission
    equivalence_ratio: Array
    humidity: Array
    pressure: Array
    temperature: Array
    from_intake: bool
    exhaust_pressure: Array
    egr_fraction: Array
    egr_temperature: Array
    combustion_efficiency: Array
    fuel_temperature: Array
    fuel_pressure: Array
    evaporated_by_gas: Array
    water_ratio: Array | None = None
    water_temperature: Array | None = None
    water_at_combustion: bool = False

    def __len__(self) -> int:
        return len(self.pressure)

    def with_equivalence_ratio(self, value: Array) -> Recipe:
        """The same recipe with another amount of fuel."""
        return replace(self, equivalence_ratio=value)

    @property
    def liquid_water_temperature(self) -> Array:
        """Temperature of the added water [K]; 298.15 K where none is given."""
        return np.full(len(self), T_STANDARD) if self.water_temperature is None else self.water_temperature

    @property
    def stoichiometric_air_fuel_ratio(self) -> float:
        """Mass of dry air per mass of fuel at equivalence ratio 1 [-], from the atoms of the table."""
        table = self.table
        air = table.amounts({k: v for k, v in self.air.composition().items() if v > 0.0})
        fuel = _pure(table, FUEL, 1)
        spare = air[table.index("O2")] * 2.0
        return float(-oxygen_excess(table, fuel)[0] / spare)


@dataclass(frozen=True, slots=True)
class BurnedGas:
    """Burned gas that comes back: composition, and the state in which it stays in the cylinder.

    Attributes
    ----------
    amounts : (N, S) [kmol/kg].
    fraction : mass of residual gas over trapped mass (N,).
    h, v : enthalpy [J/kg] and volume [m3/kg] of the residual gas at exhaust pressure (N,).
    """

    amounts: Array
    fraction: Array
    h: Array
    v: Array


@dataclass(frozen=True, slots=True)
class Charge:
    """The trapped charge, per kg of trapped gas; arrays of shape (N,).

    Attributes
    ----------
    recipe : what it was made from.
    trapped : gas state at the start of compression (status says if it cannot be).
    fuel_mass : fuel per trapped gas, wherever it is [kg/kg].
    fuel_injected, water_injected : what joins at combustion [kg/kg]; zero unless so admitted.
    fuel_enthalpy, water_enthalpy : of the supplied fuel and liquid water [J/kg] on the table's datum.
    dry_air, water_in, recirculated, residual_fraction : make-up of the trapped gas [kg/kg];
        ``water_in`` is the vapour of the air.
    water_added : liquid water added in intake or cylinder [kg/kg].
    residual_amounts : composition of the residual gas (N, S) [kmol/kg].
    drained_water : condensed and drained in the receiver and the exhaust cooler [kg/kg dry air].
    receiver_dew_point : of the fresh gas [K], NaN if dry.
    intake_enthalpy : (1 - x_r) h_i [J/kg trapped], fuel included when it comes with the air.
    wall_heat : latent heat that walls, not the gas, gave [J/kg trapped].
    saturation_ratio : partial pressure of fuel vapour over its saturation pressure [-].
    water_saturation_ratio : the same of water vapour [-].
    status : why the charge cannot be, if so.
    """

    recipe: Recipe
    trapped: GasState
    fuel_mass: Array
    fuel_injected: Array
    water_injected: Array
    fuel_enthalpy: Array
    water_enthalpy: Array
    dry_air: Array
    water_in: Array
    water_added: Array
    recirculated: Array
    residual_fraction: Array
    residual_amounts: Array
    drained_water: Array
    receiver_dew_point: Array
    intake_enthalpy: Array
    wall_heat: Array
    saturation_ratio: Array
    water_saturation_ratio: Array
    status: Codes

    @property
    def lower_heating_value(self) -> Array:
        """Lower heating value in the phase in which the fuel enters the cylinder [J/kg fuel]."""
        return heating_value(self.recipe)

    @property
    def heat_added(self) -> Array:
        """Fuel energy that burns, per trapped gas [J/kg]."""
        return np.asarray(self.fuel_mass * self.recipe.combustion_efficiency * self.lower_heating_value)

    @property
    def injected(self) -> Array:
        """Mass that joins at combustion, fuel and water [kg/kg trapped]."""
        return np.asarray(self.fuel_injected + self.water_injected)

    @property
    def injected_enthalpy(self) -> Array:
        """Enthalpy of what joins at combustion [J/kg injected]; that of the fuel where nothing does."""
        mass = self.injected
        whole = self.fuel_injected * self.fuel_enthalpy + self.water_injected * self.water_enthalpy
        return np.where(mass > 0.0, whole / np.where(mass > 0.0, mass, 1.0), self.fuel_enthalpy)

    def reactants(self) -> Array:
        """Composition of all gas and fuel at combustion (N, S), per kg present [kmol/kg].

        The share that will not burn is carried as inert vapour.
        """
        table, recipe = self.recipe.table, self.recipe
        burns, rests = table.index(FUEL), table.index(UNBURNED)
        out = self.trapped.amounts.copy()
        fuel = out[:, burns] + self.fuel_injected / table.molar_mass[burns]
        out[:, table.index("H2O")] += self.water_injected / table.molar_mass[table.index("H2O")]
        out[:, burns] = fuel * recipe.combustion_efficiency
        out[:, rests] += fuel * (1.0 - recipe.combustion_efficiency)
        return np.asarray(out / (1.0 + self.injected)[:, None])

    def oxygen_excess_ratio(self) -> Array:
        """Free oxygen trapped, that of recirculated and residual gas included, over what all fresh fuel takes [-]."""
        table = self.recipe.table
        demand = -oxygen_excess(table, _pure(table, FUEL, len(self.recipe))) * self.fuel_mass
        return np.asarray(1.0 + self.oxygen_left() / demand - (1.0 - self.recipe.combustion_efficiency))

    def oxygen_left(self) -> Array:
        """Oxygen atoms beyond those that complete combustion of what burns takes [kmol/kg trapped]; negative when rich."""
        return np.asarray(oxygen_excess(self.recipe.table, self.reactants()) * (1.0 + self.injected))

    def trapped_oxygen(self) -> Array:
        """Mole fraction of molecular oxygen in the trapped gas [-]."""
        return np.asarray(self.trapped.mole_fractions()[:, self.recipe.table.index("O2")])


def enters_as_liquid(recipe: Recipe) -> npt.NDArray[np.bool_]:
    """Where the fuel enters as liquid: every admission but ``premixed``, if its supply state is liquid."""
    if recipe.admission == "premixed":
        return np.zeros(len(recipe), np.bool_)
    phases = [recipe.fuel.phase(float(t), float(p)) for t, p in zip(recipe.fuel_temperature, recipe.fuel_pressure, strict=True)]
    return np.array([phase == "liquid" for phase in phases], np.bool_)


def heating_value(recipe: Recipe) -> Array:
    """Lower heating value on the basis of the phase that enters [J/kg], shape (N,)."""
    liquid = recipe.fuel.lower_heating_value_liquid
    vapour = recipe.fuel.lower_heating_value_vapour
    return np.where(enters_as_liquid(recipe), vapour if liquid is None else liquid, vapour)


def supply_enthalpy(recipe: Recipe) -> Array:
    """Enthalpy of the fuel as supplied [J/kg fuel] on the table's datum, shape (N,)."""
    table, fuel = recipe.table, recipe.fuel
    vapour = _pure(table, FUEL, len(recipe))
    _, standard, _ = mix(table, vapour).thermal(np.full(len(recipe), T_STANDARD))
    _, warm, _ = mix(table, vapour).thermal(recipe.fuel_temperature)
    liquid = enters_as_liquid(recipe)
    if not liquid.any():
        return warm
    return np.where(liquid, standard + fuel.liquid_enthalpy(recipe.fuel_temperature, recipe.fuel_pressure), warm)


def water_enthalpy(recipe: Recipe) -> Array:
    """Enthalpy of the added liquid water [J/kg] on the table's datum, shape (N,).

    Vapour at 298.15 K less the latent heat, plus constant specific heat (273 to 373 K, within 1 kJ/kg of
    IAPWS-95 up to 353 K). Latent heat and specific heat: CRC Handbook, as in package chemicals 1.5.2.
    """
    table = recipe.table
    _, vapour, _ = mix(table, _pure(table, "H2O", len(recipe))).thermal(np.full(len(recipe), T_STANDARD))
    return np.asarray(vapour - WATER_LATENT_HEAT + WATER_CP * (recipe.liquid_water_temperature - T_STANDARD))


def compose(recipe: Recipe, engine: Engine, burned: BurnedGas) -> Charge:
    """Mix the trapped charge from the recipe and burned gas that comes back.

    Raises nothing for a charge that cannot be; its ``status`` says why.
    """
    table, n = recipe.table, len(recipe)
    before = recipe.admission != "direct"
    fresh, egr, fuel, drained, dew = _streams(recipe, burned)
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
    enthalpy_in = enthalpy_in + early * share * water_enthalpy(recipe)
    if recipe.from_intake:
        returned = burned.h + burned.v * (recipe.pressure - recipe.exhaust_pressure)
        h1 = enthalpy_in + np.where(x > 0.0, x * returned, 0.0)
        trapped = engine.state(table, "HP", h1, recipe.pressure, amounts)
    else:
        trapped = engine.state(table, "TP", recipe.temperature, recipe.pressure, amounts)
    ratio = _saturation_ratio(recipe, trapped, before)
    wet = trapped.mole_fractions()[:, table.index("H2O")] * trapped.p / water_saturation_pressure(trapped.T)
    status = trapped.status.copy()
    cold = (ratio > 1.0) | ((wet > 1.0) & (early > 0.0))
    status[((status == Status.OK) | (status == Status.OUTSIDE_DATA)) & cold] = Status.VAPOUR_ABOVE_SATURATION
    status[~(x < 1.0)] = Status.NO_FRESH_CHARGE
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
        receiver_dew_point=dew,
        intake_enthalpy=enthalpy_in,
        wall_heat=wall,
        saturation_ratio=ratio,
        water_saturation_ratio=wet,
        status=status,
    )


def _streams(recipe: Recipe, burned: BurnedGas) -> tuple[Array, Array, Array, Array, Array]:
    """Fresh air with vapour (N, S), recirculated gas (N, S), fuel [kg], drained water [kg], dew point; per kg dry air."""
    table, n = recipe.table, len(recipe)
    water = table.index("H2O")
    dry = table.amounts({k: v for k, v in recipe.air.composition().items() if v > 0.0})
    fresh = np.tile(dry, (n, 1))
    fresh[:, water] += recipe.humidity / table.molar_mass[water]
    recirculated = recipe.egr_fraction / (1.0 - recipe.egr_fraction) * (1.0 + recipe.humidity)
    egr = burned.amounts * recirculated[:, None]
    cooled = np.where(np.isfinite(recipe.egr_temperature), recipe.egr_temperature, recipe.temperature)
    drained = drain(table, egr, cooled, recipe.pressure)
    whole = fresh + egr
    condensed = drain(table, whole, recipe.temperature, recipe.pressure)
    wet = fresh[:, water] + egr[:, water]
    with np.errstate(divide="ignore", invalid="ignore"):
        keep = np.where(wet > 0.0, whole[:, water] / wet, 1.0)
    fresh[:, water] *= keep
    egr[:, water] *= keep
    dew = water_dew_point(whole[:, water] / total(whole) * recipe.pressure)
    fuel = recipe.equivalence_ratio / recipe.stoichiometric_air_fuel_ratio
    return fresh, egr, fuel, (drained + condensed), dew


def drain(table: SpeciesTable, amounts: Array, T: Array, pressure: Array) -> Array:
    """Take water above saturation out of ``amounts`` (in place); returns the mass taken, same basis [kg]."""
    water = table.index("H2O")
    others = total(amounts) - amounts[:, water]
    saturation = water_saturation_pressure(T)
    with np.errstate(divide="ignore", invalid="ignore"):
        most = np.where(saturation < pressure, others * saturation / (pressure - saturation), np.inf)
    kept = np.minimum(amounts[:, water], most)
    taken = (amounts[:, water] - kept) * table.molar_mass[water]
    amounts[:, water] = kept
    return np.asarray(taken)


def _intake_enthalpy(
    recipe: Recipe, engine: Engine, fresh: Array, egr: Array, fuel: Array, share: Array
) -> tuple[Array, Array]:
    """Enthalpy brought in [J/kg trapped] and the part of it given by walls as latent heat."""
    table = recipe.table
    cooled = np.where(np.isfinite(recipe.egr_temperature), recipe.egr_temperature, recipe.temperature)
    mixture = fresh.copy()
    if recipe.admission == "premixed":
        mixture[:, table.index(FUEL)] += fuel / table.molar_mass[table.index(FUEL)]
    enthalpy = _stream_enthalpy(engine, table, mixture, recipe.temperature, recipe.pressure) * share
    if np.any(recipe.egr_fraction > 0.0):
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
    out = np.zeros(len(recipe))
    for i, T in enumerate(trapped.T):
        limit = recipe.fuel.saturation_pressure(float(T)) if np.isfinite(T) else None
        out[i] = 0.0 if limit is None else float(x[i] * trapped.p[i] / limit)
    return out


def _pure(table: SpeciesTable, name: str, n: int) -> Array:
    out = np.zeros((n, len(table)))
    out[:, table.index(name)] = 1.0 / table.molar_mass[table.index(name)]
    return out


def _mass(table: SpeciesTable, amounts: Array) -> Array:
    return total(amounts * table.molar_mass)
