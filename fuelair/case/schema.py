"""The sections and keys of a case file: type, allowed range, default and meaning of each.

A key that is left out holds None unless it has a default; defaults that follow from other keys (such as
the exhaust pressure) are filled in by `fuelair.case`. Everything is in stored units: SI, angles in
degrees with 0 = firing dead centre, speed in rev/s, molar mass in kg/kmol. Ranges are common practice:
they hold what engines are built for and catch slips of the unit.
"""

from __future__ import annotations

from typing import Annotated, Final, Literal, get_args

from fuelair.case.fields import Choice, Section, Text, Whole, Within
from fuelair.case.fields import needed as _needed
from fuelair.case.fields import optional as _key
from fuelair.case.tolerance import ToleranceSection

Admission = Literal["premixed", "port-liquid", "early-direct", "direct"]
HeatAddition = Literal["constant-volume", "constant-pressure", "pressure-limited"]
Expansion = Literal["equilibrium", "frozen"]
Reference = Literal["iso-3046", "iso-1585", "iacs-m28", "isa"]
WaterAdmission = Literal["intake", "cylinder"]
GasModel = Literal["ideal", "real"]
FuelPhase = Literal["liquid", "vapour"]

LATER_SECTIONS: Final = ("burn", "walls", "load")
"""Sections that the plan knows but this release does not have."""

_BAR = 1e5
TRAPPED = Within("pressure", 0.05 * _BAR, 50 * _BAR, "bar")
GAS_TEMPERATURE = Within("temperature", 200.0, 800.0, "K")
SHARE = Within("ratio", 0.0, 1.0, "%")
MASS_FRACTION = Within("ratio", 0.0, 1.0, "%")
HIGH_PRESSURE = Within("pressure", 1 * _BAR, 600 * _BAR, "bar")
LIMIT_TEMPERATURE = Within("temperature", 300.0, 4000.0, "K")
BOTTOM_BEFORE, BOTTOM_AFTER, GAS_EXCHANGE_CENTRE = -180.0, 180.0, 360.0  # dead centres [deg]


class EngineSection(Section):
    """Geometry, speed and timing of the engine."""

    bore: Annotated[float | None, Within("length", 0.02, 1.2, "mm")] = _key("cylinder bore", example="160 mm")
    stroke: Annotated[float | None, Within("length", 0.02, 4.0, "mm")] = _key("piston stroke", example="190 mm")
    rod_length: Annotated[float | None, Within("length", 0.02, 8.0, "mm")] = _key(
        "connecting rod, eye to eye; needed with a valve or port timing", example="320 mm"
    )
    cylinders: Annotated[int, Whole(1, 32)] = _key("number of cylinders", 1)
    compression_ratio: Annotated[float, Within("ratio", 1.5, 60.0)] = _needed("geometric: largest over smallest cylinder volume")
    speed: Annotated[float | None, Within("speed", 0.2, 500.0, "rpm")] = _key(
        "crankshaft speed; needed for power and flows", example="1800 rpm"
    )
    strokes_per_cycle: Annotated[Literal[2, 4], Whole(2, 4, choices=(2, 4))] = _key("two-stroke or four-stroke", 4)
    pin_offset: Annotated[float, Within("length", -0.2, 0.2, "mm")] = _key(
        "offset of the piston pin, positive towards the thrust side of expansion", 0.0
    )
    intake_closing: Annotated[float, Within("angle", -300.0, -30.0, "deg")] = _key(
        "start of compression; below -180 the valve closes before bottom dead centre", BOTTOM_BEFORE
    )
    exhaust_opening: Annotated[float, Within("angle", 60.0, 240.0, "deg")] = _key("end of expansion", BOTTOM_AFTER)
    exhaust_closing: Annotated[float | None, Within("angle", -180.0, 430.0, "deg")] = _key(
        "four-stroke 300 to 430 deg, default 360; two-stroke -180 to -30 deg, default -180", example="370 deg"
    )


