"""The seam between the cycle and the gas: pairs, chemistry, status, the state record, the protocol.

Everything is a batch: scalars of a state are arrays of shape (N,), compositions are amounts of
shape (N, S) in kmol per kg of gas. Every element carries its own status; a bad element holds NaN
inside the physics rooms and becomes null at the edges.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum
from typing import Any, Literal, Protocol

import numpy as np
import numpy.typing as npt

from fuelair.gas.species import SpeciesTable

Array = npt.NDArray[np.float64]
Codes = npt.NDArray[np.int8]
Mask = npt.NDArray[np.bool_]
Index = npt.NDArray[np.intp]
Pair = Literal["TP", "TV", "HP", "UV", "SP", "SV", "ST"]
Chemistry = Literal["frozen", "complete", "equilibrium"]

LOOP_FROM = 400
"""Size of a result from which adding column by column is faster than one running sum."""
PRESSURE_LIMIT_OF_DATA = 600e5
"""Above this the ideal-gas and real-gas models here claim nothing [Pa]."""


class Status(IntEnum):
    """How an element of a batch ended. ``OK`` is the only success."""

    OK = 0
    OUTSIDE_DATA = 1
    NO_SOLUTION = 2
    CARBON_OVER_OXYGEN = 3
    LIMIT_BELOW_COMPRESSION = 4
    VAPOUR_ABOVE_SATURATION = 5
    CUTOFF_NOT_REACHED = 6
    NOT_CONVERGED = 7
    LEDGER_OPEN = 8
    OXYGEN_BELOW_CARBON_MONOXIDE = 9
    NO_FRESH_CHARGE = 10
    INPUT_REFUSED = 11

    @property
    def label(self) -> str:
        """Hyphenated lower-case name, as in results."""
        return self.name.lower().replace("_", "-")

    @property
    def reason(self) -> str:
        """One sentence: what it means and what to do."""
        return _REASONS[self]


_REASONS = {
    Status.OK: "",
    Status.OUTSIDE_DATA: "a state lies outside the species data (200 to 6000 K, fuel vapour as its record says) "
    "above 600 bar, or for the real gas above 8 kmol/m3 or near condensing; "
    "move the trapped state, the ratio or the fuel amount",
    Status.NO_SOLUTION: "no gas state fits the given pair of properties; check the case for an extreme value",
    Status.CARBON_OVER_OXYGEN: "carbon atoms reach or exceed oxygen atoms in the charge, so solid carbon must form, "
    "which a gas-phase model cannot carry; use a leaner mixture",
    Status.LIMIT_BELOW_COMPRESSION: "this model's own compression pressure already exceeds the pressure limit; "
    "raise the limit or lower the compression ratio or the trapped pressure",
    Status.VAPOUR_ABOVE_SATURATION: "the trapped charge is too cold to hold all the fuel or added water as vapour; "
    'warm the charge, take less of it, lower evaporated_by_gas or inject at combustion (admission = "direct")',
    Status.CUTOFF_NOT_REACHED: "even a stoichiometric mixture does not expand to this cut-off ratio; "
    "give a smaller cutoff_ratio or a fuel amount",
    Status.NOT_CONVERGED: "the gas exchange (residual gas, recirculated exhaust) found no fixed point; "
    "give residual_fraction as a number",
    Status.LEDGER_OPEN: "mass, elements or energy do not close to 1e-8; please report this case",
    Status.OXYGEN_BELOW_CARBON_MONOXIDE: "too rich for complete combustion: not even all carbon burns to carbon monoxide",
    Status.NO_FRESH_CHARGE: "residual gas at this exhaust pressure fills the cylinder: no room for fresh charge; "
    "lower exhaust_pressure or raise intake_pressure or the compression ratio",
    Status.INPUT_REFUSED: "keys of this row contradict each other; `fuelair check` of such a case says which",
}


@dataclass(frozen=True, slots=True)
class GasState:
    """A batch of gas states, per kg of the gas present.

    Attributes
    ----------
    T, p, v, u, h, s : temperature [K], pressure [Pa], specific volume [m3/kg], internal energy and
        enthalpy [J/kg] (elements at 298.15 K as zero), entropy [J/(kg K)]; shape (N,).
    cp : specific heat at constant pressure and frozen composition [J/(kg K)].
    sound : speed of sound at frozen composition [m/s].
    amounts : composition [kmol/kg], shape (N, S).
    status, iterations : per element, shape (N,).
    """

    T: Array
    p: Array
    v: Array
    u: Array
    h: Array
    s: Array
    cp: Array
    sound: Array
    amounts: Array
    status: Codes
    iterations: npt.NDArray[np.int32]

    def mole_fractions(self) -> Array:
        """Mole fractions, shape (N, S)."""
        return np.asarray(self.amounts / total(self.amounts)[:, None])


class Engine(Protocol):
    """What the cycle asks of a gas engine."""

    name: str

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
        """Return the states with properties ``x`` and ``y`` (SI, shape (N,)) of the named pair.

        ``amounts`` (N, S) in kmol/kg is the composition (frozen) or fixes the elements (complete,
        equilibrium). Inert species keep their amount. ``guess`` is a temperature [K]: a hint, never
        a need; results must not depend on it beyond the tolerance.
        """
        ...


def taken(values: npt.NDArray[Any], rows: Index | slice) -> npt.NDArray[Any]:
    """``values[rows]`` for ascending ``rows``, without a copy where that is all of them or a slice; not to be written to."""
    return values[rows] if isinstance(rows, slice) or len(rows) != len(values) else values


def total(amounts: Array) -> Array:
    """Sum over species, shape (N,).

    Each row lies in one piece, so that the order of its sum depends on the number of species alone, on no other row.
    """
    return np.asarray(np.add.reduce(np.ascontiguousarray(amounts), axis=1))


def weighted(amounts: Array, weights: Array) -> Array:
    """``amounts`` (N, S) times ``weights`` (S, K) or (N, S, K) -> (N, K), species added one after the other.

    The one place where species are summed with weights; a matrix product would give other bits for
    one case than for a thousand. Large batches add column by column, which is faster and gives the same bits.
    """
    if len(amounts) * weights.shape[-1] < LOOP_FROM:
        return np.asarray(np.cumsum(amounts[:, :, None] * weights, axis=1)[:, -1])
    if weights.ndim == 3:
        out = amounts[:, 0, None] * weights[..., 0, :]
        for j in range(1, amounts.shape[1]):
            out += amounts[:, j, None] * weights[..., j, :]
        return np.asarray(out)
    rows = np.zeros((weights.shape[1], len(amounts)))  # a sum a row, so that each step runs through memory in one piece
    for j, row in enumerate(weights):
        column = np.ascontiguousarray(amounts[:, j])
        for k in np.flatnonzero(row):
            rows[k] += column * row[k]
    return rows.T


def worst(*status: Codes) -> Codes:
    """First non-OK status of several arrays, element by element."""
    out = np.zeros_like(status[0])
    for one in status:
        out = np.where(out == Status.OK, one, out).astype(np.int8)
    return out
