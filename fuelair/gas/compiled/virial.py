"""Residual functions of the real gas for one state at a time: the formulas of `fuelair.gas.real_gas`, compiled.

    a_r/(R T) = B rho + X^2/2 + L X^4,   X = C^(1/2) rho

Kept apart by what changes how often: `contract` follows the composition, `at_temperature` the temperature,
`state` the density. Beside the residuals of a state, `potentials` gives the derivatives of the chemical potentials
by ln T and ln rho, which the Newton iteration of the equilibrium needs.
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from fuelair.gas.compiled.jit import bare, inlined
from fuelair.gas.engine import Array
from fuelair.gas.polynomials import R
from fuelair.gas.real_gas import DENSITY_LIMIT, MAX_ITERATIONS, STABILITY_LIMIT, STALL, TOLERANCE, VirialTable

SHARE, SUM, MU, BY_T, BY_RHO = range(5)
"""Rows of ``fluids``: share y; scratch; residual chemical potential over RT and its slopes by ln T and ln rho."""
B, Q, BASIS = range(3)
"""Rows of ``terms``: coefficients of B and of the cube root of C of the composition; (T0/T)^e."""
CLOSING, T0, T_LOW, T_HIGH, EXPONENTS = range(5)
"""Places in ``numbers``; the exponents follow to its end."""


class Fluids(NamedTuple):
    """A `VirialTable`: F fluids, K terms, S species.

    fluid, share (M, S): the M fluids that stand for a species and their shares, shares of zero where there are fewer;
    b (F, K F) and c (K, F) coefficients, terms before fluids; numbers (4 + K,).
    """

    fluid: npt.NDArray[np.intp]
    share: Array
    b: Array
    c: Array
    numbers: Array


class Blend(NamedTuple):
    """Work space of one composition: fluids (5, F), rows (K F,) of sum_i y_i B_i, terms (3, K)."""

    fluids: Array
    rows: Array
    terms: Array


class Cold(NamedTuple):
    """B and the cube root of C, with T d/dT and T^2 d2/dT2."""

    B: float
    B1: float
    B2: float
    Q: float
    Q1: float
    Q2: float


class Excess(NamedTuple):
    """Residual functions of one state, named as in `real_gas.Residual`; g is X^2/2 + L X^4, X1_X = T dX/dT over X."""

    Z: float
    dZ_drho_rho: float
    dZ_dT_T: float
    u: float
    s: float
    cv: float
    g: float
    gx_X: float
    gxx_XX: float
    X1_X: float


@lru_cache(maxsize=64)
def fluids_of(vt: VirialTable) -> Fluids:
    """The arrays of a table in the order of the compiled code."""
    most = int((vt.mapping > 0.0).sum(axis=1).max())
    order = np.argsort(-vt.mapping, axis=1, kind="stable")[:, :most]
    return Fluids(
        fluid=np.ascontiguousarray(order.T),
        share=np.ascontiguousarray(np.take_along_axis(vt.mapping, order, axis=1).T),
        b=np.ascontiguousarray(vt.b.transpose(0, 2, 1)).reshape(len(vt.fluids), -1),
        c=np.ascontiguousarray(vt.c.T),
        numbers=np.array([vt.closing, vt.reference_temperature, vt.t_min, vt.t_max, *vt.exponents]),
    )


@lru_cache(maxsize=1)
def no_fluids() -> Fluids:
    """What the ideal gas hands over in the place of a table."""
    return Fluids(np.zeros((1, 1), np.intp), np.zeros((1, 1)), np.zeros((1, 1)), np.zeros((1, 1)), np.ones(5))


@inlined
def blend_for(f: Fluids) -> Blend:
    """Work space for a table."""
    k, n = f.c.shape
    return Blend(np.zeros((5, n)), np.zeros(k * n), np.zeros((3, k)))


@bare
def contract(f: Fluids, n: Array, whole: float, w: Blend) -> None:
    """Contract the coefficients with the composition ``n`` (S,) of sum ``whole``."""
    terms, count = f.c.shape
    y = w.fluids[SHARE]
    y[:] = 0.0
    w.rows[:] = 0.0
    for j in range(len(n)):
        if n[j] > 0.0:
            for i in range(len(f.share)):
                y[f.fluid[i, j]] += f.share[i, j] * n[j] / whole
    for i in range(count):
        if y[i] > 0.0:
            row = f.b[i]
            for k in range(terms * count):
                w.rows[k] += y[i] * row[k]
    for k in range(terms):
        b = c = 0.0
        for m in range(count):
            b += y[m] * w.rows[k * count + m]
            c += y[m] * f.c[k, m]
        w.terms[B, k], w.terms[Q, k] = b, c


@bare
def at_temperature(f: Fluids, T: float, w: Blend) -> Cold:
    """Coefficients of the contracted composition at a temperature."""
    log_t = np.log(f.numbers[T0] / T)
    b0 = b1 = b2 = q0 = q1 = q2 = 0.0
    for k in range(w.terms.shape[1]):
        e = f.numbers[EXPONENTS + k]
        basis = np.exp(e * log_t)
        w.terms[BASIS, k] = basis
        b, q = w.terms[B, k] * basis, w.terms[Q, k] * basis
        b0, b1, b2 = b0 + b, b1 - e * b, b2 + e * (e + 1.0) * b
        q0, q1, q2 = q0 + q, q1 - e * q, q2 + e * (e + 1.0) * q
    return Cold(b0, b1, b2, q0, q1, q2)


@bare
def state(f: Fluids, k: Cold, rho: float) -> Excess:
    """Residual functions at a density."""
    closing = f.numbers[CLOSING]
    q1, q2 = k.Q1 / k.Q, k.Q2 / k.Q
    X = rho * k.Q * np.sqrt(k.Q)
    XX = X * X
    first = 1.5 * q1
    second = 1.5 * q2 + 0.75 * q1 * q1
    g, gx_X, gxx_XX = XX * (0.5 + closing * XX), XX * (1.0 + 4.0 * closing * XX), XX * (1.0 + 12.0 * closing * XX)
    u = -(k.B1 * rho + gx_X * first)
    return Excess(
        Z=1.0 + k.B * rho + gx_X,
        dZ_drho_rho=k.B * rho + gx_X + gxx_XX,
        dZ_dT_T=k.B1 * rho + (gx_X + gxx_XX) * first,
        u=u,
        s=u - k.B * rho - g,
        cv=2.0 * u - (k.B2 * rho + gxx_XX * first * first + gx_X * second),
        g=g,
        gx_X=gx_X,
        gxx_XX=gxx_XX,
        X1_X=first,
    )


@bare
def potentials(f: Fluids, k: Cold, r: Excess, rho: float, w: Blend) -> None:
    """Residual chemical potentials of the fluids over R T, and their slopes by ln T and by ln rho, into ``w.fluids``."""
    terms, count = f.c.shape
    mu, by_T, by_rho, c1 = w.fluids[MU], w.fluids[BY_T], w.fluids[BY_RHO], w.fluids[SUM]
    for m in range(count):
        mu[m] = by_T[m] = by_rho[m] = c1[m] = 0.0
    for i in range(terms):  # sum_j y_j B_mj, its T d/dT, the cube root of C and its T d/dT
        basis, e = w.terms[BASIS, i], f.numbers[EXPONENTS + i]
        for m in range(count):
            b, c = w.rows[i * count + m] * basis, f.c[i, m] * basis
            mu[m] += b
            by_T[m] -= e * b
            by_rho[m] += c
            c1[m] -= e * c
    q1, rise = k.Q1 / k.Q, r.gx_X + r.gxx_XX
    for m in range(count):
        c = by_rho[m] / k.Q
        pull, both = 1.5 * c - 0.5, 2.0 * rho * mu[m]
        by_T[m] = 2.0 * rho * by_T[m] + r.X1_X * (r.gx_X + rise * pull) + r.gx_X * 1.5 * (c1[m] / k.Q - c * q1)
        by_rho[m] = both + r.gx_X + rise * pull
        mu[m] = both + r.g + r.gx_X * pull


@bare
def density(f: Fluids, k: Cold, T: float, p: float) -> float:
    """Molar density [kmol/m3] at a pressure, NaN where `real_gas.density` finds none."""
    root, closing = k.Q * np.sqrt(k.Q), f.numbers[CLOSING]
    target = p / (R * T)
    if not (target > 0.0 and T > 0.0 and target < np.inf):
        return np.nan
    rho, previous = target, np.inf
    for _ in range(MAX_ITERATIONS):
        Z, slope = rise(closing, k.B, root, rho)
        if not slope > 0.0:  # Newton stays where pressure rises if the gas has that pressure at all
            return np.nan
        moved = rho + (target - rho * Z) / slope
        moved = min(moved, 3.0 * rho) if moved > 0.0 else 0.5 * rho
        size = abs(moved / rho - 1.0)
        rho = moved
        if size <= TOLERANCE or (size <= STALL and size >= previous):
            return rho if least_rise(closing, k.B, root, rho) > 0.0 else np.nan
        previous = size
    return np.nan


@bare
def valid(f: Fluids, k: Cold, T: float, rho: float) -> bool:
    """Where the model claims its accuracy, see `real_gas.valid`."""
    least = least_rise(f.numbers[CLOSING], k.B, k.Q * np.sqrt(k.Q), rho)
    return f.numbers[T_LOW] <= T and f.numbers[T_HIGH] >= T and rho <= DENSITY_LIMIT and least > STABILITY_LIMIT


@bare
def rise(closing: float, b: float, root: float, rho: float) -> tuple[float, float]:
    """Z and (dp/drho)/(R T)."""
    XX = (root * rho) ** 2
    return 1.0 + b * rho + XX * (1.0 + 4.0 * closing * XX), 1.0 + 2.0 * b * rho + XX * (3.0 + 20.0 * closing * XX)


@bare
def least_rise(closing: float, b: float, root: float, rho: float) -> float:
    """Least (dp/drho)/(R T) between zero density and ``rho``; inside only where B is negative."""
    if b >= 0.0:
        return rise(closing, b, root, 0.0 if root >= 0.0 else np.nan)[1]
    third = 0.025 / closing
    half = -b / root / (80.0 * closing)
    under = np.sqrt(half * half + third**3)
    lowest = np.cbrt(half + under) + np.cbrt(half - under)
    return rise(closing, b, root, min(max(lowest, 0.0) / root, rho))[1]
