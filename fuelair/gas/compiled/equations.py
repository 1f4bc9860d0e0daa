"""The equations of one Newton step of the equilibrium of one state: potentials, sums over species, the small system.

The mathematics is that of `fuelair.gas.gibbs`. What differs:

* Elements are counted as C, H, N, Ar, S and the oxygen excess O - 2 C - H/2 - 2 S. In these numbers the products of
  complete combustion have none of the excess, so that its balance holds traces only and keeps all its digits.
* The unknowns are the changes of the potentials of the elements; no large numbers cancel.
* The partial energies and volumes of a real gas stand in the matrix; only the change of its residual
  potentials with composition is left out.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from fuelair.gas import polynomials
from fuelair.gas.compiled import virial
from fuelair.gas.compiled.jit import bare, summing
from fuelair.gas.compiled.layout import (
    ABSENT,
    AMOUNT,
    BALANCE,
    CP,
    ENERGY,
    ENTHALPY,
    ENTROPY,
    EXCESS,
    LOG,
    POTENTIAL,
    REACTING,
    RIGHT,
    SIZE,
    SP,
    ST,
    SV,
    TP,
    TV,
    USABLE,
    UV,
    WEIGHT,
    Species,
    Work,
)
from fuelair.gas.engine import Array
from fuelair.gas.polynomials import T_BREAK, R

thermal = bare(polynomials.thermal)


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
    return Totals(
        whole, total_energy, total_entropy + whole * (r.s + log_z), capacity + whole * (r.cv + warm * expansion - 1.0), whole
    )


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
def elements(t: Species, w: Work) -> None:
    """Sums over what may form of the products of atoms into the matrix, and the gaps of the balances into the right side."""
    n, m, e = w.species[REACTING], w.matrix, len(t.atoms)
    for i in range(e):
        one, have = t.atoms[i], 0.0
        for j in range(len(n)):
            have += n[j] * one[j]
        w.elements[RIGHT, i] = w.elements[BALANCE, i] - have
        for k in range(i, e):
            other, value = t.atoms[k], 0.0
            for j in range(len(n)):
                value += n[j] * one[j] * other[j]
            m[i, k] = m[k, i] = value


@bare
def leave_out(t: Species, w: Work) -> None:
    """Replace the equations of absent elements by zero changes."""
    for i in range(len(t.atoms)):
        if w.elements[ABSENT, i] > 0.0:
            for k in range(len(w.matrix)):
                w.matrix[i, k] = w.matrix[k, i] = 0.0
            w.matrix[i, i], w.elements[RIGHT, i] = 1.0, 0.0


@summing
def system(t: Species, w: Work, entropy: bool) -> float:
    """Complete `elements` by the columns and rows of ln T and of ln n or ln V.

    Unknowns: changes of the potentials, ln T, ln n or ln V. Equations: elements, energy (or ``entropy``), amount.
    Weights in the equation of entropy are partial energies less what the elements account for; returned is the
    entropy that the open balances of the elements account for.
    """
    s, m, right, e = w.species, w.matrix, w.elements[RIGHT], len(t.atoms)
    n, miss, energy, size, weight = s[REACTING], s[EXCESS], s[ENERGY], s[SIZE], s[WEIGHT]
    for j in range(len(n)):
        weight[j] = energy[j] - miss[j] if entropy else energy[j]
    open_balances = 0.0
    for i in range(e):
        one = t.atoms[i]
        rest = by_T = by_size = by_weight = 0.0
        for j in range(len(n)):
            part = n[j] * one[j]
            rest += part * miss[j]
            by_T += part * energy[j]
            by_size += part * size[j]
            by_weight += part * weight[j]
        open_balances += w.elements[POTENTIAL, i] * right[i]
        right[i] += rest
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
    entropy = pair in (SP, SV, ST)
    elements(t, w)
    gap = system(t, w, entropy)
    leave_out(t, w)
    right[e] += x / R - sums.entropy + gap if entropy else x / (R * T) - sums.energy
    if pair == ST:  # ln V is the unknown of the equation of entropy
        for k in range(e + 2):
            m[e + 1, k] = m[e, k]
        m[e + 1, e + 1] += sums.size
        right[e + 1] = right[e]
    else:
        m[e + 1, e + 1] -= sums.whole
    m[e, e] += sums.capacity
    if pair in (TP, ST):  # T stays
        for k in range(e + 2):
            m[e, k] = m[k, e] = 0.0
        m[e, e], right[e] = 1.0, 0.0
    return e if pair == TV else (e + 1 if pair in (UV, SV) else e + 2)


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
