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
    SV,
    T_,
    TARGET,
    TINY,
    TP,
    TV,
    UNFIT,
    UV,
    Z,
)
from fuelair.gas.compiled.vector_math import exp, log, ranged
from fuelair.gas.complete import CARBON_LIMIT
from fuelair.gas.engine import Array, Codes

DISSOCIATES, SHARE_ABOVE = 2500.0, 0.6
LOWEST_START, HIGHEST_START = 250.0, 4500.0


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
def _size(q: Array, at_pressure: float) -> None:
    """Fixed species, and at a pressure the amount of gas in ln s, from complete combustion."""
    for k in range(BLOCK):
        x1, x2, x3 = q[STAYS * BLOCK + k], q[(STAYS + 1) * BLOCK + k], q[(STAYS + 2) * BLOCK + k]
        q[FIXED * BLOCK + k] = x1 + x2 + x3
        q[FIXED_LOG * BLOCK + k] = x1 * log(x1 + TINY) + x2 * log(x2 + TINY) + x3 * log(x3 + TINY)
        whole = q[C_ * BLOCK + k] + 0.5 * (q[H_ * BLOCK + k] + q[N_ * BLOCK + k] + max(q[E_ * BLOCK + k], 0.0)) + x1 + x2 + x3
        q[SIGMA * BLOCK + k] += at_pressure * log(whole + TINY)


@vectorised
def _first_guess(q: Array) -> None:
    """First ln o from complete combustion, and the potentials of hydrogen and nitrogen that go with it.

    Lean: the oxygen left over; rich: the water-gas quadratic; near stoichiometric the cube root that dissociation
    of carbon dioxide and water to equal parts leaves.
    """
    for k in range(BLOCK):
        carbon, half, nitrogen = q[C_ * BLOCK + k], 0.5 * q[H_ * BLOCK + k], q[N_ * BLOCK + k]
        excess, per_s = q[E_ * BLOCK + k], exp(-q[SIGMA * BLOCK + k])
        k1, k2 = q[ETA * BLOCK + k], q[NU * BLOCK + k]
        spare, lack = max(excess, 0.0), max(-excess, 0.0)
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


@vectorised
def _temperature(q: Array, tab: Array, entropy: bool, per_volume: float, of_volume: float) -> None:
    """A better first temperature: one step from `START` at the composition of complete combustion.

    ``per_volume`` 1 where the volume is given; ``of_volume`` 1 where the energy is the internal one. Above `DISSOCIATES` the gas
    stays behind complete combustion; `SHARE_ABOVE` of the way is about what is left.
    """
    log_start = math.log(START)
    c1, h1, s1 = ranged(
        tab[0], tab[1], tab[2], tab[3], tab[4], tab[5], tab[6], tab[7], tab[8],
        tab[9], tab[10], tab[11], tab[12], tab[13], tab[14], tab[15], tab[16], tab[17], START, log_start,
    )  # fmt: skip
    c2, h2, s2 = ranged(
        tab[18], tab[19], tab[20], tab[21], tab[22], tab[23], tab[24], tab[25], tab[26],
        tab[27], tab[28], tab[29], tab[30], tab[31], tab[32], tab[33], tab[34], tab[35], START, log_start,
    )  # fmt: skip
    for k in range(BLOCK):
        carbon, half, nitrogen = q[C_ * BLOCK + k], 0.5 * q[H_ * BLOCK + k], 0.5 * q[N_ * BLOCK + k]
        spare, lack = 0.5 * max(q[E_ * BLOCK + k], 0.0), max(-q[E_ * BLOCK + k], 0.0)
        fixed, sigma = q[FIXED * BLOCK + k], q[SIGMA * BLOCK + k]
        burned = max(1.0 - lack / (carbon + half + TINY), 0.0)
        n1, n2, n3, n4 = carbon * burned, half * burned, carbon * (1.0 - burned), half * (1.0 - burned)
        moles = carbon + half + nitrogen + spare + fixed
        B = BASE * BLOCK + k
        cp, h, s = ranged(
            q[B], q[B + BLOCK], q[B + 2 * BLOCK], q[B + 3 * BLOCK], q[B + 4 * BLOCK], q[B + 5 * BLOCK],
            q[B + 6 * BLOCK], q[B + 7 * BLOCK], q[B + 8 * BLOCK], q[B + 9 * BLOCK], q[B + 10 * BLOCK], q[B + 11 * BLOCK],
            q[B + 12 * BLOCK], q[B + 13 * BLOCK], q[B + 14 * BLOCK], q[B + 15 * BLOCK], q[B + 16 * BLOCK], q[B + 17 * BLOCK],
            START, log_start,
        )  # fmt: skip
        heat = cp + n1 * c1 + n2 * c2 - per_volume * moles
        energy = START * (h + n1 * h1 + n2 * h2 - of_volume * moles)
        mixing = n1 * log(n1 + TINY) + n2 * log(n2 + TINY) + n3 * log(n3 + TINY) + n4 * log(n4 + TINY)
        mixing = mixing + nitrogen * log(nitrogen + TINY) + spare * log(spare + TINY) + q[FIXED_LOG * BLOCK + k]
        disorder = s + n1 * s1 + n2 * s2 - mixing + moles * sigma
        target = q[TARGET * BLOCK + k]
        by_energy = START + (target - energy) / heat
        by_entropy = START * exp(min(max((target - disorder) / heat, -2.0), 1.0))
        T = by_entropy if entropy else by_energy
        T = T if T < DISSOCIATES else DISSOCIATES + SHARE_ABOVE * (T - DISSOCIATES)
        T = min(max(T, LOWEST_START), HIGHEST_START)
        q[T_ * BLOCK + k] = T
        by_volume = q[SIZE * BLOCK + k] - log(T)
        q[SIGMA * BLOCK + k] = by_volume if per_volume > 0.0 else sigma


@inlined
def load(
    q: Array, codes: Codes, first: int, size: int, pair: int, x: Array, y: Array,
    amounts: Array, linear: Array, base: Array, tab: Array, gas_constant: float, p0: float,
) -> None:  # fmt: skip
    """Fill the rows of a block of states; ``codes`` says where there is nothing that this method can solve."""
    _sums(q, amounts, first, size, linear)
    at_pressure = pair in (TP, HP, SP)
    for k in range(size):
        i = first + k
        excess, oc = q[E_ * BLOCK + k], q[OC * BLOCK + k]
        carbon, half = q[C_ * BLOCK + k], 0.5 * q[H_ * BLOCK + k]
        known = x[i] if pair in (TP, TV) else (y[i] if pair == ST else START)
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
        # ln s; at a pressure less the amount of gas, which `_size` adds
        q[SIGMA * BLOCK + k] = -size_ if at_pressure else (-math.log(5e6 / p0) if pair == ST else size_ - math.log(T))
    _size(q, 1.0 if at_pressure or pair == ST else 0.0)
    _basis(q, base)
    if pair in (HP, UV, SP, SV):
        _temperature(q, tab, pair in (SP, SV), 0.0 if at_pressure else 1.0, 1.0 if pair == UV else 0.0)
    _two_constants(q, tab)
    _first_guess(q)
