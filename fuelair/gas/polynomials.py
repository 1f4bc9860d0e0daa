"""Polynomials of one species: read from a bundled entry, ordered, made continuous, evaluated at one temperature.

Order of the nine coefficients: cp/R = a0 + a1 T + a2 T^2 + a3 T^3 + a4 T^4 + a7/T^2 + a8/T, then a5 of
the enthalpy and a6 of the entropy; a7 and a8 are zero in the seven-coefficient form.
"""

from __future__ import annotations

from typing import Any, TypeVar

import numpy as np
import numpy.typing as npt

from fuelair.errors import DataError

Array = npt.NDArray[np.float64]
Real = TypeVar("Real", float, Array)

R = 8314.46261815324
"""Molar gas constant, exact by the SI of 2019 [J/(kmol K)]."""
T_BREAK = 1000.0
"""Temperature at which the two ranges of every polynomial meet [K]."""


def thermal(
    a0: Real, a1: Real, a2: Real, a3: Real, a4: Real, a5: Real, a6: Real, a7: Real, a8: Real, t: Real, inverse: Real, log_t: Real
) -> tuple[Real, Real, Real]:
    """cp/R, h/(R T) and standard s/R from nine coefficients at ``t`` [K], with 1/t and ln t.

    Plain arithmetic: arrays use it as it stands, compiled code compiles it.
    """
    cp = a0 + t * (a1 + t * (a2 + t * (a3 + t * a4)))
    cp = cp + inverse * (a8 + inverse * a7)
    h = a0 + t * (a1 / 2 + t * (a2 / 3 + t * (a3 / 4 + t * a4 / 5)))
    h = h + inverse * (a5 + a8 * log_t - inverse * a7)
    s = a0 * log_t + t * (a1 + t * (a2 / 2 + t * (a3 / 3 + t * a4 / 4))) + a6
    return cp, h, s - inverse * (a8 + 0.5 * inverse * a7)


def ranges_of(species: Any) -> Array:
    """(2, 9) coefficients of a Cantera species below and above 1000 K, made continuous at the break."""
    given = species.input_data["thermo"]
    breaks, rows = [float(b) for b in given["temperature-ranges"]], given["data"]
    if breaks[1] >= breaks[-1]:  # one range only
        rows = rows[:1]
    elif breaks[1] != T_BREAK:
        raise DataError(f"species {species.name}: polynomial break at {breaks[1]} K, expected {T_BREAK} K")
    low, high = (_ordered([float(c) for c in row]) for row in (rows[0], rows[min(1, len(rows) - 1)]))
    difference = low - high
    high[5] += float(np.sum(difference * _enthalpy_powers(T_BREAK)))
    high[6] += float(np.sum(difference * _entropy_powers(T_BREAK)))
    return np.vstack([low, high])


def _ordered(row: list[float]) -> Array:
    return np.array([*row, 0.0, 0.0] if len(row) == 7 else [*row[2:], *row[:2]])


def limits_of(species: Any) -> tuple[float, float]:
    """Temperatures between which the two ranges used hold [K]."""
    breaks = [float(b) for b in species.input_data["thermo"]["temperature-ranges"]]
    return breaks[0], breaks[min(2, len(breaks) - 1)]


def _enthalpy_powers(t: float) -> Array:
    return np.array([t, t**2 / 2, t**3 / 3, t**4 / 4, t**5 / 5, 1.0, 0.0, -1.0 / t, np.log(t)])


def _entropy_powers(t: float) -> Array:
    return np.array([np.log(t), t, t**2 / 2, t**3 / 3, t**4 / 4, 0.0, 1.0, -0.5 / t**2, -1.0 / t])


def enthalpy_at(ranges: Array, t: float) -> float:
    """Molar enthalpy [J/kmol] at a temperature [K]."""
    return float(R * np.sum((ranges[0] if t < T_BREAK else ranges[1]) * _enthalpy_powers(t)))


def entropy_at(ranges: Array, t: float) -> float:
    """Molar entropy [J/(kmol K)] at the reference pressure and a temperature [K]."""
    return float(R * np.sum((ranges[0] if t < T_BREAK else ranges[1]) * _entropy_powers(t)))
