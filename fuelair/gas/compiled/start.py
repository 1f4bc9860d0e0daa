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
    ABSENT,
    AMOUNT,
    AR,
    ARGON,
    BALANCE,
    CARBON,
    CO,
    CO2,
    ENTHALPY,
    ENTROPY,
    EXCESS,
    FORMS,
    H2,
    H2O,
    HYDROGEN,
    INERT,
    LOG,
    MAJOR,
    N2,
    NITROGEN,
    O2,
    OXYGEN,
    POTENTIAL,
    REACTING,
    SO2,
    STATE,
    SULFUR,
    USABLE,
    Species,
    Work,
)
from fuelair.gas.engine import Array
from fuelair.gas.gibbs import LOWEST, SEED, TINY
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
def water_gas(carbon: float, water: float, missing: float, ratio: float) -> float:
    """u, the amount of CO2 over that of CO, when CO and H2 together are ``missing``; H2O over H2 is ``ratio`` u.

    ``ratio``: the constant of CO2 + H2 = CO + H2O turned round, H2O CO/(H2 CO2); ``carbon``, ``water``: CO + CO2, H2 + H2O.
    """
    a, b, c = missing * ratio, missing * (1.0 + ratio) - carbon * ratio - water, missing - carbon - water
    root = np.sqrt(max(b * b - 4.0 * a * c, 0.0))
    return float(-2.0 * c / (b + root) if b > 0.0 else (root - b) / (2.0 * a))


@bare
def oxygen(carbon: float, water: float, excess: float, log_k: float, ratio: float, log_s: float) -> float:
    """ln u as in `water_gas`, lean, rich or near stoichiometric.

    ``log_k``: ln of the constant of CO + O2/2 = CO2; ``log_s``: ln of amount over pressure (over its standard).
    """
    middle = (2.0 * log_k + np.log(carbon + water / ratio) - np.log(2.0) - log_s) / 3.0
    if excess > 0.0:
        return float(max(log_k + 0.5 * (np.log(0.5 * excess) - log_s), middle))
    missing = max(min(-excess, RICHEST * (carbon + water)), TINY)
    return float(min(np.log(water_gas(carbon, water, missing, ratio)), middle))


@bare
def burned(t: Species, w: Work) -> float:
    """Amount of gas when all carbon and hydrogen are burned; the inert included."""
    b, at, n = w.elements[BALANCE], t.columns, w.species[AMOUNT]
    whole = b[at[CARBON]] + 0.5 * (b[at[HYDROGEN]] + max(b[at[OXYGEN]], 0.0) + b[at[NITROGEN]]) + b[at[ARGON]]
    if at[SULFUR] >= 0:
        whole += b[at[SULFUR]]
    for j in range(len(n)):
        if t.kind[INERT, j]:
            whole += n[j]
    return float(whole)


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
    carbon, water = b[at[CARBON]], 0.5 * b[at[HYDROGEN]]
    if absent[at[OXYGEN]] > 0.0:
        pi[at[HYDROGEN]] = 0.5 * (g[at[H2]] + np.log(water) - log_s)
    else:
        log_k = g[at[CO]] + 0.5 * g[at[O2]] - g[at[CO2]]
        ratio = np.exp(min(max(g[at[H2]] + g[at[CO2]] - g[at[H2O]] - g[at[CO]], -STEEPEST), STEEPEST))
        log_u = oxygen(carbon, water, b[at[OXYGEN]], log_k, ratio, log_s)
        u = np.exp(min(log_u, MOST))
        pi[at[OXYGEN]] = log_u - log_k + 0.5 * g[at[O2]]
        pi[at[CARBON]] = g[at[CO2]] + np.log(carbon * u / (1.0 + u)) - log_s
        pi[at[HYDROGEN]] = 0.5 * (g[at[H2O]] + np.log(water * ratio * u / (1.0 + ratio * u)) - log_s)
    pi[at[NITROGEN]] = 0.5 * (g[at[N2]] + np.log(0.5 * b[at[NITROGEN]]) - log_s)
    pi[at[ARGON]] = g[at[AR]] + np.log(b[at[ARGON]]) - log_s
    if at[SULFUR] >= 0:
        pi[at[SULFUR]] = g[at[SO2]] + np.log(b[at[SULFUR]]) - log_s
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


@bare
def plain(t: Species, w: Work) -> None:
    """The start of `gibbs.py`: complete combustion, and a seed of everything else that may form.

    The oxygen short of it is shared between CO and H2 in one proportion.
    """
    b, at, log_n, usable = w.elements[BALANCE], t.columns, w.species[LOG], w.species[USABLE]
    whole, carbon, water, excess = burned(t, w), b[at[CARBON]], 0.5 * b[at[HYDROGEN]], b[at[OXYGEN]]
    share = min(max(-excess, 0.0) / max(carbon + water, TINY), 1.0)
    for j in range(len(log_n)):
        if usable[j] > 0.0:
            log_n[j] = np.log(SEED * whole)
    fill(w, at[CO2], carbon * (1.0 - share))
    fill(w, at[CO], carbon * share)
    fill(w, at[H2O], water * (1.0 - share))
    fill(w, at[H2], water * share)
    fill(w, at[O2], 0.5 * max(excess, 0.0))
    fill(w, at[N2], 0.5 * b[at[NITROGEN]])
    fill(w, at[AR], b[at[ARGON]])
    if at[SULFUR] >= 0:
        fill(w, at[SO2], b[at[SULFUR]])


@bare
def fill(w: Work, j: int, value: float) -> None:
    """Set ln n of a species that may form, if that is more than its seed."""
    if w.species[USABLE, j] > 0.0 and value > 0.0:
        w.species[LOG, j] = max(w.species[LOG, j], np.log(value))
