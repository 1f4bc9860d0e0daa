"""What a block of states brings: atoms, unreacted basis, and the first guess from complete combustion."""

from __future__ import annotations

import math

from fuelair.gas.compiled.jit import inlined, vectorised
from fuelair.gas.compiled.rows import (
    BASE,
    BLOCK,
    C_,
    COLDEST,
    DONE,
    E_,
    ETA,
    FAILED,
    FIXED,
    FIXED_LOG,
    H_,
    HOTTEST,
    HP,
    N_,
    NU,
    OC,
    PARTS,
    SIGMA,
    SIZE,
    SOOT,
    SP,
    ST,
    START,
    STAYS,
    SUMS,
    T_,
    TARGET,
    TINY,
    TP,
    TV,
    UNFIT,
    Z,
)
from fuelair.gas.compiled.vector_math import exp, log, ranged
from fuelair.gas.complete import CARBON_LIMIT
from fuelair.gas.engine import Array, Codes


@vectorised
def _sums(q: Array, amounts: Array, first: int, size: int, linear: Array) -> None:
    """Atoms, oxygen excess and fixed species of a block of states, into its rows, species added one after the other."""
    for m in range(PARTS):
        row = (SUMS + m) * BLOCK
        for k in range(BLOCK):
            q[row + k] = 0.0
    for j in range(amounts.shape[1]):
        for k in range(size):
            q[Z * BLOCK + k] = amounts[first + k, j]
        for m in range(PARTS):
            row, weight = (SUMS + m) * BLOCK, linear[j, m]
            if weight != 0.0:
                for k in range(BLOCK):
                    q[row + k] += q[Z * BLOCK + k] * weight


@vectorised
def _two_constants(q: Array, tab: Array) -> None:
    """Equilibrium constants of carbon dioxide and water at the first temperatures, into the rows of eta and nu."""
    for r in range(2):
        k, row = 18 * r, (ETA + r) * BLOCK
        a0, a1, a2, a3, a4 = tab[k], tab[k + 1], tab[k + 2], tab[k + 3], tab[k + 4]
        a5, a6, a7, a8 = tab[k + 5], tab[k + 6], tab[k + 7], tab[k + 8]
        b0, b1, b2, b3, b4 = tab[k + 9], tab[k + 10], tab[k + 11], tab[k + 12], tab[k + 13]
        b5, b6, b7, b8 = tab[k + 14], tab[k + 15], tab[k + 16], tab[k + 17]
        for lane in range(BLOCK):
            T = q[T_ * BLOCK + lane]
            _, h, s = ranged(a0, a1, a2, a3, a4, a5, a6, a7, a8, b0, b1, b2, b3, b4, b5, b6, b7, b8, T, log(T))
            q[row + lane] = exp(s - h)


@vectorised
def _first_guess(q: Array, at_pressure: float) -> None:
    """First ln o and ln s from complete combustion.

    Lean: the oxygen left over; rich: the water-gas quadratic; near stoichiometric the cube root that dissociation
    of carbon dioxide and water to equal parts leaves.
    """
    for k in range(BLOCK):
        carbon, half, nitrogen = q[C_ * BLOCK + k], 0.5 * q[H_ * BLOCK + k], q[N_ * BLOCK + k]
        excess, sigma = q[E_ * BLOCK + k], q[SIGMA * BLOCK + k]
        x1, x2, x3 = q[STAYS * BLOCK + k], q[(STAYS + 1) * BLOCK + k], q[(STAYS + 2) * BLOCK + k]
        k1, k2 = q[ETA * BLOCK + k], q[NU * BLOCK + k]
        fixed = x1 + x2 + x3
        spare, lack = max(excess, 0.0), max(-excess, 0.0)
        whole = carbon + half + 0.5 * nitrogen + fixed + 0.5 * spare + TINY
        sigma = sigma + at_pressure * log(whole)
        per_s = exp(-sigma)
        near = exp(log(0.5 * (carbon / k1 + half / k2) * per_s + TINY) / 3.0)
        lean = math.sqrt(0.5 * spare * per_s)
        a, b, c = lack * k1 * k2 + TINY, lack * (k1 + k2) - carbon * k2 - half * k1, min(lack - carbon - half, 0.0)
        root = math.sqrt(b * b - 4.0 * a * c)
        up = max(b, 0.0)
        rich_up = -2.0 * c / (up + root + TINY)
        rich_down = 0.5 * (root - min(b, 0.0)) / a
        rich = rich_up if b > 0.0 else rich_down
        o = max(lean, near) if excess >= 0.0 else min(rich, near)
        o = min(max(o, 1e-140), 1e15)
        q[FIXED * BLOCK + k] = fixed
        q[FIXED_LOG * BLOCK + k] = x1 * log(x1 + TINY) + x2 * log(x2 + TINY) + x3 * log(x3 + TINY)
        q[SIGMA * BLOCK + k] = sigma
        q[Z * BLOCK + k] = log(o)
        q[ETA * BLOCK + k] = math.sqrt(half * per_s / (1.0 + k2 * o))
        q[NU * BLOCK + k] = math.sqrt(0.5 * nitrogen * per_s)


