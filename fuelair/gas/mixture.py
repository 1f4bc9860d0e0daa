"""Polynomials of a mixture: mix the coefficients once, then every property is a short formula.

All per kg of gas. Ideal gas, NASA form of seven or nine coefficients with one break at 1000 K.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fuelair.gas.engine import Array, total, weighted
from fuelair.gas.polynomials import T_BREAK, R, thermal
from fuelair.gas.species import SpeciesTable


@dataclass(frozen=True, slots=True)
class Mixture:
    """Coefficients of N mixtures.

    Attributes
    ----------
    low, high : (N, 9) mixed coefficients below and above 1000 K [kmol/kg].
    moles : (N,) amount of gas [kmol/kg].
    mixing : (N,) entropy of mixing, -sum n ln x [kmol/kg].
    t_min, t_max : (N,) common validity range of the species present [K].
    reference_pressure : standard-state pressure [Pa].
    """

    low: Array
    high: Array
    moles: Array
    mixing: Array
    t_min: Array
    t_max: Array
    reference_pressure: float

    def thermal(self, T: Array) -> tuple[Array, Array, Array]:
        """cp [J/(kg K)], h [J/kg] and s at the reference pressure incl. mixing [J/(kg K)] at ``T`` (N,)."""
        if len(self.moles) == 1 < len(T) and (T[0] == T).all():  # one gas at one temperature: once is enough
            cp, h, s = self.thermal(T[:1])
            return np.broadcast_to(cp, T.shape), np.broadcast_to(h, T.shape), np.broadcast_to(s, T.shape)
        cp, h, s = _thermal(np.where((T < T_BREAK)[:, None], self.low, self.high), T)
        return R * cp, R * T * h, R * (s + self.mixing)

    def gas_constant(self) -> Array:
        """Specific gas constant [J/(kg K)], shape (N,)."""
        return R * self.moles


def mix(table: SpeciesTable, amounts: Array) -> Mixture:
    """Mix the table's polynomials for amounts (N, S) [kmol/kg]."""
    both = weighted(amounts, table.coefficients)
    moles = total(amounts)
    with np.errstate(divide="ignore", invalid="ignore"):
        x = amounts / moles[:, None]
        terms = np.where(amounts > 0.0, -amounts * np.log(x), 0.0)
    present = amounts > 0.0
    t_min = np.where(present, table.t_min, 0.0).max(axis=1)
    t_max = np.where(present, table.t_max, np.inf).min(axis=1)
    return Mixture(
        low=both[:, :9],
        high=both[:, 9:],
        moles=moles,
        mixing=total(terms),
        t_min=t_min,
        t_max=t_max,
        reference_pressure=table.reference_pressure,
    )


def gibbs(table: SpeciesTable, T: Array, columns: list[int] | None = None) -> Array:
    """Standard molar Gibbs energy over R T of every species at ``T`` (N,) -> (N, S), or of some columns of the table."""
    _, h, s = species_thermal(table, T, columns)
    return h - s


def species_thermal(table: SpeciesTable, T: Array, columns: list[int] | None = None) -> tuple[Array, Array, Array]:
    """cp/R, h/(R T) and standard s/R of every species, or of some columns of the table, at ``T`` (N,), each (N, S)."""
    low, high = (table.low, table.high) if columns is None else (table.low[columns], table.high[columns])
    return _thermal(np.where((T < T_BREAK)[:, None, None], low, high), T[:, None])


def gibbs_graphite(table: SpeciesTable, T: Array) -> Array:
    """Molar Gibbs energy over R T of graphite at ``T`` (N,) -> (N,)."""
    _, h, s = _thermal(np.where((T < T_BREAK)[:, None], table.graphite[0], table.graphite[1]), T)
    return h - s


def _thermal(a: Array, t: Array) -> tuple[Array, Array, Array]:
    """cp/R, h/(R T), s/R from coefficients (..., 9) at temperatures (...)."""
    a0, a1, a2, a3, a4, a5, a6, a7, a8 = np.moveaxis(a, -1, 0)
    return thermal(a0, a1, a2, a3, a4, a5, a6, a7, a8, t, 1.0 / t, np.log(t))
