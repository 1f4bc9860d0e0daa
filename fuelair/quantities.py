"""The one table of quantities: how every result is named, labelled and shown.

Headers, axes, tables and the glossary are made from :data:`QUANTITIES`. The units themselves and the
reading of text such as ``"2.9 bar"`` stand in `fuelair.units` and are offered here too.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final

from fuelair.units import STANDARD_ATMOSPHERE, UNITS, Unit, in_unit, is_gauge, parse, stored_unit

__all__ = [
    "QUANTITIES",
    "STANDARD_ATMOSPHERE",
    "UNITS",
    "Quantity",
    "Unit",
    "header",
    "in_unit",
    "is_gauge",
    "parse",
    "shown",
    "shown_value",
    "stored_unit",
]


@dataclass(frozen=True, slots=True)
class Quantity:
    """How one result is named and shown. ``shown value = (SI value - offset) / factor``.

    Attributes
    ----------
    key : name in JSON, CSV and data frames, with its SI unit as suffix.
    symbol, label : short sign and plain name for headers and axes.
    si_unit, shown_unit : unit stored, unit that human faces show ("" for a pure number).
    factor, offset : from SI to the shown unit.
    style : format specification of the shown number.
    beside : second unit shown in brackets, only ``"degC"`` or "".
    """

    key: str
    symbol: str
    label: str
    si_unit: str
    shown_unit: str
    factor: float
    offset: float
    style: str
    beside: str = ""


_ZERO_CELSIUS: Final = 273.15  # K

# kind of quantity: SI unit, shown unit, dimension in UNITS, format
_KINDS: Final[dict[str, tuple[str, str, str, str]]] = {
    "T": ("K", "K", "temperature", ".0f"),
    "p": ("Pa", "bar", "pressure", ".2f"),
    "ratio": ("1", "1", "ratio", ".3f"),
    "share": ("1", "%", "ratio", ".1f"),
    "trace": ("1", "%", "ratio", ".2f"),
    "e": ("J/kg", "kJ/kg", "specific energy", ".1f"),
    "s": ("J/(kg K)", "kJ/(kg K)", "specific heat capacity", ".4f"),
    "v": ("m3/kg", "m3/kg", "specific volume", ".5f"),
    "V": ("m3", "cm3", "volume", ".2f"),
    "m": ("kg", "g", "mass", ".4f"),
    "P": ("W", "kW", "power", ".1f"),
    "flow": ("kg/s", "kg/h", "mass flow", ".1f"),
    "per energy": ("kg/J", "g/kWh", "mass per energy", ".1f"),
    "per heat": ("kg/J", "g/MJ", "mass per energy", ".1f"),
}

_ROWS: Final = """
compression_temperature_K          | T | T_comp  | Compression temperature
compression_pressure_Pa            | p | p_comp  | Compression pressure
peak_temperature_K                 | T | T_peak  | Peak gas temperature
hottest_zone_temperature_K         | T | T_zone  | Hottest zone temperature
peak_pressure_Pa                   | p | p_peak  | Peak pressure
release_temperature_K              | T | T_rel   | Temperature at release
release_pressure_Pa                | p | p_rel   | Pressure at release
exhaust_temperature_K              | T | T_exh   | Mean exhaust temperature
blowdown_temperature_K             | T | T_bd    | Temperature left after blowdown
stoichiometric_flame_temperature_K | T | T_st    | Stoichiometric flame temperature
exhaust_dew_point_K                | T | T_dew   | Exhaust dew point
cutoff_ratio                       | ratio | V3/V2 | Cut-off ratio
residual_fraction                  | share | x_res | Residual fraction
imep_gross_Pa                      | p | imep_g  | Gross imep
imep_net_Pa                        | p | imep_n  | Net imep
pmep_Pa                            | p | pmep    | Pumping mep (positive = loss)
indicated_efficiency               | share | eta_i | Indicated efficiency
isfc_kg_per_J                      | per energy | isfc | Indicated fuel consumption
co2_kg_per_J                       | per energy | co2 | CO2 per indicated work
co2_kg_per_J_fuel                  | per heat | co2_f | CO2 per fuel energy
work_J_per_kg                      | e | w       | Indicated work per kg trapped
heat_supplied_J_per_kg             | e | q_f     | Fuel energy supplied per kg trapped
heat_added_J_per_kg                | e | q       | Heat added per kg trapped
compression_heat_J_per_kg          | e | q_c     | Heat taken in during compression
blowdown_energy_J_per_kg           | e | e_bd    | Blowdown energy per kg trapped
indicated_power_W                  | P | P_i     | Indicated power (gross)
net_indicated_power_W              | P | P_n     | Indicated power less pumping (net)
air_mass_flow_kg_per_s             | flow | m_air  | Air mass flow
fuel_mass_flow_kg_per_s            | flow | m_fuel | Fuel mass flow
recirculated_mass_flow_kg_per_s    | flow | m_egr  | of which is recirculated
exhaust_mass_flow_kg_per_s         | flow | m_exh  | Exhaust mass flow from the cylinders
effective_compression_ratio        | ratio | r_c  | Effective compression ratio
effective_expansion_ratio          | ratio | r_e  | Effective expansion ratio
volumetric_efficiency              | share | eta_v | Volumetric efficiency
equivalence_ratio                  | ratio | phi   | Equivalence ratio (fresh fuel over fresh dry air)
exhaust_equivalence_ratio          | ratio | phi_exh | Equivalence ratio of the exhaust by elements
oxygen_excess_ratio                | ratio | lambda_O2 | Oxygen of the trapped charge over the oxygen needed
trapped_O2_mole_fraction           | share | x_O2_tr | O2 in the trapped charge
exhaust_O2_wet                     | trace | x_O2  | O2 in the wet exhaust
exhaust_O2_dry                     | trace | x_O2d | O2 in the dry exhaust
exhaust_CO2_wet                    | trace | x_CO2 | CO2 in the wet exhaust
exhaust_CO2_dry                    | trace | x_CO2d | CO2 in the dry exhaust
exhaust_H2O_wet                    | trace | x_H2O | H2O in the wet exhaust
T_K                                | T | T       | Temperature
p_Pa                               | p | p       | Pressure
v_m3_per_kg                        | v | v       | Specific volume
u_J_per_kg                         | e | u       | Specific internal energy
h_J_per_kg                         | e | h       | Specific enthalpy
s_J_per_kgK                        | s | s       | Specific entropy
V_m3                               | V | V       | Volume
mass_kg                            | m | m       | Mass
"""


def _build_quantities() -> dict[str, Quantity]:
    rows: dict[str, Quantity] = {}
    for line in _ROWS.strip().splitlines():
        key, kind, symbol, label = (part.strip() for part in line.split("|"))
        si_unit, shown_unit, dimension, style = _KINDS[kind]
        unit = UNITS[dimension][shown_unit]
        beside = "degC" if key == "exhaust_temperature_K" else ""
        sign = "" if shown_unit == "1" else shown_unit
        rows[key] = Quantity(key, symbol, label, si_unit, sign, float(unit.factor), float(unit.offset), style, beside)
    return rows


QUANTITIES: Final[Mapping[str, Quantity]] = MappingProxyType(_build_quantities())
"""Every result quantity and state column by its key, in the order in which faces list them."""


def shown_value(key: str, value: float) -> float:
    """Return an SI value of the quantity ``key`` in its shown unit.

    >>> shown_value("peak_pressure_Pa", 2.0e7)
    200.0
    """
    row = QUANTITIES[key]
    return float((value - row.offset) / row.factor)


def shown(key: str, value: float | None, *, unit: bool = True) -> str:
    """Return an SI value as human faces print it; ``"-"`` for a figure that was not solved.

    >>> shown("peak_pressure_Pa", 2.0e7), shown("exhaust_temperature_K", 673.15)
    ('200.00 bar', '673 K (400 degC)')
    """
    if value is None:
        return "-"
    row = QUANTITIES[key]
    text = f"{shown_value(key, value):{row.style}}"
    if not unit:
        return text
    text = f"{text} {row.shown_unit}".strip()
    return f"{text} ({value - _ZERO_CELSIUS:.0f} degC)" if row.beside == "degC" else text


def header(key: str) -> str:
    """Return a column header with the shown unit, e.g. ``"Peak pressure [bar]"``."""
    row = QUANTITIES[key]
    return f"{row.label} [{row.shown_unit}]" if row.shown_unit else row.label
