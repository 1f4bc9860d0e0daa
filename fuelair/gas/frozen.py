"""States of gas of fixed composition from any pair of properties, array-wise.

Ideal gas over the mixed polynomials. Shared by every engine: it holds no Cantera object, keeps no
history, and its results do not depend on the order or the size of the batch.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from fuelair.gas.engine import PRESSURE_LIMIT_OF_DATA, Array, GasState, Pair, Status
from fuelair.gas.mixture import Mixture, mix
from fuelair.gas.species import SpeciesTable

TOLERANCE = 1e-14
"""Relative change of temperature at which the Newton iteration stops."""
MAX_ITERATIONS = 60
START = 1000.0
"""Temperature that every iteration starts from [K]; nothing from earlier calls is used."""
SLACK_BELOW, SLACK_ABOVE = 0.5, 1.2
"""Searches may leave the data range by these factors before they are clipped."""
ROUNDING = 1e-12
"""Relative residual accepted when steps no longer shrink."""


def frozen_state(table: SpeciesTable, pair: Pair, x: Array, y: Array, amounts: Array) -> GasState:
    """States of fixed composition.

    Parameters
    ----------
    table, amounts : species and composition (N, S) [kmol/kg].
    pair : ``TP TV HP UV SP SV ST``; the letters name ``x`` and ``y`` in SI units, specific per kg.

    Returns
    -------
    GasState with status ``OUTSIDE_DATA`` where temperature or pressure leave the data, and
    ``NO_SOLUTION`` where no temperature fits.
    """
    mixture = mix(table, amounts)
    T, iterations, failed = temperature(mixture, pair, x, y)
    return assemble(mixture, pair, T, x, y, amounts, iterations, failed)


def temperature(
    mixture: Mixture, pair: Pair, x: Array, y: Array, start: Array | None = None
) -> tuple[Array, npt.NDArray[np.int32], npt.NDArray[np.bool_]]:
    """Temperature [K] for a pair, Newton iterations used, and where none was found.

    Where the search leaves the data by more than its slack, the temperature returned is the edge.
    """
    n = len(mixture.moles)
    done = np.zeros(n, np.int32)
    if pair[0] == "T" or pair == "ST":
        known, good = x if pair[0] == "T" else y, np.isfinite(x) & np.isfinite(y) & (y > 0.0)
        good &= known > 0.0
        return np.where(good, known, START), done, ~good
    gas_constant = mixture.gas_constant()
    low, high = mixture.t_min * SLACK_BELOW, mixture.t_max * SLACK_ABOVE
    T = np.full(n, START) if start is None else start.copy()
    active = np.isfinite(x) & np.isfinite(y) & (y > 0.0)
    failed = ~active
    x, y = np.where(active, x, 1.0), np.where(active, y, 1.0)
    previous = np.full(n, np.inf)
    for _ in range(MAX_ITERATIONS):
        cp, h, s = mixture.thermal(T)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            if pair == "HP":
                step = (x - h) / (cp * T)
            elif pair == "UV":
                step = (x - h + gas_constant * T) / ((cp - gas_constant) * T)
            elif pair == "SP":
                step = (x - s + gas_constant * np.log(y / mixture.reference_pressure)) / cp
            else:  # SV
                p = gas_constant * T / y
                step = (x - s + gas_constant * np.log(p / mixture.reference_pressure)) / (cp - gas_constant)
            moved = T * np.exp(np.clip(step, -1.0, 1.0)) if pair[0] == "S" else T * (1.0 + np.clip(step, -0.6, 1.5))
        moved = np.clip(moved, low, high)
        size = np.abs(moved / T - 1.0)
        T = np.where(active, moved, T)
        done = np.where(active, done + 1, done).astype(np.int32)
        settled = (size <= TOLERANCE) | ((size <= ROUNDING) & (size >= previous))
        previous = np.where(active, size, previous)
        active = active & ~settled
        if not active.any():
            break
    failed = failed | active | (done > 0) & ((low >= T) | (high <= T))
    return T, done, failed


def assemble(
    mixture: Mixture,
    pair: Pair,
    T: Array,
    x: Array,
    y: Array,
    amounts: Array,
    iterations: npt.NDArray[np.int32],
    failed: npt.NDArray[np.bool_],
) -> GasState:
    """Fill a state record from temperature and the pair's second property."""
    cp, h, s0 = mixture.thermal(np.where(failed, START, T))
    gas_constant = mixture.gas_constant()
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        if pair == "ST":
            p = mixture.reference_pressure * np.exp((s0 - x) / gas_constant)
        elif pair[1] == "P":
            p = y.copy()
        else:
            p = gas_constant * T / y
        v = gas_constant * T / p
        s = s0 - gas_constant * np.log(p / mixture.reference_pressure)
        sound = np.sqrt(cp / (cp - gas_constant) * gas_constant * T)
        u = h - p * v
    status = np.zeros(len(T), np.int8)
    outside = (mixture.t_min > T) | (mixture.t_max < T) | ~(p <= PRESSURE_LIMIT_OF_DATA) | ~(p > 0.0)
    status[outside] = Status.OUTSIDE_DATA
    status[failed] = Status.NO_SOLUTION
    status[failed & ((mixture.t_min > T) | (mixture.t_max < T))] = Status.OUTSIDE_DATA
    return GasState(
        T=_masked(T, failed),
        p=_masked(p, failed),
        v=_masked(v, failed),
        u=_masked(u, failed),
        h=_masked(h, failed),
        s=_masked(s, failed),
        cp=_masked(cp, failed),
        sound=_masked(sound, failed),
        amounts=amounts,
        status=status,
        iterations=iterations,
    )


def _masked(values: Array, bad: npt.NDArray[np.bool_]) -> Array:
    return np.where(bad, np.nan, values)
