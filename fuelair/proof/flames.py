"""Flame temperatures through the cycle's own combustion stage."""

from __future__ import annotations

import math

import numpy as np

from fuelair import fuel as fuels
from fuelair.air import DryAir
from fuelair.cycle.stages import HeatAddition, burn
from fuelair.fuel import Vapour
from fuelair.gas.cantera_gas import CanteraGas
from fuelair.gas.engine import Chemistry, GasState
from fuelair.gas.species import FUEL, SpeciesTable, build
from fuelair.proof.registry import computation, one, solved

T_REFERENCE, P_REFERENCE = 298.15, 101325.0
_WEIGHTS = {"C": 12.011, "H": 1.008, "O": 15.999, "N": 14.007}


def named_vapour(species: str, atoms: dict[str, float], lower_heating_value: float) -> Vapour:
    """A vapour that has no fuel record: its molecule's own cp, a published lower heating value [J/kg]."""
    mass = sum(n * _WEIGHTS[e] for e, n in atoms.items())
    return Vapour(species, tuple((e, float(n)) for e, n in atoms.items()), mass, lower_heating_value, ((species, 1.0),))


def mixture(vapour: Vapour, air: DryAir, equivalence_ratio: float = 1.0) -> tuple[SpeciesTable, np.ndarray]:
    """Species table and amounts (1, S) [kmol/kg] of premixed vapour and dry air."""
    atoms = dict(vapour.atoms)
    oxygen = atoms.get("C", 0.0) + atoms.get("H", 0.0) / 4 + atoms.get("S", 0.0) - atoms.get("O", 0.0) / 2
    table, moles = build(vapour), air.composition()
    parts = {k: x / moles["O2"] * oxygen / equivalence_ratio for k, x in moles.items() if x > 0.0}
    return table, table.amounts({FUEL: 1.0, **parts})[None]


def burned(
    vapour: Vapour,
    air: DryAir,
    *,
    equivalence_ratio: float = 1.0,
    T: float = T_REFERENCE,
    p: float = P_REFERENCE,
    heat_addition: HeatAddition = "constant-pressure",
    chemistry: Chemistry = "equilibrium",
) -> GasState:
    """Adiabatically burned gas from premixed vapour and dry air at ``T`` [K], ``p`` [Pa]."""
    table, amounts = mixture(vapour, air, equivalence_ratio)
    engine = CanteraGas()
    fresh = engine.state(table, "TP", one(T), one(p), amounts)
    result = burn(
        engine,
        table,
        fresh,
        reactants=amounts,
        injected=np.zeros(1),
        fuel_enthalpy=np.zeros(1),
        heat_addition=heat_addition,
        pressure_limit=np.full(1, np.nan),
        chemistry=chemistry,
    )
    return solved(result.state)


@computation("flame-temperature")
def flame_temperature(
    *,
    fuel: str = "",
    species: str = "",
    atoms: dict[str, float] | None = None,
    lower_heating_value: float = math.nan,
    nitrogen_per_oxygen: float = 3.76,
    chemistry: Chemistry = "equilibrium",
    equivalence_ratio: float = 1.0,
) -> float:
    """Adiabatic flame temperature [K] at 1 atm from 298.15 K.

    Of a fuel record, or of a ``species`` of the gas data with its ``atoms`` and a published heating value [J/kg].
    """
    vapour = fuels.load(fuel).vapour if fuel else named_vapour(species, atoms or {}, lower_heating_value)
    air = DryAir.from_ratio(nitrogen_per_oxygen)
    return float(burned(vapour, air, chemistry=chemistry, equivalence_ratio=equivalence_ratio).T[0])


@computation("closed-vessel-pressure-ratio")
def closed_vessel_pressure_ratio(*, fuel: str, nitrogen_per_oxygen: float = 3.76) -> float:
    """Adiabatic constant-volume pressure over initial pressure [-] from 298.15 K and 1 atm."""
    state = burned(fuels.load(fuel).vapour, DryAir.from_ratio(nitrogen_per_oxygen), heat_addition="constant-volume")
    return float(state.p[0]) / P_REFERENCE
