"""Equilibrium of combustion gas by the oxygen potential: closed-form element balances inside one small Newton.

Every species is a reaction product of the basis CO, H2, O2, N2. With s = p0 V/(R T), o = (p_O2/p0)^(1/2),
h = (p_H2/p0)^(1/2), n = (p_N2/p0)^(1/2), c = p_CO/p0 the amounts are

    n_j = s K_j(T) c^C h^H n^N o^(O - C)

so that for given T, s, o the balances of carbon, hydrogen and nitrogen are closed forms: linear for c, quadratic
for h and n. One scalar equation is left, for the oxygen *excess* E = O - 2 C - H/2 (which keeps its digits at exact
stoichiometry, where O itself cancels):

    f(ln o) = ln(sum of e_j n_j > 0, plus -E if rich) - ln(sum of -e_j n_j > 0, plus E if lean) = 0

and beside it, as the pair of properties demands, one for the amount of gas at the pressure and one for energy or
entropy. Methane, ammonia and hydrogen cyanide couple the balances; they enter the closed forms with the potentials
of the step before, which converges while they are a small share of their elements. Where they are not (rich, cold,
dense gas) the state is handed back as `WIDE`, for the generic solver. Sulfur is carried as SO2, and what is inert
stays as it is.

Sixteen states run side by side in vector lanes; a lane that is done takes the next state of its batch. No lane
sees another, so no bit depends on the neighbours.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from fuelair.gas.compiled.finish import close, properties
from fuelair.gas.compiled.guess import load
from fuelair.gas.compiled.jit import compiled, inlined
from fuelair.gas.compiled.rows import (
    ANSWER,
    BLOCK,
    BOUNDED,
    C_,
    COUNT,
    DONE,
    DT,
    ETA,
    FAILED,
    FIXED,
    H_,
    LAG,
    LAGGED,
    LOADED,
    MAJOR,
    MAX_STEPS,
    MISS,
    N_,
    NU,
    ROWS,
    SHARE,
    SPECIES,
    START,
    STAYS,
    T_,
    TOLERANCE,
    WIDE,
    WIDEST,
)  # fmt: skip
from fuelair.gas.compiled.steps import step
from fuelair.gas.compiled.vector_math import LANES
from fuelair.gas.engine import Array, Codes

Indices = npt.NDArray[np.int64]


@inlined
def _hand_over(
    f: Array, owner: Indices, filled: int, pair: int, atoms: Array, columns: Indices, stays: Indices, gas_constant: float,
    p0: float, out: Array, found: Array, code: Codes,
) -> None:  # fmt: skip
    """Finish the states that stand in ``f`` and write them out."""
    close(f, atoms)
    properties(f, pair, gas_constant, p0)
    for lane in range(filled):
        i = owner[lane]
        if not abs(f[MISS * LANES + lane]) <= BOUNDED:
            code[i] = FAILED
            continue
        code[i] = DONE
        for k in range(found.shape[1]):
            found[i, k] = 0.0
        for j in range(SPECIES):
            found[i, columns[j]] = f[(MAJOR + j) * LANES + lane]
        for j in range(stays.shape[0]):
            found[i, stays[j]] = f[(STAYS + j) * LANES + lane]
        for k in range(8):
            out[k, i] = f[(ANSWER + k) * LANES + lane]


@compiled
def solve(
    pair: int, x: Array, y: Array, amounts: Array, linear: Array, base: Array, tab: Array,
    atoms: Array, columns: Indices, stays: Indices, constants: tuple[float, float],
    out: Array, found: Array, code: Codes, steps: npt.NDArray[np.int32],
) -> None:  # fmt: skip
    """Equilibrium of a batch.

    Parameters
    ----------
    pair, x, y, amounts : a code of `TP` to `ST`, arrays (N,) in SI, amounts (N, S) [kmol/kg].
    linear, base, tab, atoms, columns, stays : see `batch_gas.Constants`. constants : molar gas constant [J/(kmol K)]
        and reference pressure [Pa].
    out, found, code, steps : results, written in place where a state is solved: (8, N) T p v u h s cp and speed of sound,
        (N, S) amounts; always how it ended, and the steps it took.
    """
    n = x.shape[0]
    gas_constant, p0 = constants
    w, q, f = np.zeros(ROWS * LANES), np.zeros(LOADED * BLOCK), np.zeros(ROWS * LANES)
    codes = np.zeros(BLOCK, np.int8)
    state, owner = np.full(LANES, -1), np.zeros(LANES, np.int64)
    q[T_ * BLOCK : (T_ + 1) * BLOCK] = START
    following, loaded, busy, filled = 0, 0, 0, 0
    for lane in range(LANES):  # an idle lane computes something harmless
        for row in (T_, C_, H_, N_, FIXED, ETA, NU):
            w[row * LANES + lane] = START if row == T_ else 1.0
            f[row * LANES + lane] = w[row * LANES + lane]
        for row in range(MAJOR, MAJOR + SPECIES):
            f[row * LANES + lane] = 1.0
    while following < n or busy > 0:
        for lane in range(LANES):
            while state[lane] < 0 and following < n:
                if following == loaded:
                    size = min(BLOCK, n - loaded)
                    load(q, codes, loaded, size, pair, x, y, amounts, linear, base, tab, gas_constant, p0)
                    loaded += size
                i = following
                k = i % BLOCK
                following += 1
                if codes[k] == DONE:
                    for row in range(LOADED):
                        w[row * LANES + lane] = q[row * BLOCK + k]
                    w[COUNT * LANES + lane] = 0.0
                    state[lane] = i
                    busy += 1
                else:
                    code[i] = codes[k]
                    steps[i] = 0
        step(w, tab, pair)
        for lane in range(LANES):
            i = state[lane]
            if i < 0:
                continue
            w[COUNT * LANES + lane] += 1.0
            miss, share = w[MISS * LANES + lane], w[SHARE * LANES + lane]
            settled = miss < TOLERANCE and (share > WIDEST or w[LAGGED * LANES + lane] < LAG)
            if not settled and w[COUNT * LANES + lane] < MAX_STEPS and miss < 1e300:
                continue
            steps[i] = int(w[COUNT * LANES + lane])
            state[lane] = -1
            busy -= 1
            if share > WIDEST:
                code[i] = WIDE
            elif not settled:
                code[i] = FAILED
            else:
                for row in range(DT + 1):
                    f[row * LANES + filled] = w[row * LANES + lane]
                for row in range(MAJOR, ROWS):
                    f[row * LANES + filled] = w[row * LANES + lane]
                owner[filled] = i
                filled += 1
                if filled == LANES:
                    _hand_over(f, owner, filled, pair, atoms, columns, stays, gas_constant, p0, out, found, code)
                    filled = 0
    if filled > 0:
        _hand_over(f, owner, filled, pair, atoms, columns, stays, gas_constant, p0, out, found, code)
