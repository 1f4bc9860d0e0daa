"""The quantities that a study can give, by name."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from fuelair.case.fields import nearest
from fuelair.cycle.result import EXCHANGE_FIGURES
from fuelair.errors import InputError, Problem

MODEL_FIGURES: Final = (
    "compression_temperature_K",
    "compression_pressure_Pa",
    "peak_temperature_K",
    "peak_pressure_Pa",
    "release_temperature_K",
    "release_pressure_Pa",
    "exhaust_temperature_K",
    "blowdown_temperature_K",
    "cutoff_ratio",
    "residual_fraction",
    "imep_gross_Pa",
    "imep_net_Pa",
    "pmep_Pa",
    "indicated_efficiency",
    "isfc_kg_per_J",
    "work_J_per_kg",
    "heat_supplied_J_per_kg",
    "heat_added_J_per_kg",
    "compression_heat_J_per_kg",
    "blowdown_energy_J_per_kg",
)
"""Figures of every model; what a study gives if nothing else is asked for."""
FLAME: Final = "stoichiometric_flame_temperature_K"
POWER_FIGURES: Final = (
    "trapped_mass_kg",
    "fuel_mass_per_cycle_kg",
    "indicated_power_W",
    "net_indicated_power_W",
    "air_mass_flow_kg_per_s",
    "fuel_mass_flow_kg_per_s",
    "recirculated_mass_flow_kg_per_s",
    "exhaust_mass_flow_kg_per_s",
)
"""Figures that need bore and stroke; all but the two masses need the speed as well."""
ENGINE_FIGURES: Final = (
    *POWER_FIGURES,
    "volumetric_efficiency",
    "effective_compression_ratio",
    "effective_expansion_ratio",
)
MIXED: Final = "mixed_exhaust_temperature_K"
EXHAUST_FIGURES: Final = (
    MIXED,
    "exhaust_O2_wet",
    "exhaust_O2_dry",
    "exhaust_CO2_wet",
    "exhaust_CO2_dry",
    "exhaust_H2O_wet",
    "exhaust_CO_dry",
    "exhaust_H2_dry",
    "exhaust_NO_wet",
    "exhaust_dew_point_K",
    "exhaust_equivalence_ratio",
    "co2_kg_per_J",
    "co2_kg_per_J_fuel",
)
"""Of the exhaust after any scavenge air of a two-stroke engine has mixed in."""
CHARGE_FIGURES: Final = (
    "equivalence_ratio",
    "excess_air_ratio",
    "air_fuel_ratio",
    "oxygen_excess_ratio",
    "trapped_O2_mole_fraction",
    "trapped_temperature_K",
    "trapped_pressure_Pa",
    "fuel_per_trapped_mass",
    "water_added_per_trapped_mass",
    "drained_water_per_dry_air",
    "fuel_vapour_saturation_ratio",
    "wall_heat_J_per_kg",
)
"""Make-up of the trapped charge, which all models share."""
HEADLINE_FIGURES: Final = (*ENGINE_FIGURES, *EXHAUST_FIGURES, FLAME)
"""Figures that only the headline model has."""
ALL: Final = (*MODEL_FIGURES, *HEADLINE_FIGURES, *CHARGE_FIGURES)
_UNITS: Final = ("K", "Pa", "J_per_kg", "kg_per_J", "W", "kg_per_s", "kg")


@dataclass(frozen=True, slots=True)
class Need:
    """Which groups of figures have to be computed beside the model's own, and whether blowdown and exhaust are wanted at all."""

    engine: bool
    exhaust: bool
    flame: bool
    charge: bool
    closed_part_only: bool

    @classmethod
    def of(cls, names: Sequence[str]) -> Need:
        """The groups that hold these names."""
        engine, exhaust, charge = (bool({*names} & {*g}) for g in (ENGINE_FIGURES, EXHAUST_FIGURES, CHARGE_FIGURES))
        return cls(engine, exhaust, FLAME in names, charge, {*names} <= {*MODEL_FIGURES} - {*EXCHANGE_FIGURES})


def resolve(name: str) -> str:
    """Return the quantity that is meant: its key, or its key without the unit, e.g. ``peak_pressure``.

    Raises
    ------
    InputError : no such quantity.
    """
    if name in ALL:
        return name
    for unit in _UNITS:
        if f"{name}_{unit}" in ALL:
            return f"{name}_{unit}"
    near = nearest(name, ALL)
    raise InputError(Problem("no such quantity", "quantity", name, "" if near else ", ".join(ALL), near))
