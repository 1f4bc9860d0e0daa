"""States of the real gas of one fixed composition from any pair of properties, compiled.

The same searches as in `fuelair.gas.real_engine`: Newton on ln T, or on ln v for the pair ST, first on the ideal gas
for a start, then on the real one.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from fuelair.gas.compiled import virial
from fuelair.gas.compiled.equations import thermal
from fuelair.gas.compiled.jit import bare
from fuelair.gas.compiled.layout import HP, SP, ST, TP, TV, UV
from fuelair.gas.engine import Array
from fuelair.gas.frozen import SLACK_ABOVE, SLACK_BELOW
from fuelair.gas.polynomials import T_BREAK, R
from fuelair.gas.real_engine import MAX_ITERATIONS, STALL, TOLERANCE

START, START_PRESSURE = 1000.0, 5e6
"""What the ideal search starts from [K, Pa]."""
LOG_COLDEST, LOG_HOTTEST = float(np.log(50.0)), float(np.log(12000.0))
"""ln of the temperatures to which searches are held [K]."""
ENOUGH, IDEAL_STEPS = 1e-3, 8
"""Step at which the ideal search is near enough, and how many it may take."""
BLIND = 0.05
"""Step of ln T or ln v where the slope of a property misleads."""


class Mixed(NamedTuple):
    """One mixture: amount, entropy of mixing over R, limits of temperature, reference pressure."""

    moles: float
    mixing: float
    t_min: float
    t_max: float
    p0: float


class Point(NamedTuple):
    """All properties at a temperature and volume."""

    T: float
    v: float
    p: float
    u: float
    h: float
    s: float
    cv: float
    cp: float
    ds_dv_v: float
    sound: float


@bare
def mix(coefficients: Array, limits: Array, p0: float, n: Array, a: Array) -> Mixed:
    """Mix the polynomials (S, 18) of amounts ``n`` (S,) into ``a`` (18,); ``limits`` (2, S) of temperature."""
    moles = mixing = t_min = 0.0
    t_max = np.inf
    a[:] = 0.0
    for j in range(len(n)):
        moles += n[j]
    for j in range(len(n)):
        if n[j] > 0.0:
            row = coefficients[j]
            for k in range(18):
                a[k] += n[j] * row[k]
            mixing -= n[j] * np.log(n[j] / moles)
            t_min, t_max = max(t_min, limits[0, j]), min(t_max, limits[1, j])
    return Mixed(moles, mixing, t_min, t_max, p0)


@bare
def at(mixed: Mixed, a: Array, f: virial.Fluids, blend: virial.Blend, real: bool, T: float, v: float, p: float) -> Point:
    """Every property at a temperature and a volume, or a pressure ``p`` where that is not zero."""
    c = a[0 if T < T_BREAK else 9 :]
    cp0, h0, s0 = thermal(c[0], c[1], c[2], c[3], c[4], c[5], c[6], c[7], c[8], T, 1.0 / T, np.log(T))
    n, rt = mixed.moles, R * mixed.moles * T
    r = virial.Excess(1.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0)
    if real:
        k = virial.at_temperature(f, T, blend)
        if p > 0.0:
            v = n / virial.density(f, k, T, p)
        r = virial.state(f, k, n / v)
    elif p > 0.0:
        v = rt / p
    p_ideal = rt / v
    u = T * R * h0 - rt + rt * r.u
    s = R * (s0 + mixed.mixing) + R * n * (r.s - np.log(p_ideal / mixed.p0))
    cv = R * (cp0 - n + n * r.cv)
    expansion, slope = r.Z + r.dZ_dT_T, r.Z + r.dZ_drho_rho
    cp = cv + R * n * expansion * expansion / slope
    pressure = r.Z * p_ideal
    return Point(T, v, pressure, u, u + pressure * v, s, cv, cp, R * n * expansion, np.sqrt(abs(cp / cv * rt * slope)))


@bare
def step(point: Point, pair: int, x: float) -> tuple[float, float]:
    """What the first property of the pair misses, and the Newton step of ln T, or of ln v for ST, towards it."""
    if pair in (HP, UV):
        value, slope = (point.h, point.cp) if pair == HP else (point.u, point.cv)
        miss = x - value
        move = np.log1p(min(max(miss / (slope * point.T), -0.6), 1.5))
    else:
        miss = x - point.s
        move = miss / (point.ds_dv_v if pair == ST else (point.cp if pair == SP else point.cv))
    return miss, min(max(move, -1.0), 1.0)


@bare
def safe(move: float, miss: float, z: float, low: float, high: float) -> float:
    """Where to go from ``z``: the Newton step if it keeps within the bracket, else its middle, else a short way."""
    new = z + move
    if move * miss >= 0.0 and low <= new <= high:
        return new
    if low > -np.inf and high < np.inf:
        return 0.5 * (low + high)
    return z + (BLIND if miss > 0.0 else -BLIND)


@bare
def search(
    mixed: Mixed, a: Array, f: virial.Fluids, blend: virial.Blend, pair: int, x: float, y: float, start: float
) -> tuple[Point, int, bool]:
    """The point that meets a pair, steps taken on the real gas, and whether it was found; ``start`` [K], 0 for none.

    First by plain Newton, as the reference; where that fails within a bracket, since energy and entropy of a gas rise
    with T and with v. Too cold for any gas of the pressure counts as too low.
    """
    given = y if pair in (TP, HP, SP) else 0.0
    T = x if pair in (TP, TV) else (y if pair == ST else (start if start > 0.0 else START))
    v = mixed.moles * R * T / START_PRESSURE if pair == ST else y
    point = at(mixed, a, f, blend, pair in (TP, TV), T, v, given)
    if pair in (TP, TV):
        return point, 0, np.isfinite(point.p)
    first, done = np.log(v) if pair == ST else np.log(T), 0
    for bracket in (False, True):
        z, real, previous, low, high = first, start > 0.0, np.inf, -np.inf, np.inf
        for count in range(MAX_ITERATIONS + IDEAL_STEPS):
            if pair == ST:
                v = np.exp(z)
            else:
                T = np.exp(z)
            point = at(mixed, a, f, blend, real, T, v, given)
            miss, move = step(point, pair, x)
            if bracket and given > 0.0 and not np.isfinite(miss):
                miss, move = 1.0, np.nan
            size = abs(move)
            if real and (size <= TOLERANCE or (size <= STALL and size >= previous)):
                return point, done, np.isfinite(point.p)
            if not bracket and real and not size < np.inf:
                break
            low, high = (z, high) if miss > 0.0 else (low, z)
            z = safe(move, miss, z, low, high) if bracket and real else z + move
            z = min(max(z, LOG_COLDEST), LOG_HOTTEST) if pair != ST else z
            done += real
            previous = size
            if not real and (count == IDEAL_STEPS or not ENOUGH < size < np.inf):
                real, previous, low, high = True, np.inf, -np.inf, np.inf
                if pair != ST and not mixed.t_min * SLACK_BELOW < np.exp(z) < mixed.t_max * SLACK_ABOVE:
                    z = np.log(START)
    return point, done, False
