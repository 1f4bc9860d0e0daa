"""The trapped charge and the burned gas that comes back to it, as records."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fuelair.air import water_dew_point, water_saturation_pressure
from fuelair.charge.recipe import Recipe, heating_value, pure
from fuelair.gas.complete import oxygen_excess
from fuelair.gas.engine import Array, Codes, GasState, Index, taken
from fuelair.gas.species import FUEL, UNBURNED, SpeciesTable


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

    @classmethod
    def none(cls, n: int, species: int) -> BurnedGas:
        """No burned gas, for ``n`` charges."""
        return cls(np.zeros((n, species)), np.zeros(n), np.zeros(n), np.ones(n))

    def fields(self) -> tuple[Array, Array, Array, Array]:
        """Amounts, fraction, enthalpy and volume."""
        return self.amounts, self.fraction, self.h, self.v

    def replaced(self, index: Index, some: BurnedGas) -> BurnedGas:
        """The same with the burned gas of some rows, in ascending order, as in ``some``."""
        if len(index) == len(self.fraction):
            return some
        fields = [values.copy() for values in self.fields()]
        for mine, its in zip(fields, some.fields(), strict=True):
            mine[index] = its
        return BurnedGas(*fields)

    def rows(self, index: Index) -> BurnedGas:
        """The burned gas of some rows only, in ascending order."""
        return BurnedGas(*(taken(values, index) for values in self.fields()))


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
    receiver_vapour_pressure : partial pressure of water in the fresh gas [Pa].
    intake_enthalpy : (1 - x_r) h_i [J/kg trapped], fuel included when it comes with the air; NaN unless the
        receiver's state is given.
    wall_heat : latent heat that walls, not the gas, gave [J/kg trapped].
    saturation_ratio : partial pressure of fuel vapour over its saturation pressure [-].
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
    receiver_vapour_pressure: Array
    intake_enthalpy: Array
    wall_heat: Array
    saturation_ratio: Array
    status: Codes

    @property
    def receiver_dew_point(self) -> Array:
        """Dew point of the fresh gas in the receiver [K], NaN if dry."""
        return water_dew_point(self.receiver_vapour_pressure)

    @property
    def water_saturation_ratio(self) -> Array:
        """Partial pressure of water vapour over its saturation pressure [-]."""
        return water_saturation_ratio(self.recipe.table, self.trapped)

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
        whole = not (self.injected.any() or (recipe.combustion_efficiency != 1.0).any())
        if whole:
            return self.trapped.amounts
        out = self.trapped.amounts.copy()
        fuel = out[:, burns] + self.fuel_injected / table.molar_mass[burns]
        out[:, table.index("H2O")] += self.water_injected / table.molar_mass[table.index("H2O")]
        out[:, burns] = fuel * recipe.combustion_efficiency
        out[:, rests] += fuel * (1.0 - recipe.combustion_efficiency)
        if self.injected.any():
            out /= (1.0 + self.injected)[:, None]
        return out

    def oxygen_excess_ratio(self) -> Array:
        """Free oxygen trapped, that of recirculated and residual gas included, over what all fresh fuel takes [-]."""
        table = self.recipe.table
        demand = -oxygen_excess(table, pure(table, FUEL, 1)) * self.fuel_mass
        return np.asarray(1.0 + self.oxygen_left() / demand - (1.0 - self.recipe.combustion_efficiency))

    def oxygen_left(self) -> Array:
        """Oxygen atoms beyond those that complete combustion of what burns takes [kmol/kg trapped]; negative when rich."""
        return np.asarray(oxygen_excess(self.recipe.table, self.reactants()) * (1.0 + self.injected))

    def trapped_oxygen(self) -> Array:
        """Mole fraction of molecular oxygen in the trapped gas [-]."""
        return np.asarray(self.trapped.mole_fractions()[:, self.recipe.table.index("O2")])


def water_saturation_ratio(table: SpeciesTable, state: GasState) -> Array:
    """Partial pressure of water vapour over its saturation pressure [-], shape (N,)."""
    x = state.mole_fractions()[:, table.index("H2O")]
    return np.asarray(x * state.p / water_saturation_pressure(state.T))
