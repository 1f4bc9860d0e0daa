"""From a case to the numbers the physics rooms take: fuel, ambient air, recipe, settings."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from fuelair import air
from fuelair.air import Ambient, DryAir
from fuelair.case import Case, fuels
from fuelair.charge import Recipe, enters_as_liquid
from fuelair.crank import kinematics
from fuelair.cycle.breathing import DEFAULT_FREEZE, Settings
from fuelair.cycle.geometry import Volumes
from fuelair.cycle.result import FREEZE_MODEL, REAL_MODEL, REFERENCE_MODEL
from fuelair.errors import InputError, Problem
from fuelair.fuel import Fuel
from fuelair.gas.engine import Array, Index, Mask, taken
from fuelair.gas.species import build

_TIMES = ("engine.intake_closing", "engine.exhaust_opening", "engine.exhaust_closing")
_CRANK = ("engine.stroke", "engine.rod_length", "engine.pin_offset", *_TIMES)
_SWEPT = ("engine.bore", "engine.stroke", "engine.rod_length", "engine.pin_offset")
START_PHI = 0.5
"""Equivalence ratio that a recipe starts from when the case gives a fuel mass or a cut-off ratio."""


@dataclass(frozen=True, slots=True)
class Prepared:
    """Cases as numbers, arrays of shape (N,) in SI.

    Attributes
    ----------
    fuel, recipe, settings : the fuel, what to trap, and how the cycle runs.
    headline : model id of the verdict.
    fuel_mass, cutoff_ratio : the amount of fuel if given that way, else None.
    ambient_pressure : [Pa].
    cylinders : number of cylinders.
    cycles_per_second : of one cylinder [1/s], NaN without speed.
    scavenge_ratio : fresh charge delivered over trapped mass, NaN if none passes through.
    refused : rows that cannot be asked for; only among columns, for a single case raises.
    """

    fuel: Fuel
    recipe: Recipe
    settings: Settings
    headline: str
    fuel_mass: Array | None
    cutoff_ratio: Array | None
    ambient_pressure: Array
    cylinders: Array
    cycles_per_second: Array
    scavenge_ratio: Array
    refused: Mask

    def __len__(self) -> int:
        return len(self.recipe)

    def rows(self, index: Index | slice) -> Prepared:
        """Some of the rows only, in ascending order."""
        own: dict[str, Any] = {k: taken(v, index) for k in self.__slots__ if isinstance(v := getattr(self, k), np.ndarray)}
        return replace(self, recipe=self.recipe.rows(index), settings=self.settings.rows(index), **own)


OUTSIDE = ("charge.relative_humidity", "charge.ambient_temperature", "charge.ambient_pressure")
"""Keys of the air outside."""


class _Values:
    """Values of a case as arrays (N,), columns in place of what the case says."""

    def __init__(self, case: Case, columns: Mapping[str, Array]) -> None:
        self.case, self.columns, self.of = case, columns, case.values(columns)
        self.n = len(next(iter(columns.values()))) if columns else 1

    def array(self, key: str) -> Array:
        """Value of a key for every row, NaN where there is none."""
        value = self.of(key)
        if isinstance(value, np.ndarray):
            return np.array(np.broadcast_to(value, (self.n,)), float)
        return np.full(self.n, np.nan if value is None else float(value))

    def full(self, value: Array) -> Array:
        """A value of one row or all as (N,)."""
        return np.array(np.broadcast_to(value, (self.n,)))

    def only(self, keys: Sequence[str]) -> _Values:
        """Of one row if none of these keys is a column: what depends on them alone is computed once."""
        return self if any(key in self.columns for key in keys) else _Values(self.case, {})

    def given(self, key: str) -> Array | None:
        """Value of a key for every row, None if there is none."""
        return None if self.of(key) is None else self.array(key)


def prepare(case: Case, dry_air: DryAir | None = None, columns: Mapping[str, Array] | None = None) -> Prepared:
    """Numbers of a case, or of many that differ from it in some numbers.

    Parameters
    ----------
    dry_air : composition of the dry air; default `fuelair.air.dry_air`.
    columns : dotted keys of numbers -> values (N,) in stored units, which take the place of the case's own.
        Each must be in the key's range and agree with the others (see `fuelair.case.contradictions`).

    Raises
    ------
    InputError : without columns, a case that cannot be: humidity above the ambient pressure, a gas as port-liquid.
    """
    values = _Values(case, columns or {})
    mixture = dry_air or air.dry_air()
    outside = values.only((*OUTSIDE, "charge.altitude", "charge.reference"))
    wet, T, pressure = (outside.array(key) for key in OUTSIDE)
    humidity = values.full(air.humidity_ratio(wet, T, pressure, mixture.molar_mass))
    recipe = _recipe(case, values, mixture, humidity)
    soaked = ~np.isfinite(humidity)
    gaseous = ~enters_as_liquid(recipe) & (recipe.admission == "port-liquid")
    if columns is None:
        _refuse(case, recipe, soaked, gaseous)
    settings = _settings(case, values, recipe)
    phi = _equivalence_ratio(values, recipe.stoichiometric_air_fuel_ratio)
    return Prepared(
        fuel=recipe.fuel,
        recipe=recipe if phi is None else recipe.with_equivalence_ratio(phi),
        settings=settings,
        headline=headline_model(case),
        fuel_mass=values.given("charge.fuel_mass"),
        cutoff_ratio=values.given("combustion.cutoff_ratio"),
        ambient_pressure=values.array("charge.ambient_pressure"),
        cylinders=values.array("engine.cylinders"),
        cycles_per_second=values.array("engine.speed") * 2.0 / case.engine.strokes_per_cycle,
        scavenge_ratio=values.array("charge.scavenge_ratio"),
        refused=soaked | gaseous,
    )


def _recipe(case: Case, values: _Values, mixture: DryAir, humidity: Array) -> Recipe:
    fuel = fuels.record(case.fuel)
    from_intake = values.of("charge.intake_pressure") is not None
    pair = "charge.intake_" if from_intake else "charge."
    return Recipe(
        table=build(fuel.vapour),
        fuel=fuel,
        air=mixture,
        admission=case.fuel.admission,
        equivalence_ratio=np.full(values.n, START_PHI),
        humidity=humidity,
        pressure=values.array(pair + "pressure"),
        temperature=values.array(pair + "temperature"),
        from_intake=from_intake,
        exhaust_pressure=values.array("charge.exhaust_pressure"),
        egr_fraction=values.array("charge.egr_fraction"),
        egr_temperature=values.array("charge.egr_temperature"),
        combustion_efficiency=values.array("combustion.combustion_efficiency"),
        fuel_temperature=values.array("fuel.temperature"),
        fuel_pressure=values.array("fuel.pressure"),
        evaporated_by_gas=values.array("fuel.evaporated_by_gas"),
        water_ratio=values.given("charge.water_fuel_ratio"),
        water_temperature=values.given("charge.water_temperature"),
        water_at_combustion=case.charge.water_admission == "cylinder",
    )


def _refuse(case: Case, recipe: Recipe, soaked: Mask, gaseous: Mask) -> None:
    """Say why a single case cannot be."""
    fuel, charge = recipe.fuel, case.charge
    if soaked[0]:
        T, pressure = charge.ambient_temperature or np.nan, charge.ambient_pressure or np.nan
        most = pressure / float(air.water_saturation_pressure(T))
        problem = Problem(
            "the water vapour alone would exceed the ambient pressure",
            "charge.relative_humidity",
            charge.relative_humidity,
            f"below {most:.1%} at {T:g} K and {pressure / 1e5:g} bar ambient",
            "check charge.ambient_temperature and charge.ambient_pressure",
        )
        raise InputError(case.place(problem))
    if gaseous[0]:
        problem = Problem(
            f"{fuel.name} is a gas at {case.fuel.temperature:g} K and {case.fuel.pressure / 1e5:.4g} bar",
            "fuel.admission",
            case.written("fuel.admission"),
            "a supply state in which the fuel is liquid",
            'admission = "premixed", or fuel.pressure above its vapour pressure',
        )
        raise InputError(case.place(problem))


def _settings(case: Case, values: _Values, recipe: Recipe) -> Settings:
    freeze = values.given("gas.freeze_temperature")
    solved = isinstance(values.of("charge.residual_fraction"), str)
    return Settings(
        volumes=_volumes(values),
        heat_addition=case.combustion.heat_addition,
        pressure_limit=values.array("combustion.pressure_limit"),
        freeze_temperature=np.full(values.n, DEFAULT_FREEZE) if freeze is None else freeze,
        residual=None if solved else np.nan_to_num(values.array("charge.residual_fraction")),
        exhaust_pressure=values.array("charge.exhaust_pressure"),
        intake_pressure=recipe.pressure,
        swept_volume=values.full(_swept_volume(values.only(_SWEPT))),
        four_stroke=case.engine.strokes_per_cycle == 4,
        compression_exponent=values.given("gas.compression_exponent"),
    )


def headline_model(case: Case) -> str:
    """Model id that the case's [gas] section makes the headline."""
    if case.gas.model == "real":
        return REAL_MODEL
    if case.gas.expansion == "frozen":
        return "fuel-air-frozen"
    return REFERENCE_MODEL if case.gas.freeze_temperature is None else FREEZE_MODEL


