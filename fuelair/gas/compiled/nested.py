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

from fuelair.gas.compiled.guess import load
from fuelair.gas.compiled.jit import compiled, vectorised
from fuelair.gas.compiled.rows import (
    BLOCK,
    C_,
    CO,
    CO2,
    COUNT,
    DONE,
    DS,
    DT,
    DZ,
    E_,
    ETA,
    FAILED,
    FIXED,
    H2,
    H2O,
    H_,
    K_ROW,
    LAG,
    LAGGED,
    LOADED,
    MAJOR,
    MAX_STEPS,
    MISS,
    N2,
    N_,
    NU,
    O2,
    REACTIONS,
    ROWS,
    SHARE,
    SPECIES,
    START,
    STAYS,
    T_,
    THETA,
    TINY,
    TOLERANCE,
    WIDE,
    WIDEST,
)
from fuelair.gas.compiled.steps import step
from fuelair.gas.compiled.vector_math import LANES
from fuelair.gas.engine import Array, Codes

Indices = npt.NDArray[np.int64]


@vectorised
def _finish(w: Array, lane: int, atoms: Array, n: Array, own: Array) -> None:
    """Amounts ``n`` of a lane, corrected by its last step, the elements closed on those that it came with.

    ``atoms`` (5, SPECIES): C, H, N, O beyond C, and oxygen excess of the basis and the products.
    """
    d_z, d_s, d_t = w[DZ * LANES + lane], w[DS * LANES + lane], w[DT * LANES + lane]
    for j in range(4):
        n[j] = w[(MAJOR + j) * LANES + lane]
        own[j] = 0.0
    for j in range(REACTIONS):
        n[4 + j] = w[(K_ROW + j) * LANES + lane]
        own[4 + j] = w[(THETA + j) * LANES + lane]
    pull_c = pull_h = pull_n = weight_c = weight_h = weight_n = TINY
    for j in range(SPECIES):
        own[j] = d_s + atoms[3, j] * d_z + own[j] * d_t
        a_c, a_h, a_n = atoms[0, j] * n[j], atoms[1, j] * n[j], atoms[2, j] * n[j]
        pull_c += a_c * own[j]
        pull_h += a_h * own[j]
        pull_n += a_n * own[j]
        weight_c += a_c
        weight_h += a_h * atoms[1, j]
        weight_n += a_n * atoms[2, j]
    d_c, d_h, d_n = -pull_c / weight_c, -pull_h / weight_h, -pull_n / weight_n
    have_c = have_h = have_n = 0.0
    for j in range(SPECIES):
        n[j] *= 1.0 + (own[j] + atoms[0, j] * d_c + atoms[1, j] * d_h + atoms[2, j] * d_n)
        have_c += atoms[0, j] * n[j]
        have_h += atoms[1, j] * n[j]
        have_n += atoms[2, j] * n[j]
    n[CO2 if n[CO2] > n[CO] else CO] += w[C_ * LANES + lane] - have_c
    n[H2O if n[H2O] > n[H2] else H2] += 0.5 * (w[H_ * LANES + lane] - have_h)
    n[N2] += 0.5 * (w[N_ * LANES + lane] - have_n)
    have_e = 0.0
    for j in range(SPECIES):
        have_e += n[j] * atoms[4, j]
    left = w[E_ * LANES + lane] - have_e
    if n[O2] > n[CO] and n[O2] > n[H2]:
        n[O2] += 0.5 * left
    elif n[CO] > n[H2]:
        n[CO] -= left
        n[CO2] += left
    else:
        n[H2] -= left
        n[H2O] += left


@compiled
def solve(
    pair: int, x: Array, y: Array, amounts: Array, linear: Array, base: Array, tab: Array,
    atoms: Array, columns: Indices, stays: Indices, constants: tuple[float, float],
    start: Array, out: Array, T: Array, code: Codes, steps: npt.NDArray[np.int32],
) -> None:  # fmt: skip
    """Equilibrium of a batch.

    Parameters
    ----------
    pair, x, y, amounts : a code of `TP` to `ST`, arrays (N,) in SI, amounts (N, S) [kmol/kg].
    linear, base, tab, atoms, columns, stays : see `batch_gas.Constants`. constants : molar gas constant [J/(kmol K)]
        and reference pressure [Pa].
    start : (N,) temperature to start from [K].
    out, T, code, steps : results, written in place.
    """
    n = x.shape[0]
    gas_constant, p0 = constants
    w, q = np.zeros(ROWS * LANES), np.zeros(LOADED * BLOCK)
    codes = np.zeros(BLOCK, np.int8)
    found, own = np.zeros(SPECIES), np.zeros(SPECIES)
    state = np.full(LANES, -1)
    q[T_ * BLOCK : (T_ + 1) * BLOCK] = START
    following, loaded, busy = 0, 0, 0
    for lane in range(LANES):  # an idle lane computes something harmless
        for row in (T_, C_, H_, N_, FIXED, ETA, NU):
            w[row * LANES + lane] = START if row == T_ else 1.0
    while following < n or busy > 0:
        for lane in range(LANES):
            while state[lane] < 0 and following < n:
                if following == loaded:
                    size = min(BLOCK, n - loaded)
                    load(q, codes, loaded, size, pair, x, y, start, amounts, linear, base, tab, gas_constant, p0)
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
            ended = -1
            if miss < TOLERANCE and share > WIDEST:
                ended = WIDE
            elif miss < TOLERANCE and w[LAGGED * LANES + lane] < LAG:
                ended = DONE
                _finish(w, lane, atoms, found, own)
                out[i, :] = 0.0
                for j in range(SPECIES):
                    out[i, columns[j]] = max(found[j], 0.0)
                for j in range(stays.shape[0]):
                    out[i, stays[j]] = w[(STAYS + j) * LANES + lane]
                T[i] = w[T_ * LANES + lane]
            elif w[COUNT * LANES + lane] >= MAX_STEPS or not miss < 1e300:
                ended = WIDE if share > WIDEST else FAILED
            if ended >= 0:
                code[i] = ended
                steps[i] = int(w[COUNT * LANES + lane])
                state[lane] = -1
                busy -= 1