class OwnFuel(Section):
    """A fuel of the user's own."""

    formula: Annotated[str | None, Text()] = _key("elements C H O N S with counts, e.g. C12H26 or CH1.85", example="C12H26")
    carbon: Annotated[float | None, MASS_FRACTION] = _key("mass fraction of carbon", example="86 %")
    hydrogen: Annotated[float | None, MASS_FRACTION] = _key("mass fraction of hydrogen", example="14 %")
    oxygen: Annotated[float | None, MASS_FRACTION] = _key("mass fraction of oxygen", example="0 %")
    nitrogen: Annotated[float | None, MASS_FRACTION] = _key("mass fraction of nitrogen", example="0 %")
    sulfur: Annotated[float | None, MASS_FRACTION] = _key("mass fraction of sulfur", example="0 %")
    lower_heating_value: Annotated[float, Within("specific energy", 1e6, 150e6, "MJ/kg")] = _needed(
        "at 298.15 K, in the phase supplied"
    )
    phase: Annotated[FuelPhase | None, Choice(get_args(FuelPhase))] = _key(
        "as supplied; default liquid if density is given", example="liquid"
    )
    density: Annotated[float | None, Within("density", 400.0, 1300.0, "kg/m3")] = _key(
        "of the liquid at 288.15 K", example="820 kg/m3"
    )
    molar_mass: Annotated[float | None, Within("molar mass", 1.5, 1500.0, "kg/kmol")] = _key(
        "of the fuel as vapour", example="200 kg/kmol"
    )
    latent_heat: Annotated[float | None, Within("specific energy", 50e3, 2e6, "kJ/kg")] = _key("at 298.15 K", example="355 kJ/kg")
    liquid_cp: Annotated[float | None, Within("specific heat capacity", 1000.0, 6000.0, "kJ/(kg K)")] = _key(
        "specific heat capacity of the liquid", example="2.1 kJ/(kg K)"
    )
    expansivity: Annotated[float | None, Within("expansivity", 0.0, 5e-3, "1/K")] = _key(
        "of the liquid's volume", example="0.0009 1/K"
    )


class BlendPart(Section):
    """One part of a blend."""

    name: Annotated[str, Text()] = _needed("name of a recorded fuel")
    mass_fraction: Annotated[float | None, MASS_FRACTION] = _key("share of the blend's mass", example="50 %")
    volume_fraction: Annotated[float | None, MASS_FRACTION] = _key("share of the blend's volume", example="50 %")


class FuelSection(Section):
    """Exactly one of name, blend, own; how and in which state it enters."""

    name: Annotated[str | None, Text()] = _key("name of a recorded fuel, see `fuelair fuels`", example="diesel")
    blend: tuple[BlendPart, ...] | None = _key("parts of a blend, all by mass_fraction or all by volume_fraction")
    own: OwnFuel | None = _key("a fuel of your own")
    admission: Annotated[Admission, Choice(get_args(Admission))] = _needed(
        "premixed: vapour compressed with the air; port-liquid, early-direct: evaporates before compression; "
        "direct: injected at combustion"
    )
    temperature: Annotated[float, Within("temperature", 100.0, 600.0, "K")] = _key("at the injector or mixer", 298.15)
    pressure: Annotated[float, Within("pressure", 0.05 * _BAR, 5000 * _BAR, "bar")] = _key("at the injector or mixer", 101325.0)
    evaporated_by_gas: Annotated[float, SHARE] = _key("share of the latent heat that the charge gives", 1.0)


class ChargeSection(Section):
    """What is trapped: amount of fuel, state, dilution, ambient air."""

    equivalence_ratio: Annotated[float | None, Within("ratio", 0.01, 5.0)] = _key(
        "fresh fuel over fresh dry air, relative to stoichiometric", example=0.6
    )
    excess_air_ratio: Annotated[float | None, Within("ratio", 0.2, 100.0)] = _key("one over the equivalence ratio", example=1.7)
    air_fuel_ratio: Annotated[float | None, Within("ratio", 0.2, 5000.0)] = _key(
        "mass of fresh dry air over mass of fresh fuel", example="24:1"
    )
    fuel_mass: Annotated[float | None, Within("mass", 1e-9, 1.0, "mg")] = _key("per cylinder and cycle", example="120 mg")
    pressure: Annotated[float | None, TRAPPED] = _key("of the trapped charge, after evaporation", example="2.9 bar")
    temperature: Annotated[float | None, GAS_TEMPERATURE] = _key("of the trapped charge, after evaporation", example="335 K")
    intake_pressure: Annotated[float | None, TRAPPED] = _key("in the receiver", example="3.0 bar")
    intake_temperature: Annotated[float | None, GAS_TEMPERATURE] = _key("in the receiver", example="50 degC")
    exhaust_pressure: Annotated[float | None, TRAPPED] = _key(
        "in the exhaust; default the pressure of the pair", example="2.6 bar"
    )
    residual_fraction: Annotated[float | Literal["solve"] | None, Within("ratio", 0.0, 0.9, "%", words=("solve",))] = _key(
        "mass of residual gas over trapped mass, or solve", example="3 %"
    )
    egr_fraction: Annotated[float, Within("ratio", 0.0, 0.9, "%")] = _key(
        "recirculated exhaust over fresh humid air plus recirculated exhaust, by mass", 0.0
    )
    egr_temperature: Annotated[float | None, Within("temperature", 250.0, 1200.0, "K")] = _key(
        "of the recirculated exhaust after its cooler; default the temperature of the pair", example="90 degC"
    )
    water_fuel_ratio: Annotated[float | None, Within("ratio", 0.0, 3.0)] = _key(
        "liquid water added, mass over the mass of fuel", example=0.5
    )
    water_admission: Annotated[WaterAdmission | None, Choice(get_args(WaterAdmission))] = _key(
        "intake (default): it evaporates before compression, as far as the charge can hold it; cylinder: it joins at combustion",
        example="cylinder",
    )
    water_temperature: Annotated[float | None, Within("temperature", 273.15, 373.15, "degC")] = _key(
        "of the added water; default 298.15 K", example="40 degC"
    )
    scavenging_efficiency: Annotated[float | None, Within("ratio", 0.1, 1.0, "%")] = _key(
        "two-stroke: fresh charge trapped over trapped mass", example="92 %"
    )
    scavenge_ratio: Annotated[float | None, Within("ratio", 0.1, 5.0)] = _key(
        "two-stroke: fresh charge delivered over trapped mass; what is not trapped goes to the exhaust", example=1.2
    )
    reference: Annotated[Reference | None, Choice(get_args(Reference))] = _key(
        "reference conditions of a standard, for ambient keys that are not given", example="iso-3046"
    )
    altitude: Annotated[float | None, Within("length", -2000.0, 11000.0, "m")] = _key(
        "sets ambient pressure and temperature of the standard atmosphere (ISO 2533)", example="500 m"
    )
    ambient_pressure: Annotated[float | None, Within("pressure", 0.1 * _BAR, 2 * _BAR, "bar", absolute=True)] = _key(
        "of the air outside; gauge pressures count from it", example="1.013 bar"
    )
    ambient_temperature: Annotated[float | None, Within("temperature", 200.0, 340.0, "K")] = _key(
        "of the air outside", example="25 degC"
    )
    relative_humidity: Annotated[float | None, SHARE] = _key("of the air outside", example="60 %")


