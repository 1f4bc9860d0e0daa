"""Air: dry composition, humidity, altitude, reference conditions.

Numbers only; nothing here knows a case. Sources stand beside each value. "from memory" marks what
was not read while this was written.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeVar

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]
Metres = TypeVar("Metres", float, Array)

M_H2O = 18.01528
"""Molar mass of water [kg/kmol] (IAPWS R6-95: 18.015268; the difference is 1e-6)."""
STANDARD_PRESSURE = 101325.0
"""Standard atmosphere [Pa], ISO 2533."""

# ISO 2533:1975 / US Standard Atmosphere 1976, volume fractions of dry air at sea level; CO2 by year.
_N2, _O2, _AR = 0.78084, 0.209476, 0.00934
_CO2_BY_YEAR = ((1976, 314e-6), (2000, 369e-6), (2010, 389e-6), (2020, 412e-6), (2025, 426e-6))
"""1976: US Standard Atmosphere; later: yearly global means rounded to 1 ppm, from memory."""
DEFAULT_YEAR = 2025

_MOLAR_MASS = {"N2": 28.0134, "O2": 31.9988, "Ar": 39.948, "CO2": 44.0095}


@dataclass(frozen=True, slots=True)
class DryAir:
    """Dry air as mole fractions that sum to one."""

    N2: float
    O2: float
    Ar: float = 0.0
    CO2: float = 0.0

    def __post_init__(self) -> None:
        parts = self.composition()
        if not (min(parts.values()) >= 0.0 and 0.01 < self.O2 <= 1.0 and abs(sum(parts.values()) - 1.0) <= 1e-9):
            raise ValueError(f"dry air must be mole fractions >= 0 that sum to 1 with O2 above 0.01, got {parts}")

    def composition(self) -> dict[str, float]:
        """Mole fractions by species name."""
        return {"N2": self.N2, "O2": self.O2, "Ar": self.Ar, "CO2": self.CO2}

    @property
    def molar_mass(self) -> float:
        """Molar mass [kg/kmol]."""
        return sum(x * _MOLAR_MASS[k] for k, x in self.composition().items())

    @classmethod
    def from_ratio(cls, nitrogen_per_oxygen: float) -> DryAir:
        """Simplified air, 1 O2 + ``nitrogen_per_oxygen`` N2 (3.76 or 3.773 in much of the literature)."""
        whole = 1.0 + nitrogen_per_oxygen
        return cls(N2=nitrogen_per_oxygen / whole, O2=1.0 / whole)


def dry_air(year: int = DEFAULT_YEAR) -> DryAir:
    """Dry air of ISO 2533 with the carbon dioxide of a year (1976 to 2050, held constant beyond the last entry).

    Source: ISO 2533:1975 (same volume fractions as US Standard Atmosphere 1976); carbon dioxide after
    1976 from memory. Renormalised to one (neon and lighter traces, 27 ppm, are left out).
    """
    years = [y for y, _ in _CO2_BY_YEAR]
    co2 = float(np.interp(year, years, [c for _, c in _CO2_BY_YEAR]))
    whole = _N2 + _O2 + _AR + co2
    return DryAir(N2=_N2 / whole, O2=_O2 / whole, Ar=_AR / whole, CO2=co2 / whole)


# Wagner and Pruss (1993), J. Phys. Chem. Ref. Data 22, 783, auxiliary equation of IAPWS-95 for the
# saturation pressure; coefficients from memory, checked in tests against IAPWS-95 and IAPWS-IF97 in CoolProp.
_TC, _PC = 647.096, 22.064e6
_A = (-7.85951783, 1.84408259, -11.7866497, 22.6807411, -15.9618719, 1.80122502)


def water_saturation_pressure(T: Array | float) -> Array:
    """Saturation pressure of water [Pa] over liquid.

    Parameters
    ----------
    T : temperature [K]; valid 273.16 to 647.096 K. Below (supercooled water) it extrapolates
        smoothly; above the critical temperature it returns infinity, since no liquid can form.

    Source: Wagner and Pruss 1993 (coefficients from memory, tested against CoolProp).

    >>> round(float(water_saturation_pressure(373.15)), 0)
    101418.0
    """
    T = np.asarray(T, float)
    theta = np.clip(1.0 - T / _TC, 0.0, 1.0)
    root, cube = np.sqrt(theta), theta * theta * theta
    a, b, c, d, e, f = _A  # of theta to the power 1, 1.5, 3, 3.5, 4 and 7.5
    series = theta * (a + b * root) + cube * (c + d * root + e * theta + f * cube * theta * root)
    with np.errstate(over="ignore"):
        value = _PC * np.exp(_TC / T * series)
    return np.asarray(np.where(T >= _TC, np.inf, value))


def water_dew_point(pressure: Array | float) -> Array:
    """Temperature [K] at which water vapour of partial ``pressure`` [Pa] saturates (200 to 647 K).

    Bisection on `water_saturation_pressure`; 0 Pa gives NaN, for dry gas has no dew point.
    """
    p = np.atleast_1d(np.asarray(pressure, float))
    low, high = np.full(p.shape, 180.0), np.full(p.shape, _TC)
    for _ in range(60):
        middle = 0.5 * (low + high)
        below = water_saturation_pressure(middle) < p
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    return np.asarray(np.where(p > 0.0, 0.5 * (low + high), np.nan))


def humidity_ratio(relative_humidity: Array | float, T: Array | float, pressure: Array | float, air_molar_mass: float) -> Array:
    """Mass of water vapour per mass of dry air [kg/kg].

    Parameters
    ----------
    relative_humidity : vapour pressure over saturation pressure, 0 to 1.
    T, pressure : of the humid air [K], [Pa].
    air_molar_mass : of the dry air [kg/kmol].

    Ideal mixture (no enhancement factor, which is 1.004 at 25 degC and 1 atm). Returns NaN where the
    vapour alone would exceed the pressure.

    >>> round(float(humidity_ratio(0.30, 298.15, 100e3, 28.9652)), 5)
    0.00597
    """
    vapour = np.asarray(relative_humidity, float) * water_saturation_pressure(T)
    dry = np.asarray(pressure, float) - vapour
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(np.where(dry > 0.0, M_H2O / air_molar_mass * vapour / dry, np.nan))


# ISO 2533: troposphere and lower stratosphere
_T0, _LAPSE, _G0, _R_AIR, _EARTH = 288.15, 0.0065, 9.80665, 287.05287, 6356766.0
ALTITUDE_RANGE = (-2000.0, 11000.0)
"""Geometric altitude for which `standard_atmosphere` holds [m]."""


def standard_atmosphere(altitude: Metres) -> tuple[Metres, Metres]:
    """Temperature [K] and pressure [Pa] of the standard atmosphere, ISO 2533.

    Parameters
    ----------
    altitude : geometric altitude above mean sea level [m], -2000 to 11 000; a number or an array.

    >>> [round(x, 1) for x in standard_atmosphere(2000.0)]
    [275.2, 79501.4]
    """
    low, high = ALTITUDE_RANGE
    if not np.all((low <= altitude) & (altitude <= high)):
        raise ValueError(f"altitude {altitude} m is outside {low:g} to {high:g} m")
    geopotential = _EARTH * altitude / (_EARTH + altitude)
    T = _T0 - _LAPSE * geopotential
    return T, STANDARD_PRESSURE * (T / _T0) ** (_G0 / (_LAPSE * _R_AIR))


@dataclass(frozen=True, slots=True)
class Ambient:
    """Ambient air: pressure [Pa], temperature [K], relative humidity (0 to 1), where it comes from."""

    pressure: float
    temperature: float
    relative_humidity: float
    source: str


REFERENCE: dict[str, Ambient] = {
    "isa": Ambient(STANDARD_PRESSURE, 288.15, 0.0, "ISO 2533, sea level"),
    "iso-3046": Ambient(100e3, 298.15, 0.30, "ISO 3046-1:2002 (values from memory)"),
    "iso-1585": Ambient(100e3, 298.15, 1e3 / 3169.7, "ISO 1585: 99 kPa dry air and 1 kPa vapour, 298 K (from memory)"),
    "iacs-m28": Ambient(100e3, 318.15, 0.60, "IACS M28 (values from memory)"),
}
"""Reference-condition sets by name."""
