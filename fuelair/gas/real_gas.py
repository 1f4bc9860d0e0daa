"""Residual functions of a real gas: a closed form in temperature, density and composition.

    a_r/(R T) = B rho + X^2/2 + L X^4,   X = C^(1/2) rho

B(T, x) = sum_ij x_i x_j B_ij(T) and C(T, x)^(1/3) = sum_i x_i C_i(T)^(1/3) are the second and third
virial coefficients; the last term, one constant for all gases, stands for everything above the third.
Everything else follows by differentiation, so that the identities of thermodynamics hold to rounding.

Source of B and C: reference equations of state of the pure fluids, see `fuelair.gas.virial_data`.
Mixing: B quadratic in composition is exact in statistical mechanics; the cube-root rule for C is
common practice (cross coefficients as geometric means of the pure ones).

Errors (computed against Lemmon et al. 2000 for air, through CoolProp 8.0.0), 300 to 2000 K, to 8 kmol/m3: Z 0.4 %, h/(R T)
0.007, s/R 0.008; isentropic compression of air, ratio 8 to 24: end pressure 0.25 %, temperature 0.18 %. Burned gas
against the multi-fluid mixture: Z 0.6 %, fugacity coefficients 1.8 %, water's 10 % (first principles contradict the
mixture model there, see the tests).
Valid for gas without strong attraction: see `valid`. Outside, numbers still come, but nothing is claimed; nothing
here knows about condensation of one component of a mixture.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fuelair.gas.engine import Array, Mask, total, weighted
from fuelair.gas.polynomials import R
from fuelair.gas.virial_data import VirialTable, fluids, virial_table

__all__ = ["DENSITY_LIMIT", "Residual", "VirialTable", "density", "fluids", "residual", "valid", "virial_table"]

DENSITY_LIMIT = 8.0
"""Molar density above which nothing is claimed [kmol/m3]; 600 bar needs 730 K or more to stay below it."""
STABILITY_LIMIT = 0.5
"""Least slope (dp/drho)/(R T) of a gas state that is claimed."""
MAX_ITERATIONS = 60
TOLERANCE = 1e-15
STALL = 1e-12
"""Relative change of density at which the search is done; the second when it no longer shrinks."""


@dataclass(frozen=True, slots=True)
class Residual:
    """What the real gas adds to the ideal gas at the same temperature, density and composition.

    All dimensionless, shape (N,), ``mu`` (N, S).

    Attributes
    ----------
    Z : compressibility factor p/(rho R T).
    dZ_drho_rho : rho dZ/drho at fixed T, x.
    dZ_dT_T : T dZ/dT at fixed rho, x.
    a, u, h : residual Helmholtz energy, internal energy and enthalpy over R T; h = u + Z - 1.
    s, cv : residual entropy and isochoric heat capacity over R.
    mu : residual chemical potential over R T of every species, d(n a)/dn_j at fixed T and volume;
        of shape (N, 0) if not asked for. Potential of species j over R T:
        g_j(T)/RT + ln(x_j rho R T/p0) + mu_j.
    """

    Z: Array
    dZ_drho_rho: Array
    dZ_dT_T: Array
    a: Array
    u: Array
    s: Array
    h: Array
    cv: Array
    mu: Array


@dataclass(frozen=True, slots=True)
class _Coefficients:
    """B and C**(1/3) of N mixtures with T d/dT and T^2 d2/dT2; y (N, F) fractions of fluids, basis (N, K).

    ``rows`` (N, F, K): coefficients of sum_j y_j B_ij.
    """

    y: Array
    basis: Array
    rows: Array
    B: Array
    B1: Array
    B2: Array
    Q: Array
    Q1: Array
    Q2: Array


def residual(vt: VirialTable, T: Array, rho: Array, x: Array, *, potentials: bool = True) -> Residual:
    """Residual functions at temperature ``T`` (N,) [K], density ``rho`` (N,) [kmol/m3], mole fractions ``x`` (N, S).

    ``potentials`` False leaves ``mu`` out, which saves half the time.
    """
    k = _coefficients(vt, T, x)
    q1, q2 = k.Q1 / k.Q, k.Q2 / k.Q
    X = rho * k.Q * np.sqrt(k.Q)
    X1 = 1.5 * q1 * X
    X2 = (1.5 * q2 + 0.75 * q1 * q1) * X
    XX = X * X
    g, gx, gxx = XX * (0.5 + vt.closing * XX), X * (1.0 + 4.0 * vt.closing * XX), 1.0 + 12.0 * vt.closing * XX
    second = k.B * rho
    a = second + g
    Z = 1.0 + second + gx * X
    u = -(k.B1 * rho + gx * X1)
    cv = 2.0 * u - (k.B2 * rho + gxx * X1 * X1 + gx * X2)
    return Residual(
        Z=Z,
        dZ_drho_rho=second + gx * X + gxx * X * X,
        dZ_dT_T=k.B1 * rho + (gx + gxx * X) * X1,
        a=a,
        u=u,
        s=u - a,
        h=u + (second + gx * X),
        cv=cv,
        mu=_potentials(vt, k, rho, g, gx * X) if potentials else np.zeros((len(T), 0)),
    )


def density(vt: VirialTable, T: Array, p: Array, x: Array) -> Array:
    """Molar density [kmol/m3] of the gas at temperature ``T`` (N,) [K], pressure ``p`` (N,) [Pa], mole fractions ``x`` (N, S).

    The root that a gas reaches when it is compressed from nothing. NaN where the pressure stops rising
    with density on the way (the model's gas would condense), and where ``T`` or ``p`` are not positive numbers.
    """
    k = _coefficients(vt, T, x)
    root = k.Q * np.sqrt(k.Q)
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        target = p / (R * T)
        rho = target.copy()
        active = np.isfinite(target) & (target > 0.0) & (T > 0.0)
        found = active.copy()
        previous = np.full(len(target), np.inf)
        for _ in range(MAX_ITERATIONS):
            Z, slope = _rise(vt, k.B, root, rho)
            moved = rho + (target - rho * Z) / slope
            moved = np.where(moved > 0.0, np.minimum(moved, 3.0 * rho), 0.5 * rho)
            size = np.abs(moved / rho - 1.0)
            rho = np.where(active, moved, rho)
            settled = (size <= TOLERANCE) | ((size <= STALL) & (size >= previous))
            previous = size
            found &= ~active | (slope > 0.0)
            active &= ~settled & (slope > 0.0)
            if not active.any():
                break
        found &= ~active
        found &= _least_rise(vt, k.B, root, rho) > 0.0
    return np.where(found, rho, np.nan)


def valid(vt: VirialTable, T: Array, rho: Array, x: Array) -> Mask:
    """Where the model claims its accuracy: 200 to 6000 K, up to `DENSITY_LIMIT`, and far from condensing.

    Far from condensing: (dp/drho)/(R T) at fixed temperature stays above `STABILITY_LIMIT`.
    """
    k = _coefficients(vt, T, x)
    least = _least_rise(vt, k.B, k.Q * np.sqrt(k.Q), rho)
    return (vt.t_min <= T) & (vt.t_max >= T) & (rho <= DENSITY_LIMIT) & (least > STABILITY_LIMIT)


def _rise(vt: VirialTable, B: Array, root: Array, rho: Array) -> tuple[Array, Array]:
    """Z and (dp/drho)/(R T)."""
    XX = (root * rho) ** 2
    Z = 1.0 + B * rho + XX * (1.0 + 4.0 * vt.closing * XX)
    return Z, 1.0 + 2.0 * B * rho + XX * (3.0 + 20.0 * vt.closing * XX)


def _least_rise(vt: VirialTable, B: Array, root: Array, rho: Array) -> Array:
    """Least (dp/drho)/(R T) between zero density and ``rho``.

    The slope is convex in X = root rho; its lowest point solves 2 B/root + 6 X + 80 L X^3 = 0, a cubic with
    one real root (Cardano), and lies at a positive X only where B is negative.
    """
    third = 0.025 / vt.closing  # a third of the cubic's linear coefficient
    half = -B / root / (80.0 * vt.closing)
    under = np.sqrt(half * half + third**3)
    lowest = np.cbrt(half + under) + np.cbrt(half - under)
    return _rise(vt, B, root, np.minimum(np.maximum(lowest, 0.0) / root, rho))[1]


def _coefficients(vt: VirialTable, T: Array, x: Array) -> _Coefficients:
    n, fluids, terms = len(T), len(vt.fluids), len(vt.exponents)
    y = weighted(x, vt.mapping)
    e = vt.exponents
    with np.errstate(invalid="ignore", divide="ignore"):
        basis = np.exp(np.log(vt.reference_temperature / T)[:, None] * e)
    present = np.flatnonzero(y.any(axis=0))  # what is absent from the whole batch would only add zeros
    present = present if len(present) else np.zeros(1, np.intp)
    rows = weighted(y[:, present], vt.b[present].reshape(len(present), fluids * terms)).reshape(n, fluids, terms)
    b = weighted(y[:, present], rows[:, present]) * basis
    c = weighted(y[:, present], vt.c[present]) * basis
    first, second = -e, e * (e + 1.0)
    return _Coefficients(
        y=y, basis=basis, rows=rows,
        B=total(b), B1=total(first * b), B2=total(second * b),
        Q=total(c), Q1=total(first * c), Q2=total(second * c),
    )  # fmt: skip


def _potentials(vt: VirialTable, k: _Coefficients, rho: Array, g: Array, gx_x: Array) -> Array:
    """Residual chemical potentials over R T of the species, (N, S), from those of the fluids."""
    with_all = weighted(k.basis, k.rows.transpose(0, 2, 1))
    c = weighted(k.basis, vt.c.T)
    mu = 2.0 * rho[:, None] * with_all + g[:, None] + gx_x[:, None] * (1.5 * c / k.Q[:, None] - 0.5)
    return weighted(mu, vt.mapping.T)
