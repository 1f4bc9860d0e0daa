"""The kernel of the real gas beside equilibrium: batches at fixed composition, and completely burned.

Completely burned rich gas takes the water-gas composition of its own temperature, as in `fuelair.gas.real_engine`.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import numpy.typing as npt

from fuelair.gas.compiled import virial
from fuelair.gas.compiled.equations import thermal
from fuelair.gas.compiled.jit import bare, compiled
from fuelair.gas.compiled.layout import (
    AMOUNT,
    AR,
    ARGON,
    BALANCE,
    CARBON,
    CO,
    CO2,
    H2,
    H2O,
    HYDROGEN,
    INERT,
    N2,
    NITROGEN,
    O2,
    OXYGEN,
    PAIRS,
    SO2,
    ST,
    SULFUR,
    TP,
    TV,
    Species,
    Work,
    species_of,
    work_for,
)
from fuelair.gas.compiled.real_point import Mixed, Point, mix, search
from fuelair.gas.compiled.start import balances, water_gas
from fuelair.gas.engine import PRESSURE_LIMIT_OF_DATA, Array, Codes, GasState, Pair, Status
from fuelair.gas.frozen import frozen_state
from fuelair.gas.polynomials import T_BREAK
from fuelair.gas.real_engine import STALL, WATER_GAS_START, WATER_GAS_STEPS, WATER_GAS_TOLERANCE
from fuelair.gas.real_gas import VirialTable
from fuelair.gas.species import SpeciesTable

FIELDS = ("T", "p", "v", "u", "h", "s", "cp", "sound")
"""Columns of the result."""
MISSES = 4
"""Rounds of the water-gas composition that may find no state: the composition of another temperature may have none."""
OUTSIDE, NONE, SHORT = int(Status.OUTSIDE_DATA), int(Status.NO_SOLUTION), int(Status.OXYGEN_BELOW_CARBON_MONOXIDE)


@bare
def standard(t: Species, j: int, T: float) -> float:
    """Standard Gibbs energy of a species over R T."""
    a = t.polynomials[0 if T < T_BREAK else 1]
    _, h, s = thermal(a[0, j], a[1, j], a[2, j], a[3, j], a[4, j], a[5, j], a[6, j], a[7, j], a[8, j], T, 1.0 / T, np.log(T))
    return float(h - s)


@bare
def burn(t: Species, T: float, w: Work) -> bool:
    """Completely burned gas at ``T`` into ``AMOUNT``, whose inert stay; True if not even all carbon burns to CO."""
    b, at, n = w.elements[BALANCE], t.columns, w.species[AMOUNT]
    carbon, water, excess = b[at[CARBON]], 0.5 * b[at[HYDROGEN]], b[at[OXYGEN]]
    limit, missing = carbon + water, max(-excess, 0.0)
    short = missing > limit * (1.0 + 1e-12) + 1e-300
    missing = min(missing, limit)
    co = 0.0
    if missing > 0.0:
        g = standard(t, at[H2], T) + standard(t, at[CO2], T) - standard(t, at[H2O], T) - standard(t, at[CO], T)
        co = min(max(carbon / (1.0 + water_gas(carbon, water, missing, np.exp(g))), missing - water, 0.0), carbon, missing)
    h2 = min(max(missing - co, 0.0), water)
    for j in range(len(n)):
        if not t.kind[INERT, j]:
            n[j] = 0.0
    n[at[CO]], n[at[CO2]], n[at[H2]], n[at[H2O]] = co, carbon - co, h2, water - h2
    n[at[O2]], n[at[N2]], n[at[AR]] = 0.5 * max(excess, 0.0), 0.5 * b[at[NITROGEN]], b[at[ARGON]]
    if at[SULFUR] >= 0:
        n[at[SO2]] = b[at[SULFUR]]
    return bool(short)


@bare
def store(mixed: Mixed, f: virial.Fluids, blend: virial.Blend, point: Point, found: bool, fields: Array) -> int:
    """Write a point into its column (8,) of the result; returns its status."""
    for k in range(8):
        fields[k] = np.nan
    if not found:
        return NONE
    fields[0], fields[1], fields[2], fields[3] = point.T, point.p, point.v, point.u
    fields[4], fields[5], fields[6], fields[7] = point.h, point.s, point.cp, point.sound
    inside = mixed.t_min <= point.T <= mixed.t_max and 0.0 < point.p <= PRESSURE_LIMIT_OF_DATA
    claimed = virial.valid(f, virial.at_temperature(f, point.T, blend), point.T, mixed.moles / point.v)
    return 0 if inside and claimed else OUTSIDE


@bare
def something(n: Array) -> bool:
    """Whether there is any gas."""
    whole = 0.0
    for j in range(len(n)):
        whole += n[j]
    return 0.0 < whole < np.inf


@compiled
def states(
    t: Species, coefficients: Array, limits: Array, f: virial.Fluids, pair: int, x: Array, y: Array, start: Array, complete: bool,
    amounts: Array, fields: Array, status: Codes, iterations: npt.NDArray[np.int32],
) -> None:  # fmt: skip
    """States of fixed composition, or completely burned, of a batch.

    amounts (N, S): given, and burned in place when ``complete``; start (N,) [K], 0 for none; fields (N, 8), status and
    iterations (N,) are filled.
    """
    w, blend, a = work_for(t), virial.blend_for(f), np.zeros(18)
    n, point, found = w.species[AMOUNT], Point(0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0), False
    for i in range(len(x)):
        previous, short, rounds, mixed = np.inf, False, 1, Mixed(0.0, 0.0, 0.0, 0.0, 0.0)
        T = x[i] if pair in (TP, TV) else (y[i] if pair == ST else WATER_GAS_START)
        good = np.isfinite(x[i]) and 0.0 < y[i] < np.inf and (x[i] > 0.0 or pair not in (TP, TV))
        good = good and (balances(t, amounts[i], w) if complete else something(amounts[i]))
        if complete and good and w.elements[BALANCE, t.columns[OXYGEN]] < 0.0:
            rounds = WATER_GAS_STEPS
        found, settled = False, not complete or rounds == 1
        for k in range(rounds if good else 0):
            if complete:
                short = burn(t, T, w)
            else:
                n[:] = amounts[i]
            mixed = mix(coefficients, limits, t.reference_pressure[0], n, a)
            virial.contract(f, n, mixed.moles, blend)
            point, iterations[i], found = search(mixed, a, f, blend, pair, x[i], y[i], start[i] if k == 0 else T)
            if rounds == 1 or (not found and k >= MISSES):
                break
            size, T = abs(point.T / T - 1.0) if found else np.inf, point.T
            settled = size <= WATER_GAS_TOLERANCE or (size <= STALL and size >= previous)
            if settled:
                break
            previous = size
        if complete and good:
            amounts[i] = n
        status[i] = store(mixed, f, blend, point, found, fields[i])
        if found and not settled:
            status[i] = NONE
        if short:
            status[i] = SHORT


def fixed(
    table: SpeciesTable, vt: VirialTable | None, pair: Pair, x: Array, y: Array, amounts: Array,
    *, start: Array | None = None, complete: bool = False,
) -> GasState:  # fmt: skip
    """States of the gas of a table from a pair of properties.

    Parameters
    ----------
    table, vt : species, and their virial coefficients; None for the ideal gas.
    pair, x, y, amounts : as the engine takes them; ``complete`` burns the gas completely first.
    start : temperature near the answer [K]; zero or None for none.
    """
    if vt is None:
        return frozen_state(table, pair, x, y, amounts)
    n = len(x)
    amounts = np.array(amounts, order="C") if complete else np.ascontiguousarray(amounts)
    fields, status, iterations = np.empty((n, 8)), np.zeros(n, np.int8), np.zeros(n, np.int32)
    states(
        species_of(table), table.coefficients, limits_of(table), virial.fluids_of(vt), PAIRS.index(pair),
        np.ascontiguousarray(x, dtype=float), np.ascontiguousarray(y, dtype=float), np.zeros(n) if start is None else start,
        complete, amounts, fields, status, iterations,
    )  # fmt: skip
    columns = dict(zip(FIELDS, np.ascontiguousarray(fields.T), strict=True))
    return GasState(amounts=amounts, status=status, iterations=iterations, **columns)


@lru_cache(maxsize=64)
def limits_of(table: SpeciesTable) -> Array:
    """Least and greatest temperature of every species (2, S) [K]."""
    return np.array([table.t_min, table.t_max])
