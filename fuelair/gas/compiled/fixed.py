"""States of fixed composition from any pair of properties, sixteen side by side.

The same mathematics as the array code in `fuelair.gas.frozen`, compiled: mixed polynomials, Newton on ln T or T, each lane
held once it has settled, so that no state sees its neighbours.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from fuelair.gas.compiled.jit import compiled, vectorised
from fuelair.gas.compiled.vector_math import LANES, exp, log, ranged
from fuelair.gas.engine import Array, Mask

TP, TV, HP, UV, SP, SV, ST = range(7)
WIDTH = 19
"""Columns of the mixing table: 18 coefficients, and 1 for the amount of gas."""
T, P, V, U, H, S, CP, SOUND = range(8)
"""Rows of the results."""
TOLERANCE, ROUNDING = 1e-14, 1e-12
MAX_STEPS = 60
START = 1000.0
SLACK_BELOW, SLACK_ABOVE = 0.5, 1.2
TINY = 1e-300

# Rows of the workspace.
MOLES = 18  # after the 18 mixed coefficients
MIXING, T_MIN, T_MAX, X, Y, T_, CP_, H_, S_, ACTIVE, PREVIOUS, STEPS, FAIL = range(19, 32)
ROWS = 32


@vectorised
def _mix(w: Array, amounts: Array, first: int, size: int, mixing: Array, limits: Array) -> None:
    """Coefficients, entropy of mixing and limits of the states of a block, species added one after the other."""
    for c in range(WIDTH):
        for lane in range(LANES):
            w[c * LANES + lane] = 0.0
    for lane in range(LANES):
        w[MIXING * LANES + lane], w[T_MIN * LANES + lane], w[T_MAX * LANES + lane] = 0.0, 0.0, 1e9
    for j in range(amounts.shape[1]):
        most = 0.0
        for lane in range(size):
            n = max(amounts[first + lane, j], 0.0)
            w[X * LANES + lane] = n
            most = max(most, n)
        if most == 0.0:
            continue
        low, high = limits[0, j], limits[1, j]
        for c in range(WIDTH):
            weight = mixing[j, c]
            for lane in range(LANES):
                w[c * LANES + lane] += w[X * LANES + lane] * weight
        for lane in range(LANES):
            n = w[X * LANES + lane]
            w[MIXING * LANES + lane] -= n * log(n + TINY)
            w[T_MIN * LANES + lane] = max(w[T_MIN * LANES + lane], low if n > 0.0 else 0.0)
            w[T_MAX * LANES + lane] = min(w[T_MAX * LANES + lane], high if n > 0.0 else 1e9)
    for lane in range(LANES):
        moles = w[MOLES * LANES + lane]
        w[MIXING * LANES + lane] += moles * log(moles + TINY)


@vectorised
def _thermal(w: Array) -> None:
    """cp/R, h/R and standard entropy over R incl. mixing at the temperatures of the lanes, per kg."""
    for lane in range(LANES):
        t = w[T_ * LANES + lane]
        cp, h, s = ranged(
            w[lane], w[LANES + lane], w[2 * LANES + lane], w[3 * LANES + lane], w[4 * LANES + lane],
            w[5 * LANES + lane], w[6 * LANES + lane], w[7 * LANES + lane], w[8 * LANES + lane], w[9 * LANES + lane],
            w[10 * LANES + lane], w[11 * LANES + lane], w[12 * LANES + lane], w[13 * LANES + lane], w[14 * LANES + lane],
            w[15 * LANES + lane], w[16 * LANES + lane], w[17 * LANES + lane],
            t, log(t),
        )  # fmt: skip
        w[CP_ * LANES + lane] = cp
        w[H_ * LANES + lane] = t * h
        w[S_ * LANES + lane] = s + w[MIXING * LANES + lane]


@vectorised
def _newton(w: Array, pair: int) -> None:
    """One step of the temperature of every active lane towards the first property of the pair (over R)."""
    entropy = pair in (SP, SV)
    per_volume = 1.0 if pair in (UV, SV) else 0.0
    for lane in range(LANES):
        t, x, y, n = w[T_ * LANES + lane], w[X * LANES + lane], w[Y * LANES + lane], w[MOLES * LANES + lane]
        cp, h, s = w[CP_ * LANES + lane] - per_volume * n, w[H_ * LANES + lane], w[S_ * LANES + lane]
        by_energy = (x - h + per_volume * n * t) / (cp * t)
        # y is ln(p/p0), or ln of R n T0/(p0 v) at one kelvin
        by_entropy = (x - s + n * (y + per_volume * log(t))) / cp
        change = min(max(by_entropy, -1.0), 1.0) if entropy else min(max(by_energy, -0.6), 1.5)
        factor = exp(change) if entropy else 1.0 + change
        moved = min(max(t * factor, SLACK_BELOW * w[T_MIN * LANES + lane]), SLACK_ABOVE * w[T_MAX * LANES + lane])
        size = abs(moved / t - 1.0)
        active, before = w[ACTIVE * LANES + lane], w[PREVIOUS * LANES + lane]
        w[T_ * LANES + lane] = moved if active > 0.0 else t
        w[STEPS * LANES + lane] += active
        again = 1.0 if size > TOLERANCE else 0.0
        stalled = 1.0 if size <= ROUNDING else 0.0
        stalled = stalled if size >= before else 0.0
        w[PREVIOUS * LANES + lane] = size if active > 0.0 else before
        w[ACTIVE * LANES + lane] = active * again * (1.0 - stalled)


@vectorised
def _properties(w: Array, pair: int, gas_constant: float, p0: float, r: Array) -> None:
    """All properties from the temperature and what the pair fixes, into the lanes of ``r``."""
    pressure_given = pair in (TP, HP, SP)
    for lane in range(LANES):
        t, y, n = w[T_ * LANES + lane], w[Y * LANES + lane], w[MOLES * LANES + lane]
        cp, s0 = w[CP_ * LANES + lane], w[S_ * LANES + lane]
        log_p = y if pressure_given else y + log(t)
        log_p = (s0 - w[X * LANES + lane]) / n if pair == ST else log_p
        p = p0 * exp(log_p)
        rt = gas_constant * n * t
        h = gas_constant * w[H_ * LANES + lane]
        r[T * LANES + lane], r[P * LANES + lane], r[V * LANES + lane], r[U * LANES + lane] = t, p, rt / p, h - rt
        r[H * LANES + lane], r[S * LANES + lane] = h, gas_constant * (s0 - n * log_p)
        r[CP * LANES + lane], r[SOUND * LANES + lane] = gas_constant * cp, math.sqrt(abs(cp / (cp - n) * rt))


@compiled
def solve(
    pair: int, x: Array, y: Array, amounts: Array, mixing: Array, limits: Array,
    constants: tuple[float, float], start: Array, out: Array, failed: Mask, outside: Mask,
    steps: npt.NDArray[np.int32], pressure_limit: float,
) -> None:  # fmt: skip
    """States of a batch.

    Parameters
    ----------
    pair, x, y, amounts : a code of `TP` to `ST`, arrays (N,) in SI, amounts (N, S) [kmol/kg].
    mixing : (S, 19) coefficients of both ranges and a one. limits : (2, S) temperatures of the data [K].
    constants : molar gas constant [J/(kmol K)], reference pressure [Pa]. start : (N,) first temperature [K]; NaN: the usual one.
    out : (8, N) T p v u h s cp and speed of sound. failed, outside, steps : (N,), written in place.
    """
    count = x.shape[0]
    gas_constant, p0 = constants
    w, r = np.ones(ROWS * LANES), np.zeros(8 * LANES)
    pressure_given = pair in (TP, HP, SP)
    searches = pair in (HP, UV, SP, SV)
    for first in range(0, count, LANES):
        size = min(LANES, count - first)
        _mix(w, amounts, first, size, mixing, limits)
        for lane in range(size):
            i, moles = first + lane, w[MOLES * LANES + lane]
            fine = math.isfinite(x[i]) and math.isfinite(y[i]) and y[i] > 0.0 and moles > 0.0
            if pair in (TP, TV):
                fine = fine and x[i] > 0.0
            known = START if not fine else (x[i] if pair in (TP, TV) else (y[i] if pair == ST else start[i]))
            w[T_ * LANES + lane] = known if known > 0.0 else START
            w[X * LANES + lane] = x[i] / gas_constant if fine else 1.0
            if pressure_given:
                w[Y * LANES + lane] = math.log(y[i] / p0) if fine else 0.0
            elif pair == ST:
                w[Y * LANES + lane] = 0.0
            else:
                w[Y * LANES + lane] = math.log(gas_constant * moles / (p0 * y[i])) if fine else 0.0
            w[ACTIVE * LANES + lane] = 1.0 if fine and searches else 0.0
            w[FAIL * LANES + lane] = 0.0 if fine else 1.0
            w[PREVIOUS * LANES + lane], w[STEPS * LANES + lane] = 1e300, 0.0
        for lane in range(size, LANES):
            w[T_ * LANES + lane], w[ACTIVE * LANES + lane] = START, 0.0
        if searches:
            for _ in range(MAX_STEPS):
                _thermal(w)
                _newton(w, pair)
                left = 0.0
                for lane in range(LANES):
                    left += w[ACTIVE * LANES + lane]
                if left == 0.0:
                    break
        _thermal(w)
        _properties(w, pair, gas_constant, p0, r)
        for lane in range(size):
            i = first + lane
            t, low, high = w[T_ * LANES + lane], w[T_MIN * LANES + lane], w[T_MAX * LANES + lane]
            lost = w[ACTIVE * LANES + lane] > 0.0 or w[FAIL * LANES + lane] > 0.0
            lost = lost or (w[STEPS * LANES + lane] > 0.0 and (t <= SLACK_BELOW * low or t >= SLACK_ABOVE * high))
            p = r[P * LANES + lane]
            failed[i] = lost
            outside[i] = t < low or t > high or (not lost and not (0.0 < p <= pressure_limit))
            steps[i] = int(w[STEPS * LANES + lane])
            for c in range(8):
                out[c, i] = np.nan if lost else r[c * LANES + lane]
            if not lost:  # what the pair gives stands as given
                if pressure_given:
                    out[P, i] = y[i]
                elif pair != ST:
                    out[V, i] = y[i]
