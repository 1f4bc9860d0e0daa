"""The reduced-Gibbs Newton of `fuelair.gas.gibbs` for one state: compiled, with residual terms in the matrix.

The mathematics is that of `gibbs.py`. What differs:

* Elements are counted as C, H, N, Ar, S and the oxygen excess O - 2 C - H/2 - 2 S. In these numbers the products of
  complete combustion have none of the excess, so that its balance holds traces only and keeps all its digits.
* The unknowns are the changes of the potentials of the elements; no large numbers cancel.
* The partial energies and volumes of a real gas stand in the matrix; only the change of its residual
  potentials with composition is left out.
* While T or V is far off, the composition is placed anew (`start.place`) instead of moved.
* A state is done when the steps of all species have become small, traces included.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from fuelair.gas import polynomials
from fuelair.gas.compiled import virial
from fuelair.gas.compiled.jit import bare, summing
from fuelair.gas.compiled.layout import (
    ABSENT, AMOUNT, BALANCE, CP, ENERGY, ENTHALPY, ENTROPY, EXCESS, HP, LOG, POTENTIAL, REACTING, RIGHT, SIZE, SP,
    ST, STATE, STEP, SV, TP, TV, USABLE, UV, WEIGHT, Species, Work,
)  # fmt: skip
from fuelair.gas.compiled.start import burned, place
from fuelair.gas.engine import Array
from fuelair.gas.gibbs import LOWEST, MAJOR
from fuelair.gas.polynomials import T_BREAK, R

thermal = bare(polynomials.thermal)

TOLERANCE = 1e-13
"""Error of ln n, ln T and ln V at which a state is done, judged by the last step and how much smaller it was."""
STALL = 1e-10
"""Step that counts as done when it no longer shrinks."""
NEAR = 1e-5
"""Step above which nothing is done."""
FAR = 0.05
"""Step of ln T or ln V above which the composition is placed anew."""
PLACINGS = 6
"""How often that may happen."""
LEAP = 9.2103404
"""-ln of the mole fraction that a trace may reach in one step (1e-4)."""
LOG_MAJOR, LOG_COLDEST, LOG_HOTTEST = float(np.log(MAJOR)), float(np.log(20.0)), float(np.log(2e4))
"""ln of the mole fraction of a large amount, and of the temperatures at which the search gives up [K]."""


class Totals(NamedTuple):
    """Sums of a state: amount, energy (h or u) over R T, entropy, heat capacity (cp or cv) and dS/dln V over R."""

    whole: float
    energy: float
    entropy: float
    capacity: float
    size: float


@bare
def properties(t: Species, T: float, s: Array) -> None:
    """Standard properties of every species at a temperature into the rows of ``s``."""
    a = t.polynomials[0 if T < T_BREAK else 1]
    inverse, log_t = 1.0 / T, np.log(T)
    cp, h, entropy = s[CP], s[ENTHALPY], s[ENTROPY]
    for j in range(len(cp)):
        cp[j], h[j], entropy[j] = thermal(
            a[0, j], a[1, j], a[2, j], a[3, j], a[4, j], a[5, j], a[6, j], a[7, j], a[8, j], T, inverse, log_t
        )


@bare
def state(t: Species, f: virial.Fluids, real: bool, pressure: bool, T: float, given: float, w: Work, v: virial.Blend) -> Totals:
    """Amounts, potentials, partial energies and their sums at ``T`` and a pressure or volume ``given``."""
    s = w.species
    n, log_n, h, standard, cp = s[AMOUNT], s[LOG], s[ENTHALPY], s[ENTROPY], s[CP]
    mu, energy, size = s[EXCESS], s[ENERGY], s[SIZE]
    whole = 0.0
    for j in range(len(n)):
        if s[USABLE, j] > 0.0:
            n[j] = s[REACTING, j] = np.exp(log_n[j])
        whole += n[j]
    offset = np.log((given / whole if pressure else R * T / given) / t.reference_pressure[0])
    unit = 0.0 if pressure else 1.0
    total_energy = total_entropy = capacity = 0.0
    for j in range(len(n)):
        partial = standard[j] - log_n[j] - offset
        mu[j], energy[j], size[j] = h[j] - partial, h[j] - unit, 1.0
        total_energy += n[j] * energy[j]
        total_entropy += n[j] * partial
        capacity += n[j] * (cp[j] - unit)
    for i in range(len(t.atoms)):
        pi = w.elements[POTENTIAL, i]
        for j in range(len(n)):
            mu[j] -= pi * t.atoms[i, j]
    if not real:
        return Totals(whole, total_energy, total_entropy, capacity, whole)
    virial.contract(f, n, whole, v)
    k = virial.at_temperature(f, T, v)
    rho = virial.density(f, k, T, given) if pressure else whole / given
    r = virial.state(f, k, rho)
    virial.potentials(f, k, r, rho, v)
    expansion = r.Z + r.dZ_dT_T
    warm = expansion / (r.Z + r.dZ_drho_rho)  # -dln rho/dln T at fixed pressure
    log_z = np.log(r.Z) if pressure else 0.0
    departures(f, v, pressure, warm, log_z, s)
    if not pressure:
        return Totals(whole, total_energy + whole * r.u, total_entropy + whole * r.s, capacity + whole * r.cv, whole * expansion)
    total_energy += whole * (r.u + r.Z - 1.0)
    return Totals(whole, total_energy, total_entropy + whole * (r.s + log_z), capacity + whole * (r.cv + warm * expansion - 1.0), whole)


@bare
def departures(f: virial.Fluids, v: virial.Blend, pressure: bool, warm: float, log_z: float, s: Array) -> None:
    """Add the residual parts to potentials, partial energies and sizes; at a pressure from fugacity coefficients."""
    mu, energy, size = s[EXCESS], s[ENERGY], s[SIZE]
    for i in range(len(f.share)):
        for j in range(len(mu)):
            share, m = f.share[i, j], f.fluid[i, j]
            mu[j] += share * v.fluids[virial.MU, m]
            by_T, by_rho = share * v.fluids[virial.BY_T, m], share * v.fluids[virial.BY_RHO, m]
            if pressure:
                energy[j] += warm * by_rho - by_T
            else:
                energy[j] -= by_T
                size[j] += by_rho
    if pressure:
        for j in range(len(mu)):
            mu[j] -= log_z
            energy[j] += warm - 1.0


@summing
def system(t: Species, w: Work, entropy: bool) -> float:
    """Fill the matrix and right side with the sums over what may form; returns the gap of entropy that open balances make.

    Unknowns: changes of the potentials, ln T, ln n or ln V. Equations: elements, energy (or ``entropy``), amount.
    Weights in the equation of entropy are partial energies less what the elements account for.
    """
    s, m, right, e = w.species, w.matrix, w.elements[RIGHT], len(t.atoms)
    n, miss, energy, size, weight = s[REACTING], s[EXCESS], s[ENERGY], s[SIZE], s[WEIGHT]
    for j in range(len(n)):
        weight[j] = energy[j] - miss[j] if entropy else energy[j]
    open_balances = 0.0
    for i in range(e):
        one = t.atoms[i]
        for k in range(i, e):
            other, value = t.atoms[k], 0.0
            for j in range(len(n)):
                value += n[j] * one[j] * other[j]
            m[i, k] = m[k, i] = value
        have = rest = by_T = by_size = by_weight = 0.0
        for j in range(len(n)):
            part = n[j] * one[j]
            have += part
            rest += part * miss[j]
            by_T += part * energy[j]
            by_size += part * size[j]
            by_weight += part * weight[j]
        gap = w.elements[BALANCE, i] - have
        open_balances += w.elements[POTENTIAL, i] * gap
        right[i] = gap + rest
        m[i, e], m[i, e + 1], m[e, i], m[e + 1, i] = by_T, by_size, by_weight, by_size
    heat = cross = volume = amount = miss_heat = miss_amount = 0.0
    for j in range(len(n)):
        heat += n[j] * weight[j] * energy[j]
        cross += n[j] * energy[j]
        volume += n[j] * weight[j] * size[j]
        amount += n[j]
        miss_heat += n[j] * weight[j] * miss[j]
        miss_amount += n[j] * miss[j]
    m[e, e], m[e, e + 1], m[e + 1, e], m[e + 1, e + 1] = heat, volume, cross, amount
    right[e], right[e + 1] = miss_heat, miss_amount
    return open_balances


@bare
def equations(t: Species, pair: int, T: float, x: float, sums: Totals, w: Work) -> int:
    """Set up the equations of a pair; returns how many there are."""
    m, right, e = w.matrix, w.elements[RIGHT], len(t.atoms)
    entropy = pair == SP or pair == SV or pair == ST
    gap = system(t, w, entropy)
    for i in range(e):
        if w.elements[ABSENT, i] > 0.0:
            for k in range(e + 2):
                m[i, k] = m[k, i] = 0.0
            m[i, i], right[i] = 1.0, 0.0
    right[e] += x / R - sums.entropy + gap if entropy else x / (R * T) - sums.energy
    if pair == ST:  # ln V is the unknown of the equation of entropy
        for k in range(e + 2):
            m[e + 1, k] = m[e, k]
        m[e + 1, e + 1] += sums.size
        right[e + 1] = right[e]
    else:
        m[e + 1, e + 1] -= sums.whole
    m[e, e] += sums.capacity
    if pair == TP or pair == ST:  # T stays
        for k in range(e + 2):
            m[e, k] = m[k, e] = 0.0
        m[e, e], right[e] = 1.0, 0.0
    return e if pair == TV else (e + 1 if pair == UV or pair == SV else e + 2)


@bare
def solve(m: Array, right: Array, k: int) -> bool:
    """Solve the leading ``k`` equations into ``right``; False where it has no finite solution.

    Without search for pivots: the sums over elements are positive definite, and what is left for ln T and for ln n or
    ln V are derivatives that stability keeps from zero. A search would have to scale rows of 1e-40 first.
    """
    for i in range(k):
        if not abs(m[i, i]) > 0.0:
            return False
        inverse = 1.0 / m[i, i]
        for row in range(i + 1, k):
            factor = m[row, i] * inverse
            for column in range(i + 1, k):
                m[row, column] -= factor * m[i, column]
            right[row] -= factor * right[i]
    for i in range(k - 1, -1, -1):
        value = right[i]
        for column in range(i + 1, k):
            value -= m[i, column] * right[column]
        right[i] = value / m[i, i]
        if not abs(right[i]) < np.inf:
            return False
    return True


@bare
def steps(t: Species, w: Work, step_T: float, step_size: float) -> float:
    """Steps of ln n from the solution into the rows of ``w``; returns the largest that counts."""
    s = w.species
    step, largest = s[STEP], 0.0
    for j in range(len(step)):
        step[j] = s[ENERGY, j] * step_T + s[SIZE, j] * step_size - s[EXCESS, j]
    for i in range(len(t.atoms)):
        change = w.elements[RIGHT, i]
        for j in range(len(step)):
            step[j] += change * t.atoms[i, j]
    for j in range(len(step)):
        if s[USABLE, j] > 0.0 and (s[LOG, j] > LOWEST or step[j] > 0.0):
            largest = max(largest, abs(step[j]))
    return largest


@bare
def damping(w: Work, log_whole: float, step_T: float, step_size: float) -> float:
    """Share of the step to take: large amounts, ln T and ln n may not run away, traces may not leap up."""
    s = w.species
    limit, trace = 5.0 * max(abs(step_T), abs(step_size)), 1.0
    for j in range(s.shape[1]):
        if s[USABLE, j] > 0.0:
            log_x = s[LOG, j] - log_whole
            if log_x > LOG_MAJOR:
                limit = max(limit, abs(s[STEP, j]))
            elif s[STEP, j] - step_size > 0.0:
                trace = min(trace, abs((-log_x - LEAP) / (s[STEP, j] - step_size)))
    return min(trace, 2.0 / limit if limit > 2.0 else 1.0)


@bare
def advance(t: Species, w: Work, log_whole: float, step_T: float, step_size: float, at_entropy: bool) -> float:
    """Take the step; returns its size, at least 1 where it was damped."""
    s, change = w.species, max(abs(step_T), abs(step_size) if at_entropy else 0.0)
    change = max(change, steps(t, w, step_T, step_size))
    share = damping(w, log_whole, step_T, step_size)
    for j in range(s.shape[1]):
        if s[USABLE, j] > 0.0:
            s[LOG, j] = max(s[LOG, j] + share * s[STEP, j], LOWEST)
    for i in range(len(t.atoms)):
        w.elements[POTENTIAL, i] += share * w.elements[RIGHT, i]
    w.elements[STATE, 0] += share * step_T
    if at_entropy:
        w.elements[STATE, 1] += share * step_size
    return change if share == 1.0 else max(change, 1.0)


@bare
def jump(pair: int, step_T: float, step_size: float, w: Work) -> None:
    """Move T, or V of the pair ST, alone: energy is nearly linear in T, entropy in ln T."""
    if pair == HP or pair == UV:
        step_T = np.log1p(min(max(step_T, -0.6), 1.5))
    w.elements[STATE, 0] += min(max(step_T, -1.0), 1.0)
    if pair == ST:
        w.elements[STATE, 1] += min(max(step_size, -3.0), 3.0)


@bare
def search(
    t: Species, f: virial.Fluids, real: bool, pair: int, x: float, y: float, placings: int, most: int, w: Work, v: virial.Blend
) -> tuple[bool, int]:
    """Newton from ln T, ln V and, without ``placings``, the amounts in ``w``: whether it came to rest, and its steps.

    ``placings``: how often the composition may be placed anew; ``most``: steps allowed.
    """
    pressure, free = pair == TP or pair == HP or pair == SP, pair == HP or pair == UV or pair == SP or pair == SV
    at, e, burnt, anew, previous, T = w.elements[STATE], len(t.atoms), burned(t, w), placings > 0, 1.0, 0.0
    for done in range(1, most + 1):
        if free or done == 1:
            T = np.exp(at[0])
            properties(t, T, w.species)
        given = y if pressure else np.exp(at[1])
        if anew:
            place(t, burnt, pressure, given, w)
        sums = state(t, f, real, pressure, T, given, w, v)
        if not solve(w.matrix, w.elements[RIGHT], equations(t, pair, T, x, sums, w)):
            return False, done
        step_T = w.elements[RIGHT, e] if free else 0.0
        step_size = w.elements[RIGHT, e + 1] if pressure or pair == ST else 0.0
        distance = max(abs(step_T), abs(step_size) if pair == ST else 0.0)
        placings -= 1
        anew = placings > 0 and distance > FAR
        if anew:
            jump(pair, step_T, step_size, w)
        else:
            change = advance(t, w, np.log(sums.whole), step_T, step_size, pair == ST)
            if change <= NEAR and change * min(1.0, change / previous) <= TOLERANCE or change <= STALL and change >= previous:
                return True, done
            previous = change
        if not LOG_COLDEST < at[0] < LOG_HOTTEST:
            return False, done
    return False, most
