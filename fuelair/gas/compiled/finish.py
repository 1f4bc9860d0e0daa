"""What a solved state still needs: the last step to first order, closed elements, and every property."""

from __future__ import annotations

import math

from fuelair.gas.compiled.jit import vectorised
from fuelair.gas.compiled.rows import (
    ANSWER,
    B_S,
    B_T,
    BASE,
    C_,
    CO,
    CO2,
    DCP,
    DS,
    DT,
    DZ,
    E_,
    ETA,
    FIXED,
    FIXED_LOG,
    H2,
    H2O,
    H_,
    HP,
    KAPPA,
    MAJOR,
    MISS,
    N2,
    N_,
    NU,
    O2,
    OC,
    P_S,
    P_T,
    P_Z,
    SHARE,
    SIGMA,
    SIZE,
    SP,
    SPECIES,
    ST,
    SUM_Q,
    SV,
    T_,
    TARGET,
    THETA,
    TINY,
    TP,
    UV,
    Z,
)  # fmt: skip
from fuelair.gas.compiled.vector_math import LANES, exp, log, ranged
from fuelair.gas.engine import Array

HAVE_C, HAVE_H, HAVE_N, WEIGHT_C, WEIGHT_H, WEIGHT_N, HAVE_E = B_S, B_T, SUM_Q, P_Z, P_S, P_T, SHARE
"""Rows used anew here."""


@vectorised
def close(f: Array, atoms: Array) -> None:
    """Correct the amounts by the last step and close the elements on those that the states came with.

    ``atoms`` (5, SPECIES): C, H, N, O beyond C, and oxygen excess of the basis and the products.
    """
    for row in (HAVE_C, HAVE_H, HAVE_N, WEIGHT_C, WEIGHT_H, WEIGHT_N):
        for lane in range(LANES):
            f[row * LANES + lane] = TINY
    for j in range(SPECIES):
        c, h, n, o = atoms[0, j], atoms[1, j], atoms[2, j], atoms[3, j]
        for lane in range(LANES):
            amount = f[(MAJOR + j) * LANES + lane]
            own = f[DS * LANES + lane] + o * f[DZ * LANES + lane] + f[(THETA + j) * LANES + lane] * f[DT * LANES + lane]
            f[HAVE_C * LANES + lane] += c * amount * own
            f[HAVE_H * LANES + lane] += h * amount * own
            f[HAVE_N * LANES + lane] += n * amount * own
            f[WEIGHT_C * LANES + lane] += c * amount
            f[WEIGHT_H * LANES + lane] += h * h * amount
            f[WEIGHT_N * LANES + lane] += n * n * amount
    for lane in range(LANES):  # steps of the potentials of carbon, hydrogen and nitrogen
        f[WEIGHT_C * LANES + lane] = -f[HAVE_C * LANES + lane] / f[WEIGHT_C * LANES + lane]
        f[WEIGHT_H * LANES + lane] = -f[HAVE_H * LANES + lane] / f[WEIGHT_H * LANES + lane]
        f[WEIGHT_N * LANES + lane] = -f[HAVE_N * LANES + lane] / f[WEIGHT_N * LANES + lane]
        f[KAPPA * LANES + lane] *= 1.0 + f[WEIGHT_C * LANES + lane]
        f[HAVE_C * LANES + lane], f[HAVE_H * LANES + lane], f[HAVE_N * LANES + lane] = 0.0, 0.0, 0.0
        f[HAVE_E * LANES + lane] = 0.0
    for j in range(SPECIES):
        c, h, n, o, e = atoms[0, j], atoms[1, j], atoms[2, j], atoms[3, j], atoms[4, j]
        for lane in range(LANES):
            step = f[DS * LANES + lane] + o * f[DZ * LANES + lane] + f[(THETA + j) * LANES + lane] * f[DT * LANES + lane]
            step = step + c * f[WEIGHT_C * LANES + lane] + h * f[WEIGHT_H * LANES + lane] + n * f[WEIGHT_N * LANES + lane]
            amount = f[(MAJOR + j) * LANES + lane] * (1.0 + step)
            f[(MAJOR + j) * LANES + lane] = amount
            f[HAVE_C * LANES + lane] += c * amount
            f[HAVE_H * LANES + lane] += h * amount
            f[HAVE_N * LANES + lane] += n * amount
            f[HAVE_E * LANES + lane] += e * amount
    for lane in range(LANES):
        co, h2, o2 = f[(MAJOR + CO) * LANES + lane], f[(MAJOR + H2) * LANES + lane], f[(MAJOR + O2) * LANES + lane]
        co2, h2o = f[(MAJOR + CO2) * LANES + lane], f[(MAJOR + H2O) * LANES + lane]
        # carbon, hydrogen and nitrogen where they are most; carbon dioxide, water and nitrogen have no oxygen excess
        c = f[C_ * LANES + lane] - f[HAVE_C * LANES + lane]
        h = 0.5 * (f[H_ * LANES + lane] - f[HAVE_H * LANES + lane])
        to_co2 = c if co2 > co else 0.0
        to_h2o = h if h2o > h2 else 0.0
        left = f[E_ * LANES + lane] - (f[HAVE_E * LANES + lane] - (c - to_co2) - (h - to_h2o))
        lean = min(o2 - co, o2 - h2)
        to_o2 = 0.5 * left if lean > 0.0 else 0.0
        rest = left - 2.0 * to_o2
        from_co = rest if co > h2 else 0.0
        f[(MAJOR + CO) * LANES + lane] = max(co + (c - to_co2) - from_co, 0.0)
        f[(MAJOR + CO2) * LANES + lane] = max(co2 + to_co2 + from_co, 0.0)
        f[(MAJOR + H2) * LANES + lane] = max(h2 + (h - to_h2o) - (rest - from_co), 0.0)
        f[(MAJOR + H2O) * LANES + lane] = max(h2o + to_h2o + (rest - from_co), 0.0)
        f[(MAJOR + O2) * LANES + lane] = max(o2 + to_o2, 0.0)
        f[(MAJOR + N2) * LANES + lane] += 0.5 * (f[N_ * LANES + lane] - f[HAVE_N * LANES + lane])


