"""Engine cycles and charges of the book, through the tool's own charge, stages and models."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np

from fuelair import fuel as fuels
from fuelair.air import DryAir, dry_air
from fuelair.charge import Admission, Charge, Recipe
from fuelair.cycle import air_standard, exergy, fuel_air
from fuelair.cycle.breathing import DEFAULT_FREEZE, Settings, solve_charge
from fuelair.cycle.geometry import Volumes
from fuelair.cycle.result import REFERENCE_MODEL, CycleResult
from fuelair.cycle.stages import HeatAddition, Passage
from fuelair.errors import UnsolvedError
from fuelair.gas.cantera_gas import CanteraGas
from fuelair.gas.engine import Status, weighted
from fuelair.gas.species import build
from fuelair.proof.registry import computation, one, pick


@dataclass(frozen=True, slots=True)
class Set:
    """Set-up of one cycle of the book; SI, ratios as numbers. ``extra`` adds species to equilibrium.

    ``nitrogen_per_oxygen`` zero takes standard dry air. ``heating_value`` replaces the fuel's own as the
    basis of efficiency and of the heat that air-standard models get [J/kg]. ``k``, ``gas_constant`` are
    those of the cold air.
    """

    fuel: str
    equivalence_ratio: float
    r: float
    T: float
    p: float
    nitrogen_per_oxygen: float = 0.0
    heat_addition: HeatAddition = "constant-volume"
    admission: Admission = "premixed"
    residual: float = 0.0
    egr: float = 0.0
    heating_value: float = math.nan
    k: float = air_standard.COLD_K
    gas_constant: float = air_standard.COLD_R
    extra: tuple[str, ...] = ()


def _settings(s: Set) -> Settings:
    return Settings(
        volumes=Volumes.dead_centres(one(s.r)),
        heat_addition=s.heat_addition,
        pressure_limit=one(math.nan),
        freeze_temperature=one(DEFAULT_FREEZE),
        residual=one(s.residual),
        exhaust_pressure=one(s.p),
        intake_pressure=one(s.p),
        swept_volume=one(math.nan),
    )


@lru_cache(maxsize=64)
def _charge(s: Set) -> Charge:
    fuel = fuels.load(s.fuel)
    recipe = Recipe(
        table=build(fuel.vapour, extra=s.extra),
        fuel=fuel,
        air=DryAir.from_ratio(s.nitrogen_per_oxygen) if s.nitrogen_per_oxygen else dry_air(),
        admission=s.admission,
        equivalence_ratio=one(s.equivalence_ratio),
        humidity=one(0.0),
        pressure=one(s.p),
        temperature=one(s.T),
        from_intake=False,
        exhaust_pressure=one(s.p),
        egr_fraction=one(s.egr),
        egr_temperature=one(math.nan),
        combustion_efficiency=one(1.0),
        fuel_temperature=one(298.15),
        fuel_pressure=one(101325.0),
        evaporated_by_gas=one(1.0),
    )

    def headline(charge: Charge, settings: Settings) -> Passage:
        return fuel_air.passage(CanteraGas(), charge, settings, REFERENCE_MODEL)

    return solve_charge(recipe, CanteraGas(), _settings(s), headline)


@lru_cache(maxsize=64)
def _fuel_air(s: Set, model: str) -> fuel_air.Run:
    return fuel_air.run(CanteraGas(), _charge(s), _settings(s), model, in_full=False)


@lru_cache(maxsize=256)
def _model(s: Set, model: str) -> CycleResult:
    if model in fuel_air.KINDS:
        result = _fuel_air(s, model).result
    else:
        charge = _charge(s)
        own = math.isfinite(s.heating_value)
        heat = np.asarray(charge.fuel_mass * s.heating_value) if own else None
        state = (
            air_standard.ColdAir(s.k, s.gas_constant)
            if model == "air-cold"
            else air_standard.variable_air(CanteraGas(), charge.recipe.air)
        )
        result = air_standard.run(model, state, charge, _settings(s), heat=heat)
    if result.status[0] != Status.OK:
        status = Status(int(result.status[0]))
        raise UnsolvedError(status.label, status.reason, model)
    return result


@computation("cycle")
def cycle(*, model: str, result: str, **inputs: Any) -> float:
    """A figure of one model of a cycle (see `Set` for the inputs), SI; names as in the quantity table."""
    s = _set(inputs)
    figures = {k: float(v[0]) for k, v in _model(s, model).figures.items()}
    value = pick(figures, result)
    if result == "indicated_efficiency" and model in fuel_air.KINDS and math.isfinite(s.heating_value):
        return value * float(_charge(s).lower_heating_value[0]) / s.heating_value
    return value


@computation("cycle-difference")
def cycle_difference(*, model: str, less: str, result: str, **inputs: Any) -> float:
    """The same figure of two models, one less the other."""
    return cycle(model=model, result=result, **inputs) - cycle(model=less, result=result, **inputs)


@computation("efficiency-exponent")
def efficiency_exponent(*, model: str = REFERENCE_MODEL, **inputs: Any) -> float:
    """n of the rule eta = 1 - r^(-n) that fits the model's efficiency at its ratio [-]."""
    eta = cycle(model=model, result="indicated_efficiency", **inputs)
    return -math.log(1.0 - eta) / math.log(float(inputs["r"]))


