"""Complete combustion: the composition that hand calculation knows, lean or rich.

Lean: CO2, H2O, SO2, N2, Ar and the oxygen left over. Rich: the oxygen that there is makes CO, CO2,
H2 and H2O in water-gas equilibrium, CO + H2O = CO2 + H2, at a given temperature. Inert species stay
as they are. The same composition is the start of every equilibrium iteration.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from fuelair.gas.engine import Array, GasState, Mask, Pair, Status, weighted
from fuelair.gas.frozen import assemble, frozen_state, temperature
from fuelair.gas.mixture import gibbs, mix
from fuelair.gas.species import SpeciesTable

TOLERANCE = 1e-13
"""Relative change of temperature at which composition and energy agree."""
MAX_ITERATIONS = 80
CARBON_LIMIT = 1.0 - 1e-9
"""Carbon over oxygen atoms from which on solid carbon must form."""
START = 2000.0
"""Temperature of the first water-gas composition [K]."""


def element_amounts(table: SpeciesTable, amounts: Array) -> Array:
    """Amounts of reactive atoms (N, E) [kmol/kg]; inert species do not count."""
    return weighted(amounts, table.reactive_atoms)


def oxygen_excess(table: SpeciesTable, amounts: Array) -> Array:
    """Oxygen atoms beyond those that complete combustion takes [kmol/kg]; negative when rich."""
    return weighted(amounts, table.oxygen_excess)[:, 0]


def solid_carbon(table: SpeciesTable, amounts: Array) -> Mask:
    """Where carbon atoms reach the oxygen atoms (those beside sulfur dioxide), so that solid carbon must form."""
    b = element_amounts(table, amounts)
    return np.asarray(_of(table, b, "C") > (_of(table, b, "O") - 2.0 * _of(table, b, "S")) * CARBON_LIMIT)


def water_gas_constant(table: SpeciesTable, T: Array) -> Array:
    """K of CO2 + H2 = CO + H2O at ``T`` (N,) [-]."""
    g = gibbs(table, T, [table.index(n) for n in ("CO2", "H2", "CO", "H2O")])
    return np.asarray(np.exp(g[:, 0] + g[:, 1] - g[:, 2] - g[:, 3]))


def composition(table: SpeciesTable, amounts: Array, T: Array) -> tuple[Array, npt.NDArray[np.bool_]]:
    """Complete-combustion amounts (N, S) [kmol/kg] at ``T`` and where there is too little oxygen."""
    b = element_amounts(table, amounts)
    carbon, hydrogen, oxygen = (_of(table, b, e) for e in "CHO")
    sulfur = _of(table, b, "S")
    excess = oxygen - 2.0 * carbon - 0.5 * hydrogen - 2.0 * sulfur
    missing = np.maximum(-excess, 0.0)
    limit = carbon + 0.5 * hydrogen
    short = missing > limit * (1.0 + 1e-12) + 1e-300
    missing = np.minimum(missing, limit)
    co = _carbon_monoxide(carbon, 0.5 * hydrogen, missing, water_gas_constant(table, T))
    h2 = np.clip(missing - co, 0.0, 0.5 * hydrogen)
    out = np.where(table.inert, amounts, 0.0)
    for name, value in (
        ("CO", co),
        ("CO2", carbon - co),
        ("H2", h2),
        ("H2O", 0.5 * hydrogen - h2),
        ("O2", np.maximum(excess, 0.0) / 2.0),
        ("N2", _of(table, b, "N") / 2.0),
        ("Ar", _of(table, b, "Ar")),
    ):
        out[:, table.index(name)] = np.maximum(value, 0.0)
    if table.has("SO2"):
        out[:, table.index("SO2")] = sulfur
    return out, short


def _carbon_monoxide(carbon: Array, water: Array, missing: Array, k: Array) -> Array:
    """Amount of CO when ``missing`` oxygen atoms are shared out by the water-gas constant ``k``.

    K = co (water - h2) / ((carbon - co) h2) with h2 = missing - co, the root within bounds.
    """
    a = 1.0 - k
    b = water - missing + k * (carbon + missing)
    c = -k * carbon * missing
    with np.errstate(divide="ignore", invalid="ignore"):
        root = np.sqrt(np.maximum(b * b - 4.0 * a * c, 0.0))
        co = np.where(b >= 0.0, -2.0 * c / (b + root), (root - b) / (2.0 * a))
    co = np.where(np.isfinite(co), co, 0.0)
    low = np.maximum(missing - water, 0.0)
    return np.asarray(np.clip(co, low, np.minimum(carbon, missing)))


def complete_state(table: SpeciesTable, pair: Pair, x: Array, y: Array, amounts: Array) -> GasState:
    """States of completely burned gas; the rich composition follows the state's own temperature.

    Raises no error: where oxygen is too short even for carbon monoxide the status is
    ``OXYGEN_BELOW_CARBON_MONOXIDE``.
    """
    n = len(x)
    T = np.full(n, START)
    rich = oxygen_excess(table, amounts) < 0.0
    active = np.ones(n, np.bool_)
    burned, short = composition(table, amounts, T)
    low, high = np.full(n, 100.0), np.full(n, 12000.0)
    count = np.zeros(n, np.int32)
    for _ in range(MAX_ITERATIONS):
        burned, short = composition(table, amounts, T)
        if not rich.any():
            return _marked(frozen_state(table, pair, x, y, burned), short)
        found, _, failed = temperature(mix(table, burned), pair, x, y)
        ok = active & ~failed
        # water-gas shift makes found(T) fall with T: bracket the fixed point and take the secant midpoint
        low = np.where(ok & (found > T), np.maximum(low, T), low)
        high = np.where(ok & (found < T), np.minimum(high, T), high)
        moved = np.where((found > low) & (found < high), found, 0.5 * (low + high))
        size = np.abs(moved / T - 1.0)
        T = np.where(ok, moved, T)
        count += ok
        active = ok & (size > TOLERANCE)
        if not active.any():
            break
    burned, short = composition(table, amounts, T)
    mixture = mix(table, burned)
    found, _, failed = temperature(mixture, pair, x, y)
    return _marked(assemble(mixture, pair, found, x, y, burned, count, failed | active), short)


def _marked(state: GasState, short: npt.NDArray[np.bool_]) -> GasState:
    state.status[short] = Status.OXYGEN_BELOW_CARBON_MONOXIDE
    return state


def _of(table: SpeciesTable, b: Array, symbol: str) -> Array:
    column = table.element(symbol)
    return np.zeros(b.shape[0]) if column is None else b[:, column]
