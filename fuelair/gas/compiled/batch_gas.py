"""The compiled gas engine behind the seam: ideal gas, any number of states at a time.

Equilibrium by `nested` where its species are all that may form, else, and where it hands a state back, by the generic
Newton. Every equilibrium ends in a state of fixed composition that meets the given pair exactly, whose temperature
must be that of the equilibrium itself.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from fuelair.gas.compiled import fixed, nested, rows
from fuelair.gas.compiled.generic import equilibrate
from fuelair.gas.complete import complete_state, solid_carbon
from fuelair.gas.engine import PRESSURE_LIMIT_OF_DATA, Array, Chemistry, Codes, GasState, Pair, Status
from fuelair.gas.polynomials import R
from fuelair.gas.species import SpeciesTable

PAIRS: tuple[Pair, ...] = ("TP", "TV", "HP", "UV", "SP", "SV", "ST")
BASIS = ("CO", "H2", "O2", "N2")
PRODUCTS = ("CO2", "H2O", "OH", "H", "O", "NO", "N", "NO2", "HO2", "N2O", "H2O2", "CH4", "NH3", "HCN")
FIXED = ("Ar", "SO2")
ENDS = np.zeros(5, np.int8)
"""Status of each way in which the kernel ends a state."""
ENDS[[rows.FAILED, rows.WIDE, rows.UNFIT]], ENDS[rows.SOOT] = Status.NO_SOLUTION, Status.CARBON_OVER_OXYGEN
AGREEMENT = 1e-8
"""Relative distance of the equilibrium's own temperature from that which its composition has at the pair."""


@dataclass(frozen=True, slots=True, eq=False)
class Constants:
    """Numbers of a species table as the kernels take them.

    Attributes
    ----------
    linear : (S, 8) of each species: atoms C, H, N, O beyond C and what SO2 holds, oxygen excess; argon, sulfur, inert.
    base : (7, 18) polynomials of the basis CO H2 O2 N2 and of what is fixed, low and high range.
    reactions : (14 * 18,) polynomials of the products less those of the basis that they are made of.
    atoms : (5, 18) atoms C H N, O beyond C, and oxygen excess of the basis and the products.
    columns, stays : (18,) where those stand in the table, and (F,) where argon, SO2 and the inert species stand.
    mixing, limits : (S, 19), (2, S): see `fixed.solve`.
    whole : whether these species are all that equilibrium may form.
    """

    linear: Array
    base: Array
    reactions: Array
    atoms: Array
    columns: npt.NDArray[np.int64]
    stays: npt.NDArray[np.int64]
    mixing: Array
    limits: Array
    whole: bool


@lru_cache(maxsize=64)
def constants(table: SpeciesTable) -> Constants:
    """Numbers of a table; made once."""
    n, coefficients = len(table), table.coefficients
    names = BASIS + PRODUCTS
    whole = all(table.has(name) for name in names + FIXED[:1]) and all(
        name in names + FIXED for name, forms in zip(table.names, table.forms, strict=True) if forms
    )
    mixing = np.zeros((n, fixed.WIDTH))
    mixing[:, :18], mixing[:, 18] = coefficients, 1.0
    limits = np.array([table.t_min, table.t_max])
    if not whole:
        empty = np.zeros(0)
        return Constants(empty, empty, empty, empty, np.zeros(0, np.int64), np.zeros(0, np.int64), mixing, limits, False)

    def of(symbol: str) -> Array:
        column = table.element(symbol)
        return np.zeros(n) if column is None else table.reactive_atoms[:, column]

    carbon, hydrogen, oxygen, nitrogen, sulfur = (of(e) for e in "CHONS")
    oxygen = oxygen - 2.0 * sulfur
    beyond, excess = oxygen - carbon, oxygen - 2.0 * carbon - 0.5 * hydrogen
    linear, base = np.zeros((n, rows.PARTS)), np.zeros((7, 18))
    places = [table.index(name) for name in names]
    linear[:, :5] = np.stack([carbon, hydrogen, nitrogen, beyond, excess], axis=1)
    base[:4] = coefficients[places[:4]]
    stay = [(table.index(name), of(symbol)) for name, symbol in (("Ar", "Ar"), ("SO2", "S")) if table.has(name)]
    stay += [(int(j), np.eye(n)[j]) for j in np.flatnonzero(table.inert)]
    for k, (j, weight) in enumerate(stay):
        linear[:, 5 + k], base[4 + k] = weight, coefficients[j]
    co, h2, o2, n2 = places[:4]
    made = [
        coefficients[j]
        - carbon[j] * coefficients[co]
        - 0.5 * hydrogen[j] * coefficients[h2]
        - 0.5 * beyond[j] * coefficients[o2]
        - 0.5 * nitrogen[j] * coefficients[n2]
        for j in places[4:]
    ]
    atoms = np.stack([carbon, hydrogen, nitrogen, beyond, excess])[:, places]
    return Constants(
        linear=linear,
        base=base,
        reactions=np.concatenate(made),
        atoms=np.ascontiguousarray(atoms),
        columns=np.array(places, np.int64),
        stays=np.array([j for j, _ in stay], np.int64),
        mixing=mixing,
        limits=limits,
        whole=True,
    )


