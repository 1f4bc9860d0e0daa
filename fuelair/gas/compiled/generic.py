"""Generic equilibrium, compiled: `fuelair.gas.gibbs.equilibrate` over any species table, one state after the other.

A state is solved in up to three ways, and never fails in silence:

1. Newton (`newton.search`) from a start near the answer (`start.place`);
2. the same from the plain start of `gibbs.py`: complete combustion and seeds of everything else;
3. where T (of the pair ST: V) is unknown and both fail, or end far beyond the data, a bracket: energy or entropy of
   the equilibrium at given T and p, or T and V, rises with T (with V), so a scan finds the ends and `roots.bracketed`
   the root. T and V are given in every inner problem, and each starts afresh.

Amounts: their elements are restored exactly at the end, in proportion to each amount. Because the balance of oxygen is
that of its excess, traces keep their digits where `gibbs.py` and Cantera lose them: at exact stoichiometry below
700 K the oxygen beside the products is far less than the rounding of the oxygen in them. What limits a trace there is
only the excess itself, which is known to the rounding of the amounts given (1e-16 of their oxygen): traces below that
are those of the amounts as the machine holds them. Amounts below exp(-690) kmol/kg are held there.
Carbon without any oxygen is not started and fails.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from fuelair.gas.compiled import virial
from fuelair.gas.compiled.equations import elements, leave_out, solve
from fuelair.gas.compiled.jit import bare, compiled
from fuelair.gas.compiled.layout import (
    AMOUNT,
    LOG,
    PAIRS,
    REACTING,
    RIGHT,
    ST,
    STATE,
    TP,
    TV,
    USABLE,
    Species,
    Work,
    species_of,
    work_for,
)
from fuelair.gas.compiled.newton import PLACINGS, search
from fuelair.gas.compiled.real_fixed import fixed
from fuelair.gas.compiled.start import balances, burned, plain
from fuelair.gas.engine import Array, Mask, Pair
from fuelair.gas.gibbs import HOTTEST_GUESS, MAX_ITERATIONS, START_TEMPERATURE, Equilibrium
from fuelair.gas.polynomials import R
from fuelair.gas.real_gas import VirialTable
from fuelair.gas.species import SpeciesTable
from fuelair.roots import bracketed

START_PRESSURE = 5e6
"""Pressure that the volume of the pair ST starts from [Pa]."""
SCAN_T = np.geomspace(150.0, 7200.0, 18)
"""Temperatures between which a root is looked for [K]; the data reach from 200 to 6000 K."""
SCAN_P = np.geomspace(1e9, 1e2, 25)
"""Ideal pressures of the volumes between which a root of the pair ST is looked for [Pa]."""
EDGE = 30
"""Halvings by which the coldest gas of a pressure is looked for."""
CLOSE = 0.5
"""Largest relative change of an amount that may be needed to restore the elements."""


def equilibrate(
    table: SpeciesTable,
    pair: Pair,
    x: Array,
    y: Array,
    amounts: Array,
    *,
    departure: VirialTable | None = None,
    guess: Array | None = None,
) -> Equilibrium:
    """Equilibrium amounts for a pair of properties.

    Parameters
    ----------
    table, amounts : species, and amounts (N, S) [kmol/kg] that fix elements and inert species.
    pair, x, y : the pair and its values in SI, per kg; shape (N,).
    departure : virial coefficients of a real gas; None for the ideal gas.
    guess : temperature to start from [K]; default 2500 K.

    Returns
    -------
    Equilibrium; where it failed the temperature is NaN and the amounts are those given.
    """
    tried = newton(table, pair, x, y, amounts, departure=departure, guess=guess)
    if pair in ("TP", "TV"):
        return tried
    sound = np.isfinite(x) & np.isfinite(y) & (y > 0.0)
    astray = (SCAN_T[0] > tried.T) | (SCAN_T[-1] < tried.T)  # the polynomials offer further roots beyond their data
    again = np.flatnonzero((tried.failed | astray) & sound)
    if len(again):
        found = between(table, pair, x[again], y[again], amounts[again], departure=departure)
        good = again[~found.failed]
        for name in ("amounts", "T", "failed", "iterations"):
            getattr(tried, name)[good] = getattr(found, name)[~found.failed]
    return tried


def newton(
    table: SpeciesTable,
    pair: Pair,
    x: Array,
    y: Array,
    amounts: Array,
    *,
    departure: VirialTable | None = None,
    guess: Array | None = None,
    first: int = 0,
) -> Equilibrium:
    """As `equilibrate`, without the bracket; ``first`` 1 leaves out the start near the answer."""
    count = len(x)
    start = np.full(count, START_TEMPERATURE)
    if guess is not None:
        start = np.where((guess > 0.0) & (guess <= HOTTEST_GUESS), guess, START_TEMPERATURE)
    out, T = np.array(amounts, order="C"), np.full(count, np.nan)
    failed, iterations = np.ones(count, np.bool_), np.zeros(count, np.int32)
    fluids = virial.no_fluids() if departure is None else virial.fluids_of(departure)
    x, y = np.ascontiguousarray(x, dtype=float), np.ascontiguousarray(y, dtype=float)
    run(species_of(table), fluids, departure is not None, PAIRS.index(pair), x, y, start, first, out, T, failed, iterations)
    return Equilibrium(out, T, failed, iterations)


def between(
    table: SpeciesTable, pair: Pair, x: Array, y: Array, amounts: Array, *, departure: VirialTable | None = None
) -> Equilibrium:
    """Equilibrium by a bracket on T, or for the pair ST on V; every element apart from the others."""
    steps = np.zeros(len(x), np.int32)
    inner: Pair = "TP" if pair[1] == "P" else "TV"

    def at(z: Array) -> Equilibrium:
        T, size = (y, np.exp(z)) if pair == "ST" else (np.exp(z), y)
        found = newton(table, inner, T, size, amounts, departure=departure)
        steps[:] += found.iterations
        return found

    def miss(z: Array) -> Array:
        T, size = (y, np.exp(z)) if pair == "ST" else (np.exp(z), y)
        found = at(z)
        state = fixed(table, departure, inner, T, size, found.amounts)
        value = {"H": state.h, "U": state.u, "S": state.s}[pair[0]]
        return np.where(found.failed, np.nan, value - x)

    low, high = _ends(miss, _scan(pair, y, amounts))
    z, good = bracketed(miss, low, high, width=1e-16)
    z = np.where(good, z, np.log(START_TEMPERATURE))
    found = at(z)
    failed = found.failed | ~good
    T = np.where(failed, np.nan, y if pair == "ST" else np.exp(z))
    return Equilibrium(np.where(failed[:, None], amounts, found.amounts), T, failed, steps)


def _scan(pair: Pair, y: Array, amounts: Array) -> Array:
    """ln T, or ln V, at which the ends of a bracket are looked for, (N, K)."""
    if pair == "ST":
        whole = np.cumsum(amounts, axis=1)[:, -1]
        return np.log((whole * R * y)[:, None] / SCAN_P[None, :])
    return np.tile(np.log(SCAN_T), (len(y), 1))


def _ends(miss: Callable[[Array], Array], scan: Array) -> tuple[Array, Array]:
    """The last pair of neighbours in ``scan`` between which ``miss`` rises through zero; NaN for none.

    Where ``miss`` is no number at the lower one (no gas is that cold at its pressure), the edge is narrowed down first.
    """
    low, high = np.full(len(scan), np.nan), np.full(len(scan), np.nan)
    before = miss(scan[:, 0])
    for k in range(1, scan.shape[1]):
        value = miss(scan[:, k])
        rises = ~(before > 0.0) & (value >= 0.0)
        low, high = np.where(rises, scan[:, k - 1], low), np.where(rises, scan[:, k], high)
        before = value
    edge = np.isnan(miss(low))
    for _ in range(EDGE if edge.any() else 0):
        middle = 0.5 * (low + high)
        value = miss(middle)
        low = np.where(edge & ~(value > 0.0), middle, low)
        high = np.where(edge & (value > 0.0), middle, high)
        edge &= np.isnan(value) | (value > 0.0)
    return low, high


@compiled
def run(
    t: Species, f: virial.Fluids, real: bool, pair: int, x: Array, y: Array, start: Array, first: int,
    amounts: Array, T: Array, failed: Mask, iterations: npt.NDArray[np.int32],
) -> None:  # fmt: skip
    """Solve a batch; amounts, T, failed and iterations are overwritten where a state is solved."""
    w, v = work_for(t), virial.blend_for(f)
    for i in range(len(x)):
        sound = np.isfinite(x[i]) and 0.0 < y[i] < np.inf and (x[i] > 0.0 or pair not in (TP, TV))
        for attempt in range(first, 2 if sound else 0):
            if not balances(t, amounts[i], w):
                break
            hot = x[i] if pair in (TP, TV) else (y[i] if pair == ST else start[i])
            w.elements[STATE, 0] = np.log(hot)
            w.elements[STATE, 1] = np.log(burned(t, w) * R * hot / START_PRESSURE if pair == ST else y[i])
            if attempt == 1:
                plain(t, w)
            good, done = search(t, f, real, pair, x[i], y[i], PLACINGS if attempt == 0 else 0, MAX_ITERATIONS, w, v)
            iterations[i] += done
            if good and restore(t, w):
                T[i], failed[i] = np.exp(w.elements[STATE, 0]), False
                amounts[i] = w.species[AMOUNT]
                break


@bare
def restore(t: Species, w: Work) -> bool:
    """Close the elements exactly by the smallest change in proportion to the amounts, n_j (1 + sum_e a_je q_e)."""
    s, right, e = w.species, w.elements[RIGHT], len(t.atoms)
    for j in range(s.shape[1]):
        if s[USABLE, j] > 0.0:
            s[AMOUNT, j] = s[REACTING, j] = np.exp(s[LOG, j])
    elements(t, w)
    leave_out(t, w)
    if not solve(w.matrix, right, e):
        return False
    good = True
    for j in range(s.shape[1]):
        shift = 0.0
        for i in range(e):
            shift += t.atoms[i, j] * right[i]
        if s[USABLE, j] > 0.0:
            good = good and abs(shift) < CLOSE
            s[AMOUNT, j] *= 1.0 + shift
    return good
