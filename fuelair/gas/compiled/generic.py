"""Generic equilibrium, compiled: `fuelair.gas.gibbs.equilibrate` for any species table, one state after the other."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from fuelair.gas.compiled import virial
from fuelair.gas.compiled.jit import bare, compiled
from fuelair.gas.compiled.layout import PAIRS, ST, Species, Work, species_of, work_for, STATE, AMOUNT, LOG, USABLE
from fuelair.gas.compiled.newton import PLACINGS, search
from fuelair.gas.compiled.start import balances, burned
from fuelair.gas.engine import Array, Mask, Pair
from fuelair.gas.gibbs import HOTTEST_GUESS, MAX_ITERATIONS, START_TEMPERATURE, Equilibrium
from fuelair.gas.polynomials import R
from fuelair.gas.real_gas import VirialTable
from fuelair.gas.species import SpeciesTable
START_PRESSURE=5e6

@bare
def solve_one(t: Species, f: virial.Fluids, real: bool, pair: int, x: float, y: float, T: float, w: Work, v: virial.Blend) -> tuple[bool, int]:
    w.elements[STATE,0] = np.log(T)
    w.elements[STATE,1] = np.log(y) if pair != ST else np.log(burned(t, w) * R * T / START_PRESSURE)
    return search(t, f, real, pair, x, y, PLACINGS, MAX_ITERATIONS, w, v)


@compiled
def run(t: Species, f: virial.Fluids, real: bool, pair: int, x: Array, y: Array, amounts: Array, start: Array, out: Array, T: Array, failed: Mask, iterations: npt.NDArray[np.int32], w: Work, v: virial.Blend) -> None:
    for i in range(len(x)):
        good = balances(t, amounts[i], w) and np.isfinite(x[i]) and np.isfinite(y[i]) and y[i] > 0.0
        if good:
            good, iterations[i] = solve_one(t, f, real, pair, x[i], y[i], start[i], w, v)
        failed[i] = not good
        T[i] = np.exp(w.elements[STATE,0])
        for j in range(out.shape[1]):
            out[i, j] = np.exp(w.species[LOG,j]) if w.species[USABLE,j] else w.species[AMOUNT,j]


def equilibrate(table: SpeciesTable, pair: Pair, x: Array, y: Array, amounts: Array, *, departure: VirialTable | None = None, guess: Array | None = None) -> Equilibrium:
    n = len(x)
    T0 = np.full(n, START_TEMPERATURE)
    if guess is not None:
        T0 = np.where((guess > 0.0) & (guess <= HOTTEST_GUESS), guess, START_TEMPERATURE)
    if pair[0]=="T": T0 = x.copy()
    if pair=="ST": T0=y.copy()
    t = species_of(table)
    f = virial.fluids_of(departure) if departure is not None else virial.no_fluids()
    out, T, failed, it = np.zeros_like(amounts), np.zeros(n), np.zeros(n, bool), np.zeros(n, np.int32)
    run(t, f, departure is not None, PAIRS.index(pair), x, y, amounts, T0, out, T, failed, it, work_for(t), virial.blend_for(f))
    return Equilibrium(out, T, failed, it)
