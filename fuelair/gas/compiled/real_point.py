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
from fuelair.gas.compiled.layout import (
    HP,
    SP,
    ST,
    TP,
    TV,
    UV,
)
from fuelair.gas.engine import Array
from fuelair.gas.frozen import SLACK_ABOVE, SLACK_BELOW
from fuelair.gas.polynomials import T_BREAK, R
from fuelair.gas.real_engine import MAX_ITERATIONS, STALL, TOLERANCE

START, START_PRESSURE = 1000.0, 5e6
"""What the ideal search starts from [K, Pa]."""
COLDEST, HOTTEST = 50.0, 12000.0
"""Temperatures to which searches are held [K]."""
ENOUGH = 1e-3
"""Step at which the ideal search is near enough."""


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
def step(point: Point, pair: int, x: float) -> float:
    """Newton step of ln T, or of ln v for ST, towards the first property of the pair."""
    if pair == ST:
        size = (x - point.s) / point.ds_dv_v
    elif pair in (HP, UV):
        value, slope = (point.h, point.cp) if pair == HP else (point.u, point.cv)
        size = np.log1p(min(max((x - value) / (slope * point.T), -0.6), 1.5))
    else:
        size = (x - point.s) / (point.cp if pair == SP else point.cv)
    return min(max(size, -1.0), 1.0)


@bare
def search(
    mixed: Mixed, a: Array, f: virial.Fluids, blend: virial.Blend, pair: int, x: float, y: float, start: float
) -> tuple[Point, int, bool]:
    """The point that meets a pair, steps taken on the real gas, and whether it was found; ``start`` [K], 0 for none."""
    given, at_T = y if pair in (TP, HP, SP) else 0.0, pair in (TP, TV)
    T = x if at_T else (y if pair == ST else (start if start > 0.0 else START))
    v = mixed.moles * R * T / START_PRESSURE if pair == ST else y
    real, previous, done = start > 0.0 or at_T, np.inf, 0
    point = at(mixed, a, f, blend, real, T, v, given)
    for _ in range(2 * MAX_ITERATIONS):
        move = 0.0 if at_T else step(point, pair, x)
        size = abs(move)
        if real and (size <= TOLERANCE or (size <= STALL and size >= previous)):
            return point, done, np.isfinite(point.p)
        if not size < np.inf:
            break
        if pair == ST:
            v *= np.exp(move)
        else:
            T = min(max(T * np.exp(move), COLDEST), HOTTEST)
        done += real
        if not real and (size <= ENOUGH or size >= previous):
            real, previous = True, np.inf
            if not mixed.t_min * SLACK_BELOW < T < mixed.t_max * SLACK_ABOVE:
                T = START
        else:
            previous = size
        point = at(mixed, a, f, blend, real, T, v, given)
    return point, done, False
