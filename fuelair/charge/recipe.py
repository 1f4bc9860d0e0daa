"""What is to be trapped, and the state in which fuel and water are supplied."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any, Literal

import numpy as np

from fuelair.air import DryAir
from fuelair.fuel import Fuel
from fuelair.gas.complete import oxygen_excess
from fuelair.gas.engine import Array, Index, Mask, taken
from fuelair.gas.mixture import Mixture, mix
from fuelair.gas.species import FUEL, T_STANDARD, SpeciesTable

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

    def rows(self, index: Index | slice) -> Recipe:
        """The recipe of some rows only."""
        own: dict[str, Any] = {k: taken(v, index) for k in self.__slots__ if isinstance(v := getattr(self, k), np.ndarray)}
        return replace(self, **own)

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
        return _stoichiometric_ratio(self.table, self.air)


@lru_cache(maxsize=64)
def _stoichiometric_ratio(table: SpeciesTable, air: DryAir) -> float:
    spare = 2.0 * table.amounts({k: v for k, v in air.composition().items() if v > 0.0})[table.index("O2")]
    return float(-oxygen_excess(table, pure(table, FUEL, 1))[0] / spare)


@lru_cache(maxsize=64)
def _vapour(table: SpeciesTable, name: str) -> tuple[Mixture, float]:
    """A species alone, and its enthalpy at 298.15 K [J/kg]."""
    alone = mix(table, pure(table, name, 1))
    return alone, float(alone.thermal(np.array([T_STANDARD]))[1][0])


def enters_as_liquid(recipe: Recipe) -> Mask:
    """Where the fuel enters as liquid: every admission but ``premixed``, if its supply state is liquid."""
    if recipe.admission == "premixed":
        return np.zeros(len(recipe), np.bool_)
    return recipe.fuel.is_liquid(recipe.fuel_temperature, recipe.fuel_pressure)


def heating_value(recipe: Recipe) -> Array:
    """Lower heating value on the basis of the phase that enters [J/kg], shape (N,)."""
    liquid = recipe.fuel.lower_heating_value_liquid
    vapour = recipe.fuel.lower_heating_value_vapour
    return np.where(enters_as_liquid(recipe), vapour if liquid is None else liquid, vapour)


def supply_enthalpy(recipe: Recipe) -> Array:
    """Enthalpy of the fuel as supplied [J/kg fuel] on the table's datum, shape (N,)."""
    table, fuel = recipe.table, recipe.fuel
    vapour, standard = _vapour(table, FUEL)
    _, warm, _ = vapour.thermal(recipe.fuel_temperature)
    liquid = enters_as_liquid(recipe)
    if not liquid.any():
        return warm
    return np.where(liquid, standard + fuel.liquid_enthalpy(recipe.fuel_temperature, recipe.fuel_pressure), warm)


def water_enthalpy(recipe: Recipe) -> Array:
    """Enthalpy of the added liquid water [J/kg] on the table's datum, shape (N,).

    Vapour at 298.15 K less the latent heat, plus constant specific heat (273 to 373 K, within 1 kJ/kg of
    IAPWS-95 up to 353 K). Latent heat and specific heat: CRC Handbook, as in package chemicals 1.5.2.
    """
    _, vapour = _vapour(recipe.table, "H2O")
    return np.asarray(vapour - WATER_LATENT_HEAT + WATER_CP * (recipe.liquid_water_temperature - T_STANDARD))


def pure(table: SpeciesTable, name: str, n: int) -> Array:
    """One kilogram of a species alone, as amounts (N, S) [kmol/kg]."""
    out = np.zeros((n, len(table)))
    out[:, table.index(name)] = 1.0 / table.molar_mass[table.index(name)]
    return out