@computation("combustion-irreversibility")
def combustion_irreversibility(*, basis: str = "fuel", **inputs: Any) -> float:
    """Exergy that combustion destroys over the exergy of the ``fuel``, or of all ``reactants`` at combustion [-]."""
    run = _fuel_air(_set(inputs), REFERENCE_MODEL)
    balance = exergy.balance(run)
    whole = balance.fuel
    if basis == "reactants":
        table = run.charge.recipe.table
        whole = exergy.nonflow(table, run.compression.state) + run.charge.fuel_injected * balance.fuel_per_kg
    return float(balance.destroyed_by_entropy[0] / whole[0])


@computation("full-set-difference")
def full_set_difference(*, species: list[str], result: str, **inputs: Any) -> float:
    """A figure of the equilibrium cycle with every named species allowed, less the tool's own set."""
    full = cycle(model=REFERENCE_MODEL, result=result, extra=tuple(species), **inputs)
    return full - cycle(model=REFERENCE_MODEL, result=result, **inputs)


@computation("ratio-on-all-oxygen")
def ratio_on_all_oxygen(**inputs: Any) -> float:
    """Equivalence ratio of the fresh fuel on all trapped oxygen [-], recirculated oxygen counted."""
    charge = _charge(_set(inputs))
    if charge.status[0] != Status.OK:
        raise UnsolvedError(Status(int(charge.status[0])).label, Status(int(charge.status[0])).reason)
    return float(1.0 / charge.oxygen_excess_ratio()[0])


@computation("exhaust-share")
def exhaust_share(*, species: str, dry: bool, model: str = REFERENCE_MODEL, **inputs: Any) -> float:
    """Mole fraction of a species in the exhaust that leaves, wet or dry [-]."""
    run = _fuel_air(_set(inputs), model)
    table, x = run.charge.recipe.table, run.exhaust.leaving.mole_fractions()[0]
    water = float(x[table.index("H2O")]) if dry else 0.0
    return float(x[table.index(species)]) / (1.0 - water)


@computation("exhaust-elements")
def exhaust_elements(*, over: str, under: str, **inputs: Any) -> float:
    """Atoms of one element over those of another in the exhaust that leaves [-]."""
    run = _fuel_air(_set(inputs), REFERENCE_MODEL)
    table, amounts = run.charge.recipe.table, run.exhaust.leaving.amounts
    atoms = weighted(amounts, table.atoms)[0]
    return float(atoms[table.elements.index(over)] / atoms[table.elements.index(under)])


def _set(inputs: dict[str, Any]) -> Set:
    plain: dict[str, Any] = {k: tuple(v) if isinstance(v, list) else v for k, v in inputs.items()}
    return Set(**plain)
