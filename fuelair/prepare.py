"""From a case to the numbers the physics rooms take: fuel, ambient air, recipe, settings."""

from __future__ import annotations

from dataclasses import dataclass

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
from fuelair.gas.engine import Array
from fuelair.gas.species import build

START_PHI = 0.5
"""Equivalence ratio that a recipe starts from when the case gives a fuel mass or a cut-off ratio."""


@dataclass(frozen=True, slots=True)
class Prepared:
    """A case as numbers, a batch of one.

    Attributes
    ----------
    fuel, ambient : the fuel and the air outside.
    recipe, settings : what to trap, and how the cycle runs.
    headline : model id of the verdict.
    fuel_mass, cutoff_ratio : the amount of fuel if given that way (1,), else None.
    swept_volume : of one cylinder [m3], None without geometry.
    cycles_per_second : of one cylinder [1/s], None without speed.
    scavenge_ratio : fresh charge delivered over trapped mass, None if none passes through.
    """

    fuel: Fuel
    ambient: Ambient
    recipe: Recipe
    settings: Settings
    headline: str
    fuel_mass: Array | None
    cutoff_ratio: Array | None
    swept_volume: float | None
    cycles_per_second: float | None
    scavenge_ratio: float | None


def prepare(case: Case, dry_air: DryAir | None = None) -> Prepared:
    """Numbers of a case.

    Parameters
    ----------
    dry_air : composition of the dry air; default `fuelair.air.dry_air`.
    """
    charge, engine = case.charge, case.engine
    outside = ambient(case)
    recipe = _recipe(case, outside, dry_air or air.dry_air())
    swept = _swept_volume(case)
    return Prepared(
        fuel=recipe.fuel,
        ambient=outside,
        recipe=recipe,
        settings=_settings(case, recipe, swept),
        headline=headline_model(case),
        fuel_mass=None if charge.fuel_mass is None else _one(charge.fuel_mass),
        cutoff_ratio=None if case.combustion.cutoff_ratio is None else _one(case.combustion.cutoff_ratio),
        swept_volume=swept,
        cycles_per_second=None if engine.speed is None else engine.speed * 2.0 / engine.strokes_per_cycle,
        scavenge_ratio=charge.scavenge_ratio,
    )


def _recipe(case: Case, outside: Ambient, mixture: DryAir) -> Recipe:
    charge, fuel = case.charge, fuels.record(case.fuel)
    from_intake = charge.intake_pressure is not None
    pressure, temperature = (
        (charge.intake_pressure, charge.intake_temperature) if from_intake else (charge.pressure, charge.temperature)
    )
    recipe = Recipe(
        table=build(fuel.vapour),
        fuel=fuel,
        air=mixture,
        admission=case.fuel.admission,
        equivalence_ratio=_one(START_PHI),
        humidity=_one(_humidity(case, outside, mixture)),
        pressure=_one(pressure),
        temperature=_one(temperature),
        from_intake=from_intake,
        exhaust_pressure=_one(charge.exhaust_pressure),
        egr_fraction=_one(charge.egr_fraction),
        egr_temperature=_one(charge.egr_temperature),
        combustion_efficiency=_one(case.combustion.combustion_efficiency),
        fuel_temperature=_one(case.fuel.temperature),
        fuel_pressure=_one(case.fuel.pressure),
        evaporated_by_gas=_one(case.fuel.evaporated_by_gas),
        water_ratio=None if charge.water_fuel_ratio is None else _one(charge.water_fuel_ratio),
        water_temperature=None if charge.water_temperature is None else _one(charge.water_temperature),
        water_at_combustion=charge.water_admission == "cylinder",
    )
    if recipe.admission == "port-liquid" and not enters_as_liquid(recipe)[0]:
        problem = Problem(
            f"{fuel.name} is a gas at {case.fuel.temperature:g} K and {case.fuel.pressure / 1e5:.4g} bar",
            "fuel.admission",
            case.written("fuel.admission"),
            "a supply state in which the fuel is liquid",
            'admission = "premixed", or fuel.pressure above its vapour pressure',
        )
        raise InputError(case.place(problem))
    phi = equivalence_ratio(case, recipe.stoichiometric_air_fuel_ratio)
    return recipe if phi is None else recipe.with_equivalence_ratio(_one(phi))