def _equivalence_ratio(values: _Values, stoichiometric: float) -> Array | None:
    """Equivalence ratio given directly or as excess air or air-fuel ratio; None if it follows from the cycle."""
    phi, excess, ratio = (values.given(f"charge.{key}") for key in ("equivalence_ratio", "excess_air_ratio", "air_fuel_ratio"))
    if phi is not None:
        return phi
    if excess is not None:
        return 1.0 / excess
    return None if ratio is None else stoichiometric / ratio


def ambient(case: Case) -> Ambient:
    """The air outside: written keys first, then altitude, then the reference set, then the case's defaults."""
    charge = case.charge
    base = air.REFERENCE[charge.reference] if charge.reference else Ambient(101325.0, 298.15, 0.0, "101 325 Pa, 298.15 K, dry")
    if charge.altitude is not None:
        temperature, pressure = air.standard_atmosphere(charge.altitude)
        base = Ambient(pressure, temperature, base.relative_humidity, f"ISO 2533 at {charge.altitude:g} m")
    return Ambient(
        base.pressure if charge.ambient_pressure is None else charge.ambient_pressure,
        base.temperature if charge.ambient_temperature is None else charge.ambient_temperature,
        base.relative_humidity if charge.relative_humidity is None else charge.relative_humidity,
        base.source,
    )


