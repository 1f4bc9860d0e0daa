"""Generic equilibrium: a reduced-Gibbs Newton over any species table, array-wise.

Method: minimum of the free energy with element potentials (Gordon and McBride, NASA RP-1311, 1994,
from memory). The logarithms of the amounts are eliminated, which leaves one small system a state:
the potentials of the elements, and as the pair demands the steps of ln T, ln n or ln V. Two forms:

* at a volume (TV UV SV ST), mu_j/RT = g_j + ln(n_j R T/(p0 V)) + residual_j(T, density, x);
* at a pressure (TP HP SP), mu_j/RT = g_j + ln(x_j p/p0) + ln(fugacity coefficient_j).

Residual terms of a real gas enter the potentials and the balances in full; only their derivatives are
left out of the Newton matrix, so that the iteration stays as simple and converges a little slower.
No element of a batch influences another.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from fuelair.gas.complete import composition
from fuelair.gas.engine import Array, Mask, Pair, total, weighted
from fuelair.gas.mixture import species_thermal
from fuelair.gas.polynomials import R
from fuelair.gas.species import SpeciesTable

MAX_ITERATIONS = 200
TOLERANCE = 1e-13
"""Change of amounts over their sum, and of ln T and ln n, at which a state is done."""
STALL = 1e-10
"""Change that counts as done when it no longer shrinks."""
START_TEMPERATURE = 2500.0
HOTTEST_GUESS = 4000.0
"""A hotter guess is not used: above 6000 K the polynomials of the data run astray and offer further roots."""
SEED = 1e-5
"""Mole fraction that species other than those of complete combustion start from."""
LOWEST = -690.0
"""Smallest ln n that is carried."""
MAJOR = 1e-8
"""Mole fraction above which a species limits the step of the whole state."""
TINY = 1e-290


@dataclass(frozen=True, slots=True)
class Departure:
    """What a real gas adds at given T, composition and volume or pressure; arrays (N,), or (N, S) for ``mu``.

    Attributes
    ----------
    Z : compressibility factor.
    mu : at a volume the residual chemical potential over RT; at a pressure ln of the fugacity coefficient.
    u, h : residual energy and enthalpy over RT; s : residual entropy over R at the same T and volume
        (at a pressure: at the same T and pressure); cv, cp : residual heat capacities over R.
    """

    Z: Array
    mu: Array
    u: Array
    h: Array
    s: Array
    cv: Array
    cp: Array


DepartureOf = Callable[[Array, Array, Array, bool], Departure]
"""(T, volume per kg or pressure, amounts (N, S), at a pressure?) -> Departure."""


@dataclass(frozen=True, slots=True)
class Equilibrium:
    """Solution of a batch: amounts (N, S) [kmol/kg], temperature (N,) [K], where it failed, iterations."""

    amounts: Array
    T: Array
    failed: Mask
    iterations: npt.NDArray[np.int32]


@dataclass(slots=True)
class _State:
    """Working arrays of one iteration."""

    log_n: Array
    log_T: Array
    log_V: Array


def equilibrate(
    table: SpeciesTable,
    pair: Pair,
    x: Array,
    y: Array,
    amounts: Array,
    allowed: Mask,
    *,
    departure: DepartureOf | None = None,
    guess: Array | None = None,
) -> Equilibrium:
    """Equilibrium amounts for a pair of properties.

    Parameters
    ----------
    table, amounts : species, and amounts (N, S) [kmol/kg] that fix elements and inert species.
    pair, x, y : the pair and its values in SI, per kg; shape (N,).
    allowed : (N, S) species that may form.
    departure : residual functions of a real gas; None for the ideal gas.
    guess : temperature to start from [K]; default 2500 K.

    Elements absent from a case are dropped from it. Elements are restored exactly at the end.
    """
    n = len(x)
    finite = np.isfinite(x) & np.isfinite(y) & (y > 0.0)
    if pair[0] == "T":
        finite &= x > 0.0
    T0 = np.full(n, START_TEMPERATURE)
    if guess is not None:
        T0 = np.where((guess > 0.0) & (guess <= HOTTEST_GUESS), guess, START_TEMPERATURE)
    T = np.where(finite, x, START_TEMPERATURE) if pair[0] == "T" else T0
    T = np.where(finite, y, START_TEMPERATURE) if pair == "ST" else T
    start, _ = composition(table, amounts, np.full(n, START_TEMPERATURE))
    atoms = table.reactive_atoms
    b = weighted(start, atoms)
    inert = np.where(table.inert, start, 0.0)
    absent = b <= 0.0
    usable = allowed & ~((atoms > 0.0)[None] & absent[:, None, :]).any(axis=2) & ~table.inert
    whole = total(start)
    finite &= whole > 0.0
    whole = np.where(finite, whole, 1.0)
    log_n = np.where(usable, np.log(np.maximum(np.where(usable, start, 0.0), SEED * whole[:, None])), -np.inf)
    state = _State(log_n, np.log(T), np.log(R * whole * T / 5e6) if pair[1] != "V" else np.log(np.maximum(y, TINY)))
    active, failed = finite.copy(), ~finite
    iterations, previous = np.zeros(n, np.int32), np.full(n, np.inf)
    solver = _Solver(table, pair, np.where(finite, x, 1.0), np.where(finite, y, 1.0), b, absent, inert, departure)
    for _ in range(MAX_ITERATIONS):
        change, broken = solver.step(state, active, usable)
        iterations += active
        failed |= active & broken
        settled = (change <= TOLERANCE) | ((change <= STALL) & (change >= previous))
        previous = np.where(active, change, previous)
        active &= ~settled & ~broken
        if not active.any():
            break
    failed |= active
    made = np.where(usable, np.exp(np.maximum(state.log_n, LOWEST)), 0.0)
    return Equilibrium(restore(table, made, start, atoms) + inert, np.exp(state.log_T), failed, iterations)


def restore(table: SpeciesTable, amounts: Array, start: Array, atoms: Array) -> Array:
    """Close the elements of ``amounts`` on those of ``start`` exactly, changing each amount in proportion.

    The smallest such change: n_j (1 + sum_e a_je q_e). Inert species are not part of it.
    """
    n = np.where(table.inert, 0.0, amounts)
    miss = weighted(np.where(table.inert, 0.0, start), atoms) - weighted(n, atoms)
    matrix = weighted(n, _products(atoms)).reshape(len(n), atoms.shape[1], atoms.shape[1])
    present = np.diagonal(matrix, axis1=1, axis2=2) > 0.0
    q = _solve(_identity_where(matrix, ~present), np.where(present, miss, 0.0))
    shift = weighted_rows(q, atoms.T)
    return np.asarray(np.where(np.abs(shift) < 0.5, n * (1.0 + shift), n))


class _Solver:
    """Right-hand sides and matrices of the reduced system for one batch."""

    def __init__(
        self,
        table: SpeciesTable,
        pair: Pair,
        x: Array,
        y: Array,
        b: Array,
        absent: Mask,
        inert: Array,
        departure: DepartureOf | None,
    ) -> None:
        self.table, self.pair, self.x, self.y, self.b, self.absent, self.inert = table, pair, x, y, b, absent, inert
        self.atoms, self.pairs, self.departure = table.reactive_atoms, _products(table.reactive_atoms), departure
        self.at_pressure = pair[1] == "P"
        self.free_T = pair[0] != "T" and pair != "ST"
        self.free_size = self.at_pressure or pair == "ST"
        self.log_p0 = float(np.log(table.reference_pressure))

    def step(self, state: _State, active: Mask, usable: Mask) -> tuple[Array, Mask]:
        """One damped Newton step in place; returns the size of the change and where it broke down."""
        T = np.exp(state.log_T)
        n = np.where(usable, np.exp(state.log_n), 0.0)
        amounts = n + self.inert
        whole = total(amounts)
        cp, h, s = species_thermal(self.table, T)  # over R, RT, R; (N, S)
        size = self.y if self.at_pressure else np.exp(state.log_V)
        real = None if self.departure is None else self.departure(T, size, amounts, self.at_pressure)
        with np.errstate(divide="ignore", invalid="ignore"):
            log_x = np.where(amounts > 0.0, np.log(np.maximum(amounts, TINY) / whole[:, None]), 0.0)
        if self.at_pressure:
            log_activity = log_x + (np.log(self.y) - self.log_p0)[:, None]
        else:
            log_activity = log_x + (np.log(whole * R) + state.log_T - state.log_V - self.log_p0)[:, None]
        mu = h - s + log_activity + (0.0 if real is None else real.mu)
        energy = h if self.at_pressure else h - 1.0  # h or u over RT of each species
        entropy = s - log_activity - (0.0 if self.at_pressure else 1.0)  # dS/dn_j over R
        matrix, right = self._system(n, amounts, whole, T, mu, energy, entropy, cp, s - log_activity, real, state)
        broken: Mask = np.asarray(~np.isfinite(matrix).all(axis=(1, 2)) | ~np.isfinite(right).all(axis=1))
        matrix = _identity_where(matrix, np.broadcast_to(broken[:, None], right.shape))
        solution = _solve(matrix, np.where(broken[:, None], 0.0, right))
        elements = self.atoms.shape[1]
        step_T = solution[:, elements] if self.free_T else np.zeros(len(T))
        step_size = solution[:, -1] if self.free_size else np.zeros(len(T))
        step_n = weighted_rows(solution[:, :elements], self.atoms.T) - mu + energy * step_T[:, None] + step_size[:, None]
        step_n = np.where(usable, step_n, 0.0)
        damping = self._damping(step_n, step_T, step_size, log_x)
        moved = active & ~broken
        state.log_n = np.where(moved[:, None] & usable, np.maximum(state.log_n + damping[:, None] * step_n, LOWEST), state.log_n)
        state.log_T = np.where(moved, state.log_T + damping * step_T, state.log_T)
        if self.pair == "ST":
            state.log_V = np.where(moved, state.log_V + damping * step_size, state.log_V)
        change = np.maximum(total(np.abs(step_n) * n) / whole, np.abs(step_T))
        change = np.maximum(change, np.abs(step_size)) if self.pair == "ST" else change
        bad = ~np.isfinite(change) | (state.log_T > np.log(2e4)) | (state.log_T < np.log(20.0))
        return np.where(damping < 1.0, np.maximum(change, 1.0), change), broken | (active & bad)

    def _system(
        self,
        n: Array,
        amounts: Array,
        whole: Array,
        T: Array,
        mu: Array,
        energy: Array,
        entropy: Array,
        cp: Array,
        partial_s: Array,
        real: Departure | None,
        state: _State,
    ) -> tuple[Array, Array]:
        """Matrix (N, K, K) and right side (N, K): element potentials, then ln T, then ln n or ln V."""
        count, elements = len(T), self.atoms.shape[1]
        k = elements + int(self.free_T) + int(self.free_size)
        matrix, right = np.zeros((count, k, k)), np.zeros((count, k))
        matrix[:, :elements, :elements] = weighted(n, self.pairs).reshape(count, elements, elements)
        right[:, :elements] = self.b - weighted(n, self.atoms) + weighted(n * mu, self.atoms)
        if self.free_T:
            matrix[:, :elements, elements] = weighted(n * energy, self.atoms)
        if self.free_size:
            matrix[:, :elements, -1] = weighted(n, self.atoms)
        if self.pair[0] in "HU":
            target = self.x / (R * T)
            have = total(amounts * energy)
            capacity = total(amounts * (cp if self.at_pressure else cp - 1.0))
            if real is not None:
                have = have + whole * (real.h if self.at_pressure else real.u)
                capacity = capacity + whole * (real.cp if self.at_pressure else real.cv)
            self._row(matrix, right, elements, n, energy, energy, mu, capacity, target - have)
        elif self.pair[0] == "S":
            have = total(amounts * partial_s)
            capacity = total(amounts * (cp if self.at_pressure else cp - 1.0))
            if real is not None:
                have = have + whole * real.s
                capacity = capacity + whole * (real.cp if self.at_pressure else real.cv)
            row = elements if self.free_T else k - 1
            self._row(matrix, right, row, n, entropy, energy, mu, capacity if self.free_T else whole, self.x / R - have)
        if self.at_pressure:  # n stays the sum of the amounts
            matrix[:, -1, :elements] = weighted(n, self.atoms)
            matrix[:, -1, -1] = total(n) - whole
            right[:, -1] = total(n * mu)
            if self.free_T:
                matrix[:, -1, elements] = total(n * energy)
        return _identity_where(matrix, np.pad(self.absent, ((0, 0), (0, k - elements)))), right

    def _row(
        self, matrix: Array, right: Array, row: int, n: Array, weight: Array, energy: Array, mu: Array, own: Array, miss: Array
    ) -> None:
        """Balance sum(n w dln n) + own * d = miss, the steps of ln n expressed by the unknowns."""
        elements = self.atoms.shape[1]
        matrix[:, row, :elements] = weighted(n * weight, self.atoms)
        right[:, row] = miss + total(n * weight * mu)
        if self.free_T:
            matrix[:, row, elements] = total(n * weight * energy) + (own if row == elements else 0.0)
        if self.free_size:
            matrix[:, row, -1] = total(n * weight) + (own if row != elements or not self.free_T else 0.0)

    @staticmethod
    def _damping(step_n: Array, step_T: Array, step_size: Array, log_x: Array) -> Array:
        """Share of the step to take: large amounts, ln T and ln n may not run away, traces may not leap up."""
        major = log_x > np.log(MAJOR)
        largest = np.max(np.where(major, np.abs(step_n), 0.0), axis=1)
        limit = np.maximum.reduce([5.0 * np.abs(step_T), 5.0 * np.abs(step_size), largest])
        with np.errstate(divide="ignore", invalid="ignore"):
            whole = np.where(limit > 2.0, 2.0 / limit, 1.0)
            rising = ~major & (step_n - step_size[:, None] > 0.0) & (log_x < -9.2103404)
            room = np.abs((-log_x - 9.2103404) / (step_n - step_size[:, None]))
        trace = np.min(np.where(rising, room, 1.0), axis=1)
        return np.asarray(np.minimum(np.minimum(whole, trace), 1.0))


def weighted_rows(q: Array, weights: Array) -> Array:
    """(N, K) times (K, S) -> (N, S) in fixed order of K."""
    return weighted(q, weights)


def _products(atoms: Array) -> Array:
    """(S, E*E) products of the columns of ``atoms``."""
    return np.asarray((atoms[:, :, None] * atoms[:, None, :]).reshape(len(atoms), -1))


def _identity_where(matrix: Array, rows: Mask) -> Array:
    """Replace rows and columns by those of the identity."""
    out = np.where(rows[:, :, None] | rows[:, None, :], 0.0, matrix)
    k = matrix.shape[1]
    out[:, np.arange(k), np.arange(k)] = np.where(rows, 1.0, out[:, np.arange(k), np.arange(k)])
    return out


def _solve(matrix: Array, right: Array) -> Array:
    """Solve each small system, scaled row by row and column by column; NaN where it is singular."""
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        column = np.sqrt(np.max(np.abs(matrix), axis=1))
        column = np.where(column > 0.0, column, 1.0)
        scaled = matrix / column[:, None, :]
        row = np.max(np.abs(scaled), axis=2)
        row = np.where(row > 0.0, row, 1.0)
        scaled = scaled / row[:, :, None]
    try:
        found = np.linalg.solve(scaled, (right / row)[:, :, None])[:, :, 0]
    except np.linalg.LinAlgError:
        found = np.full_like(right, np.nan)
        for i in range(len(right)):
            try:
                found[i] = np.linalg.solve(scaled[i], right[i] / row[i])
            except np.linalg.LinAlgError:
                continue
    return np.asarray(found / column)