@vectorised
def properties(f: Array, pair: int, gas_constant: float, p0: float) -> None:
    """Every property of the closed composition, moved at fixed composition onto the pair; the step that took goes to `MISS`."""
    at_pressure = pair in (TP, HP, SP)
    entropy = pair in (SP, SV)
    free = 1.0 if pair in (HP, UV, SP, SV) else 0.0
    per_volume = 0.0 if at_pressure else 1.0
    energy_of_volume = 1.0 if pair == UV else 0.0
    for lane in range(LANES):
        f[SUM_Q * LANES + lane] = 0.0
        f[HAVE_C * LANES + lane] = 0.0
        f[HAVE_H * LANES + lane] = f[FIXED * LANES + lane]
    for j in range(SPECIES):
        for lane in range(LANES):
            amount, theta, cp = f[(MAJOR + j) * LANES + lane], f[(THETA + j) * LANES + lane], f[(DCP + j) * LANES + lane]
            f[SUM_Q * LANES + lane] += amount * (theta + (cp - theta) * f[DT * LANES + lane])
            f[HAVE_C * LANES + lane] += amount * cp
            f[HAVE_H * LANES + lane] += amount
    for lane in range(LANES):
        T, moles = f[T_ * LANES + lane], f[HAVE_H * LANES + lane]
        log_t = log(T)
        B = BASE * LANES + lane
        cp, h, s = ranged(
            f[B], f[B + LANES], f[B + 2 * LANES], f[B + 3 * LANES], f[B + 4 * LANES], f[B + 5 * LANES],
            f[B + 6 * LANES], f[B + 7 * LANES], f[B + 8 * LANES], f[B + 9 * LANES], f[B + 10 * LANES], f[B + 11 * LANES],
            f[B + 12 * LANES], f[B + 13 * LANES], f[B + 14 * LANES], f[B + 15 * LANES], f[B + 16 * LANES], f[B + 17 * LANES],
            T, log_t,
        )  # fmt: skip
        cp = cp + f[HAVE_C * LANES + lane]
        h = T * (h + f[SUM_Q * LANES + lane])
        size, target = f[SIZE * LANES + lane], f[TARGET * LANES + lane]
        found = f[SIGMA * LANES + lane]
        sigma = log(moles) - size if at_pressure else (found if pair == ST else size - log_t)  # ln s
        carbon, hydrogen, nitrogen = f[C_ * LANES + lane], f[H_ * LANES + lane], f[N_ * LANES + lane]
        mixing = carbon * log(f[KAPPA * LANES + lane] + TINY) + hydrogen * log(f[ETA * LANES + lane] + TINY)
        mixing = mixing + nitrogen * log(f[NU * LANES + lane] + TINY) + f[OC * LANES + lane] * f[Z * LANES + lane]
        s = s + f[SUM_Q * LANES + lane] - mixing - f[FIXED_LOG * LANES + lane]
        s = s + f[FIXED * LANES + lane] * found + moles * (sigma - found)
        shift = (target - s) / moles if pair == ST else 0.0  # of ln v: what the search left of the entropy
        sigma = sigma + shift
        s = s + moles * shift
        heat = cp - moles * per_volume
        by_energy = (target - h + energy_of_volume * moles * T) / (heat * T)
        by_entropy = (target - s) / heat
        step = free * (by_entropy if entropy else by_energy)
        h = h + cp * T * step
        s = s + heat * step
        T = T * (1.0 + step)
        pressure = p0 * (moles * exp(-sigma) if pair == ST or at_pressure else moles * exp(log(T) - size))
        rt = gas_constant * moles * T
        f[MISS * LANES + lane] = step
        f[ANSWER * LANES + lane] = T
        f[(ANSWER + 1) * LANES + lane] = pressure
        f[(ANSWER + 2) * LANES + lane] = rt / pressure
        f[(ANSWER + 3) * LANES + lane] = gas_constant * h - rt
        f[(ANSWER + 4) * LANES + lane] = gas_constant * h
        f[(ANSWER + 5) * LANES + lane] = gas_constant * s
        f[(ANSWER + 6) * LANES + lane] = gas_constant * cp
        f[(ANSWER + 7) * LANES + lane] = math.sqrt(abs(cp / (cp - moles) * rt))