class BatchGas:
    """Compiled engine of the ideal gas. Stateless for its caller: equal calls give equal bits."""

    name = "compiled"

    def state(
        self,
        table: SpeciesTable,
        pair: Pair,
        x: Array,
        y: Array,
        amounts: Array,
        chemistry: Chemistry = "frozen",
        guess: Array | None = None,
    ) -> GasState:
        """States of a batch; see `fuelair.gas.engine.Engine.state`. ``guess`` is not needed and not used."""
        x, y = (np.ascontiguousarray(a, float) for a in np.broadcast_arrays(x, y))
        amounts = np.ascontiguousarray(amounts, float)
        if chemistry == "frozen":
            return _fixed(table, pair, x, y, amounts)
        if chemistry == "complete":
            return complete_state(table, pair, x, y, amounts)
        return _equilibrium(table, pair, x, y, amounts)


def _fixed(table: SpeciesTable, pair: Pair, x: Array, y: Array, amounts: Array, start: Array | None = None) -> GasState:
    numbers, n = constants(table), len(x)
    out, steps = np.empty((8, n)), np.empty(n, np.int32)
    failed, outside = np.empty(n, np.bool_), np.empty(n, np.bool_)
    begin = np.full(n, fixed.START) if start is None else start
    fixed.solve(
        PAIRS.index(pair), x, y, amounts, numbers.mixing, numbers.limits, (R, table.reference_pressure), begin,
        out, failed, outside, steps, PRESSURE_LIMIT_OF_DATA,
    )  # fmt: skip
    status = np.where(outside, np.int8(Status.OUTSIDE_DATA), np.where(failed, np.int8(Status.NO_SOLUTION), np.int8(Status.OK)))
    T, p, v, u, h, s, cp, sound = out
    return GasState(T=T, p=p, v=v, u=u, h=h, s=s, cp=cp, sound=sound, amounts=amounts, status=status, iterations=steps)


def _equilibrium(table: SpeciesTable, pair: Pair, x: Array, y: Array, amounts: Array) -> GasState:
    numbers, n = constants(table), len(x)
    out, found = np.empty((8, n)), np.empty_like(amounts)
    code, steps = np.full(n, rows.WIDE, np.int8), np.zeros(n, np.int32)
    if numbers.whole:
        nested.solve(
            PAIRS.index(pair), x, y, amounts, numbers.linear, numbers.base, numbers.reactions, numbers.atoms,
            numbers.columns, numbers.stays, (R, table.reference_pressure), out, found, code, steps,
        )  # fmt: skip
        _as_given(pair, x, y, out, code)
    else:
        code[solid_carbon(table, amounts)] = rows.SOOT
    status = ENDS[code]
    unsolved = np.flatnonzero(code != rows.DONE)
    out[:, unsolved], found[unsolved] = np.nan, amounts[unsolved]
    T, p, v, u, h, s, cp, sound = out
    state = GasState(T=T, p=p, v=v, u=u, h=h, s=s, cp=cp, sound=sound, amounts=found, status=status, iterations=steps)
    low, high = _limits(numbers, found)
    with np.errstate(invalid="ignore"):
        outside = (low > T) | (high < T) | (p > PRESSURE_LIMIT_OF_DATA)
    status[outside & (status == Status.OK)] = Status.OUTSIDE_DATA
    left = np.flatnonzero((code == rows.WIDE) | (code == rows.FAILED))
    if len(left):
        _generic(table, pair, x, y, amounts, left, state)
    return state


def _as_given(pair: Pair, x: Array, y: Array, out: Array, code: Codes) -> None:
    """What the pair gives stands as given, to the last bit."""
    solved = code == rows.DONE
    for letter, value in ((pair[0], x), (pair[1], y)):
        if letter in "TPV":
            np.copyto(out["TPV".index(letter)], value, where=solved)


def _limits(numbers: Constants, found: Array) -> tuple[Array | float, Array | float]:
    """Temperatures between which the data of every species present hold [K]: burned gas, and what stays where it is there."""
    low: Array | float = float(numbers.limits[0, numbers.columns].max()) if numbers.whole else 0.0
    high: Array | float = float(numbers.limits[1, numbers.columns].min()) if numbers.whole else np.inf
    for j in numbers.stays:
        if numbers.limits[0, j] > np.min(low) or numbers.limits[1, j] < np.max(high):
            there = found[:, j] > 0.0
            low = np.where(there, np.maximum(low, numbers.limits[0, j]), low)
            high = np.where(there, np.minimum(high, numbers.limits[1, j]), high)
    return low, high


def _generic(
    table: SpeciesTable, pair: Pair, x: Array, y: Array, amounts: Array, left: npt.NDArray[np.intp], state: GasState
) -> None:
    """Solve the states ``left`` by the generic Newton, into ``state``.

    Each ends in a state of fixed composition that meets the pair, whose temperature must be that of the equilibrium.
    """
    made = equilibrate(table, pair, x[left], y[left], amounts[left])
    start = np.where(made.failed, fixed.START, made.T)
    fit = _fixed(table, pair, np.where(made.failed, np.nan, x[left]), y[left], made.amounts, start)
    with np.errstate(invalid="ignore"):
        apart = (np.abs(made.T / fit.T - 1.0) > AGREEMENT) & (fit.status == Status.OK)
    fit.status[apart] = Status.NO_SOLUTION
    for name in ("T", "p", "v", "u", "h", "s", "cp", "sound"):
        getattr(state, name)[left] = np.where(apart, np.nan, getattr(fit, name))
    solved = ~made.failed
    state.amounts[left[solved]] = made.amounts[solved]
    state.status[left] = fit.status
    state.iterations[left] += made.iterations