def _humidity(case: Case, outside: Ambient, mixture: DryAir) -> float:
    """Water vapour per dry air of the air outside [kg/kg]."""
    ratio = air.humidity_ratio(outside.relative_humidity, outside.temperature, outside.pressure, mixture.molar_mass)
    if np.isfinite(ratio):
        return float(ratio)
    most = outside.pressure / float(air.water_saturation_pressure(outside.temperature))
    problem = Problem(
        "the water vapour alone would exceed the ambient pressure",
        "charge.relative_humidity",
        outside.relative_humidity,
        f"below {most:.1%} at {outside.temperature:g} K and {outside.pressure / 1e5:g} bar ambient",
        "check charge.ambient_temperature and charge.ambient_pressure",
    )
    raise InputError(case.place(problem))


def _settings(case: Case, recipe: Recipe, swept: float | None) -> Settings:
    charge, freeze = case.charge, case.gas.freeze_temperature
    return Settings(
        volumes=volumes(case),
        heat_addition=case.combustion.heat_addition,
        pressure_limit=_one(case.combustion.pressure_limit),
        freeze_temperature=_one(DEFAULT_FREEZE if freeze is None else freeze),
        residual=None if charge.residual_fraction == "solve" else _one(float(charge.residual_fraction or 0.0)),
        exhaust_pressure=_one(charge.exhaust_pressure),
        intake_pressure=recipe.pressure,
        swept_volume=_one(swept),
        four_stroke=case.engine.strokes_per_cycle == 4,
        compression_exponent=None if case.gas.compression_exponent is None else _one(case.gas.compression_exponent),
    )


def headline_model(case: Case) -> str:
    """Model id that the case's [gas] section makes the headline."""
    if case.gas.model == "real":
        return REAL_MODEL
    if case.gas.expansion == "frozen":
        return "fuel-air-frozen"
    return REFERENCE_MODEL if case.gas.freeze_temperature is None else FREEZE_MODEL


def equivalence_ratio(case: Case, stoichiometric: float) -> float | None:
    """Equivalence ratio given directly or as excess air or air-fuel ratio; None if it follows from the cycle."""
    charge = case.charge
    if charge.equivalence_ratio is not None:
        return charge.equivalence_ratio
    if charge.excess_air_ratio is not None:
        return 1.0 / charge.excess_air_ratio
    if charge.air_fuel_ratio is not None:
        return stoichiometric / charge.air_fuel_ratio
    return None


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


def volumes(case: Case) -> Volumes:
    """Cylinder volumes at the events; an event left at its dead centre is exactly there."""
    engine = case.engine
    r = engine.compression_ratio
    two_stroke = engine.strokes_per_cycle == 2
    closing = engine.intake_closing
    if two_stroke and engine.exhaust_closing is not None:
        closing = max(closing, engine.exhaust_closing)
    inner, outer = 1.0 / (r - 1.0), 1.0 / (r - 1.0) + 1.0

    def at(angle: float) -> float:
        if abs(angle) == 180.0:
            return outer
        if angle % 360.0 == 0.0 or engine.stroke is None or engine.rod_length is None:
            return inner
        return float(
            kinematics.relative_volume(
                angle,
                stroke=engine.stroke,
                rod_length=engine.rod_length,
                compression_ratio=r,
                pin_offset=engine.pin_offset,
            )
        )

    last = inner if two_stroke or engine.exhaust_closing is None else at(engine.exhaust_closing)
    return Volumes(_one(inner), _one(at(closing)), _one(at(engine.exhaust_opening)), _one(last))


def _swept_volume(case: Case) -> float | None:
    engine = case.engine
    if engine.bore is None or engine.stroke is None:
        return None
    if engine.pin_offset and engine.rod_length is not None:
        return kinematics.swept_volume(
            bore=engine.bore, stroke=engine.stroke, rod_length=engine.rod_length, pin_offset=engine.pin_offset
        )
    return float(0.25 * np.pi * engine.bore**2 * engine.stroke)


def _one(value: float | None) -> Array:
    return np.array([np.nan if value is None else float(value)])