class CombustionSection(Section):
    """How heat is added."""

    heat_addition: Annotated[HeatAddition, Choice(get_args(HeatAddition))] = _needed("shape of the heat addition")
    pressure_limit: Annotated[float | None, HIGH_PRESSURE] = _key(
        "peak pressure held by pressure-limited heat addition", example="200 bar"
    )
    combustion_efficiency: Annotated[float, Within("ratio", 0.5, 1.0, "%")] = _key("share of the fuel that burns", 1.0)
    cutoff_ratio: Annotated[float | None, Within("ratio", 1.001, 20.0)] = _key(
        "volume at the end over volume at the start of the constant-pressure part; the fuel amount is then solved",
        example=1.8,
    )


class GasSection(Section):
    """Gas model of the headline cycle."""

    model: Annotated[GasModel, Choice(get_args(GasModel))] = _key("gas law of the headline model", "ideal")
    expansion: Annotated[Expansion, Choice(get_args(Expansion))] = _key("composition during expansion", "equilibrium")
    freeze_temperature: Annotated[float | None, Within("temperature", 1000.0, 3000.0, "K")] = _key(
        "expansion frozen below it; default: equilibrium to release, exhaust composition frozen as at 1740 K", example="1800 K"
    )
    compression_exponent: Annotated[float | None, Within("ratio", 1.01, 1.67)] = _key(
        "polytropic exponent of compression, its heat booked; default: isentropic", example=1.35
    )


class LimitsSection(Section):
    """Upper limits that the engine must keep; a result above one is a warning."""

    peak_pressure: Annotated[float | None, HIGH_PRESSURE] = _key("highest allowed peak pressure", example="200 bar")
    peak_temperature: Annotated[float | None, LIMIT_TEMPERATURE] = _key("highest allowed peak gas temperature", example="2300 K")
    compression_pressure: Annotated[float | None, HIGH_PRESSURE] = _key("highest allowed compression pressure", example="160 bar")
    compression_temperature: Annotated[float | None, LIMIT_TEMPERATURE] = _key(
        "highest allowed compression temperature", example="1000 K"
    )
    release_temperature: Annotated[float | None, LIMIT_TEMPERATURE] = _key(
        "highest allowed temperature at release", example="1300 K"
    )
    release_pressure: Annotated[float | None, TRAPPED] = _key("highest allowed pressure at release", example="12 bar")
    exhaust_temperature: Annotated[float | None, LIMIT_TEMPERATURE] = _key(
        "highest allowed mean exhaust temperature", example="650 degC"
    )


SECTIONS: Final[dict[str, type[Section]]] = {
    "engine": EngineSection,
    "fuel": FuelSection,
    "charge": ChargeSection,
    "combustion": CombustionSection,
    "gas": GasSection,
    "limits": LimitsSection,
    "tolerance": ToleranceSection,
}
LEAST: Final[dict[str, str]] = {
    "engine": "compression_ratio",
    "fuel": "name, blend or own, and admission",
    "charge": "an amount of fuel such as equivalence_ratio, and pressure with temperature",
    "combustion": "heat_addition",
}
"""What each section that must be there must hold."""
