"""Where the equilibrium of one state starts from: near the answer, in closed form.

Carbon and hydrogen are shared between CO2 and CO, H2O and H2 by the oxygen pressure, which follows from the excess
of oxygen: what is left over when lean, from the balance CO + H2 = -excess when rich, and from
CO + H2 = 2 O2 near stoichiometric. CO2, H2O, O2, N2, Ar and SO2 then fix the potential of every element, and these
the amount of every other species. Only a start: the Newton does not depend on it.
"""

from __future__ import annotations

import numpy as np

from fuelair.gas.compiled.jit import bare
from fuelair.gas.compiled.layout import (
    ABSENT, AMOUNT, ARGON, BALANCE, CO, CO2, ENTHALPY, ENTROPY, EXCESS, FORMS, H2, H2O, INERT, LOG, MAJOR, N2, O2,
    POTENTIAL, REACTING, SO2, STATE, USABLE, Species, Work, AR, C, H, N, O, S,
)  # fmt: skip
from fuelair.gas.engine import Array
from fuelair.gas.gibbs import LOWEST, TINY
from fuelair.gas.polynomials import R

MOST, STEEPEST = 650.0, 300.0
"""Largest exponents, of u and of its ratio."""
LOG_SHARE = float(np.log(0.1))
"""ln of the largest mole fraction that a species beside the products of complete combustion starts from."""
RICHEST = 0.999
"""Share of the oxygen short of complete combustion that CO and H2 may make up at the start."""


@bare
def balances(t: Species, amounts: Array, w: Work) -> bool:
    """Fill balances, what may form and the inert from ``amounts`` (S,); False where there is nothing."""
    b, absent, n, log_n, usable = w.elements[BALANCE], w.elements[ABSENT], w.species[AMOUNT], w.species[LOG], w.species[USABLE]
    whole = 0.0
    w.species[REACTING, :] = 0.0
    w.elements[:] = 0.0
    for j in range(len(n)):
        whole += amounts[j]
        n[j] = amounts[j] if t.kind[INERT, j] else 0.0
        log_n[j] = np.log(n[j]) if n[j] > 0.0 else 0.0
        usable[j] = 1.0 if t.kind[FORMS, j] else 0.0
    for i in range(len(t.atoms)):
        there = 0.0
        for j in range(len(n)):
            b[i] += amounts[j] * t.atoms[i, j]
            there += amounts[j] * t.has[i, j]
        if not there > 0.0:
            b[i], absent[i] = 0.0, 1.0
            for j in range(len(n)):
                if t.has[i, j] > 0.0:
                    usable[j] = 0.0
    return 0.0 < whole < np.inf


@bare
def oxygen(carbon: float, water: float, excess: float, log_k: float, ratio: float, log_s: float) -> float:
    """ln u, with u the amount of CO2 over that of CO and ``ratio`` u that of H2O over that of H2.

    ``log_k``: ln of the constant of CO + O2/2 = CO2; ``log_s``: ln of amount over pressure (over its standard).
    """
    middle = (2.0 * log_k + np.log(carbon + water / ratio) - np.log(2.0) - log_s) / 3.0
    if excess > 0.0:
        return max(log_k + 0.5 * (np.log(0.5 * excess) - log_s), middle)
    missing = max(min(-excess, RICHEST * (carbon + water)), TINY)
    a, b, c = missing * ratio, missing * (1.0 + ratio) - carbon * ratio - water, missing - carbon - water
    root = np.sqrt(b * b - 4.0 * a * c)
    return min(np.log(-2.0 * c / (b + root) if b > 0.0 else (root - b) / (2.0 * a)), middle)


@bare
def burned(t: Species, w: Work) -> float:
    """Amount of gas when all carbon and hydrogen are burned; the inert included."""
    b, at, n = w.elements[BALANCE], t.columns, w.species[AMOUNT]
    whole = b[at[C]] + 0.5 * (b[at[H]] + max(b[at[O]], 0.0) + b[at[N]]) + b[at[ARGON]]
    if at[S] >= 0:
        whole += b[at[S]]
    for j in range(len(n)):
        if t.kind[INERT, j]:
            whole += n[j]
    return whole


@bare
def place(t: Species, whole: float, pressure: bool, given: float, w: Work) -> None:
    """Fill ``LOG`` and ``POTENTIAL`` at the temperature of ``w``, whose properties it holds, and a pressure or volume ``given``.

    ``whole``: amount of gas from `burned`.
    """
    b, absent, pi, at = w.elements[BALANCE], w.elements[ABSENT], w.elements[POTENTIAL], t.columns
    g, log_n, usable, p0 = w.species[EXCESS], w.species[LOG], w.species[USABLE], t.reference_pressure[0]
    log_s = np.log(whole * p0 / given if pressure else p0 * given / R) - (0.0 if pressure else w.elements[STATE, 0])
    for j in range(len(g)):
        g[j] = w.species[ENTHALPY, j] - w.species[ENTROPY, j]
    carbon, water = b[at[C]], 0.5 * b[at[H]]
    if absent[at[O]] > 0.0:
        pi[at[H]] = 0.5 * (g[at[H2]] + np.log(water) - log_s)
    else:
        log_k = g[at[CO]] + 0.5 * g[at[O2]] - g[at[CO2]]
        ratio = np.exp(min(max(g[at[H2]] + g[at[CO2]] - g[at[H2O]] - g[at[CO]], -STEEPEST), STEEPEST))
        log_u = oxygen(carbon, water, b[at[O]], log_k, ratio, log_s)
        u = np.exp(min(log_u, MOST))
        pi[at[O]] = log_u - log_k + 0.5 * g[at[O2]]
        pi[at[C]] = g[at[CO2]] + np.log(carbon * u / (1.0 + u)) - log_s
        pi[at[H]] = 0.5 * (g[at[H2O]] + np.log(water * ratio * u / (1.0 + ratio * u)) - log_s)
    pi[at[N]] = 0.5 * (g[at[N2]] + np.log(0.5 * b[at[N]]) - log_s)
    pi[at[ARGON]] = g[at[AR]] + np.log(b[at[ARGON]]) - log_s
    if at[S] >= 0:
        pi[at[S]] = g[at[SO2]] + np.log(b[at[S]]) - log_s
    for j in range(len(g)):
        g[j] = log_s - g[j]
    for i in range(len(t.atoms)):
        if absent[i] > 0.0:
            pi[i] = 0.0
        for j in range(len(g)):
            g[j] += t.atoms[i, j] * pi[i]
    log_whole = np.log(whole)
    for j in range(len(g)):
        if usable[j] > 0.0:
            log_n[j] = min(max(g[j], LOWEST), log_whole + (0.0 if t.kind[MAJOR, j] else LOG_SHARE))