@vectorised
def _basis(q: Array, base: Array) -> None:
    """Coefficients of the gas as if all of it were CO, H2, O2, N2 and what stays."""
    for c in range(18):
        row = (BASE + c) * BLOCK
        b0, b1, b2, b3 = base[0, c], 0.5 * base[1, c], 0.5 * base[2, c], 0.5 * base[3, c]
        b4, b5, b6 = base[4, c], base[5, c], base[6, c]
        for k in range(BLOCK):
            value = q[C_ * BLOCK + k] * b0 + q[H_ * BLOCK + k] * b1 + q[OC * BLOCK + k] * b2 + q[N_ * BLOCK + k] * b3
            x1, x2, x3 = q[STAYS * BLOCK + k], q[(STAYS + 1) * BLOCK + k], q[(STAYS + 2) * BLOCK + k]
            q[row + k] = value + x1 * b4 + x2 * b5 + x3 * b6


@inlined
def load(
    q: Array, codes: Codes, first: int, size: int, pair: int, x: Array, y: Array, start: Array,
    amounts: Array, linear: Array, base: Array, tab: Array, gas_constant: float, p0: float,
) -> None:  # fmt: skip
    """Fill the rows of a block of states; ``codes`` says where there is nothing that this method can solve."""
    _sums(q, amounts, first, size, linear)
    at_pressure = pair in (TP, HP, SP)
    for k in range(size):
        i = first + k
        excess, oc = q[E_ * BLOCK + k], q[OC * BLOCK + k]
        carbon, half = q[C_ * BLOCK + k], 0.5 * q[H_ * BLOCK + k]
        known = x[i] if pair in (TP, TV) else (y[i] if pair == ST else start[i])
        sound = math.isfinite(x[i]) and math.isfinite(y[i]) and y[i] > 0.0
        fine = (
            sound
            and known > COLDEST
            and known < HOTTEST
            and oc > 0.0
            and carbon + half + excess > 0.0
            and -excess < carbon + half
        )
        codes[k] = SOOT if carbon > (oc + carbon) * CARBON_LIMIT else (DONE if fine else (FAILED if sound else UNFIT))
        T = known if fine else START
        size_ = math.log((y[i] / p0 if at_pressure else p0 * y[i] / gas_constant) if fine else 1.0)
        q[T_ * BLOCK + k] = T
        q[TARGET * BLOCK + k] = x[i] / gas_constant if fine else 1.0
        q[SIZE * BLOCK + k] = 0.0 if pair == ST else size_
        # ln s; at a pressure less the amount of gas, which `_first_guess` adds
        q[SIGMA * BLOCK + k] = -size_ if at_pressure else (-math.log(5e6 / p0) if pair == ST else size_ - math.log(T))
    _two_constants(q, tab)
    _first_guess(q, 1.0 if at_pressure or pair == ST else 0.0)
    _basis(q, base)