def _volumes(values: _Values) -> Volumes:
    """Cylinder volumes at the events; an event left at its dead centre is exactly there."""
    inner = 1.0 / (values.array("engine.compression_ratio") - 1.0)
    crank = values.only(_CRANK)
    two_stroke, last = crank.of("engine.strokes_per_cycle") == 2, crank.given("engine.exhaust_closing")
    closing = crank.array("engine.intake_closing")
    if two_stroke and last is not None:
        closing = np.maximum(closing, last)
    return Volumes(
        inner,
        inner + _travel(crank, closing),
        inner + _travel(crank, crank.array("engine.exhaust_opening")),
        inner if two_stroke or last is None else inner + _travel(crank, last),
    )


def _travel(crank: _Values, angle: Array) -> Array:
    """Volume swept since the dead centre over the swept volume at an angle, of one row or all."""
    stroke, rod = crank.given("engine.stroke"), crank.given("engine.rod_length")
    share = np.zeros(crank.n)
    if stroke is not None and rod is not None:
        share = kinematics.travel(angle, stroke=stroke, rod_length=rod, pin_offset=crank.array("engine.pin_offset"))
    return np.where(np.abs(angle) == 180.0, 1.0, np.where(angle % 360.0 == 0.0, 0.0, share))


def _swept_volume(values: _Values) -> Array:
    """Of one cylinder [m3], NaN without bore and stroke."""
    bore, stroke, rod = (values.array(f"engine.{key}") for key in ("bore", "stroke", "rod_length"))
    straight = 0.25 * np.pi * bore**2 * stroke
    offset = values.array("engine.pin_offset")
    aside = (offset != 0.0) & np.isfinite(rod)
    if not aside.any():
        return straight
    exact = kinematics.swept_volume(bore=bore, stroke=stroke, rod_length=rod, pin_offset=offset)
    return np.where(aside, exact, straight)
