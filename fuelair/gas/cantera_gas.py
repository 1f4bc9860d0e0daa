"""The reference gas engine: equilibrium by Cantera, one state after the other.

Equilibrium is asked of Cantera's solvers in a fixed ladder, from a fixed start (complete
combustion of the same elements at 2500 K), so nothing depends on what ran before. Every answer is
then judged by numbers that Cantera did not make: its composition, elements restored exactly, is put
back into the table's own polynomials, where the given pair fixes the temperature anew; that
temperature must agree with Cantera's, and every present species must sit at the minimum of the free
energy.
Frozen and complete states need no equilibrium solver and share ``frozen.py`` and ``complete.py``.
"""

from __future__ import annotations

import json
import threading
import warnings
from functools import lru_cache
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from fuelair.gas.complete import complete_state, composition, solid_carbon
from fuelair.gas.engine import Array, Chemistry, GasState, Pair, Status, weighted
from fuelair.gas.frozen import assemble, frozen_state, temperature
from fuelair.gas.mixture import gibbs, mix
from fuelair.gas.species import SpeciesTable

SOLVERS: tuple[tuple[Literal["element_potential", "gibbs", "vcs"], float], ...] = (
    ("element_potential", 1e-12),
    ("element_potential", 1e-9),
    ("gibbs", 1e-10),
    ("vcs", 1e-10),
)
"""Solvers of Cantera and their relative tolerances, in the order they are tried."""
MAX_STEPS = 5000
START_TEMPERATURE, START_PRESSURE = 2500.0, 5e6
PRESSURE_STEPS = 60
BISECTIONS, BISECTION_WIDTH = 60, 1e-13
ACCEPTED_RESIDUAL = 1e-8
"""Largest relative residual of elements and of temperature that counts as solved."""
OPTIMALITY_TOLERANCE = 1e-5
"""Largest allowed |mu - sum of element potentials| over R T of species above ``TRACE``."""
TRACE = 1e-6


Solvable = Literal["TP", "TV", "HP", "UV", "SP", "SV"]


class CanteraGas:
    """Reference engine. Stateless for its caller: equal calls give equal bits."""

    name = "reference"

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
        x, y = np.broadcast_arrays(np.asarray(x, float), np.asarray(y, float))
        x, y, amounts = x.copy(), y.copy(), np.array(amounts, dtype=float)
        if chemistry == "frozen":
            return frozen_state(table, pair, x, y, amounts)
        if chemistry == "complete":
            return complete_state(table, pair, x, y, amounts)
        return self._equilibrium(table, pair, x, y, amounts)

    def _equilibrium(self, table: SpeciesTable, pair: Pair, x: Array, y: Array, amounts: Array) -> GasState:
        n = len(x)
        start, _ = composition(table, amounts, np.full(n, START_TEMPERATURE))
        refused = solid_carbon(table, amounts)
        out = start.copy()
        failed = refused | ~np.isfinite(x) | ~np.isfinite(y)
        iterations = np.zeros(n, np.int32)
        for i in np.flatnonzero(~failed):
            solved = _phase(table).solve(pair, float(x[i]), float(y[i]), start[i])
            if solved is None:
                failed[i] = True
                continue
            out[i], iterations[i] = solved
        mixture = mix(table, out)
        T, _, lost = temperature(mixture, pair, x, y)
        state = assemble(mixture, pair, T, x, y, out, iterations, failed | lost)
        state.status[refused] = Status.CARBON_OVER_OXYGEN
        return state


class _Phase:
    """One Cantera phase over a fixed subset of the table, with its own solver ladder."""

    def __init__(self, table: SpeciesTable) -> None:
        import cantera as ct

        chosen = np.flatnonzero(table.rich | table.inert)
        self.table, self.columns, self.error = table, chosen, ct.CanteraError
        self.phase = ct.Solution(yaml=json.dumps(_definition(table, chosen)))
        self.active_atoms = table.reactive_atoms[chosen]
        self.inert = table.inert[chosen]
        self.present = self.active_atoms.any(axis=0)

    def solve(self, pair: Pair, x: float, y: float, start: Array) -> tuple[Array, int] | None:
        """Equilibrium amounts (S,) and the number of solvers tried, or None."""
        if pair == "ST":
            pair, y = "SP", self._pressure(x, y, start)
        return self._solve(pair, x, y, start) if np.isfinite(y) else None

    def _solve(self, kind: Solvable, x: float, y: float, start: Array) -> tuple[Array, int] | None:
        for count, (solver, tolerance) in enumerate(SOLVERS, start=1):
            if solver == "gibbs" and kind[1] == "V":
                continue
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")  # Cantera warns of temperatures outside the data; the status says it
                try:
                    self.phase.TPX = START_TEMPERATURE, START_PRESSURE, start[self.columns]
                    setattr(self.phase, "TD" if kind == "TV" else kind, (x, 1.0 / y if kind == "TV" else y))
                    self.phase.equilibrate(kind, solver=solver, rtol=tolerance, max_steps=MAX_STEPS)
                except (self.error, ValueError, ZeroDivisionError):
                    continue
            amounts = self._amounts(start)
            if self._good(kind, x, y, amounts, start):
                return amounts, count
        return self._bracketed(kind, x, y, start) if kind[0] in "HUS" else None

    def _bracketed(self, kind: Solvable, x: float, y: float, start: Array) -> tuple[Array, int] | None:
        """Last resort: temperature by bisection over equilibria at given temperature; each property rises with it.

        Cold, rich, dense gas needs it: no frozen gas of the start composition is cold enough for the pair.
        """
        low, high = float(self.table.t_min[self.columns].max()), float(self.table.t_max[self.columns].min())
        amounts = start
        for _ in range(BISECTIONS):
            T = 0.5 * (low + high)
            found = self._solve("TP" if kind[1] == "P" else "TV", T, y, start)
            if found is None:
                return None
            amounts = found[0]
            t, _, lost = temperature(mix(self.table, amounts[None]), kind, np.array([x]), np.array([y]))
            if lost[0] or t[0] < T:
                high = T
            else:
                low = T
            if high - low <= BISECTION_WIDTH * high:
                break
        return (amounts, len(SOLVERS) + 1) if self._good(kind, x, y, amounts, start) else None

    def _amounts(self, start: Array) -> Array:
        """The phase's composition per kg, its elements restored to those of ``start`` exactly.

        The solver leaves elements open by its tolerance. The smallest change in proportion to each
        amount that closes them moves no present species by more than that.
        """
        table, columns = self.table, self.columns
        x = np.maximum(self.phase.X, 0.0)
        n = x / float(np.sum(x * table.molar_mass[columns]))
        fixed = start[columns]
        n = np.where(self.inert, fixed, n)
        atoms = self.active_atoms[:, self.present]
        miss = self._sum(fixed, atoms) - self._sum(n, atoms)
        weights = np.array([self._sum(n, atoms * atoms[:, [e]]) for e in range(atoms.shape[1])])
        shift = self._sum(np.linalg.lstsq(weights, miss, rcond=None)[0], atoms.T)
        out = np.zeros_like(start)
        out[columns] = np.where(np.abs(shift) < 0.5, n * (1.0 + shift), n)
        return out

    @staticmethod
    def _sum(n: Array, weights: Array) -> Array:
        return np.asarray(weighted(n[None], weights)[0])

    def _pressure(self, s: float, T: float, start: Array) -> float:
        """Pressure at which equilibrium gas at ``T`` has entropy ``s``, for the pair ST."""
        log_p = float(np.log(START_PRESSURE))
        for _ in range(PRESSURE_STEPS):
            try:
                self.phase.TPX = T, float(np.exp(log_p)), start[self.columns]
                self.phase.equilibrate("TP", solver="auto", rtol=1e-12, max_steps=MAX_STEPS)
            except self.error:
                return float("nan")
            mixture = mix(self.table, self._amounts(start)[None])
            _, _, s0 = mixture.thermal(np.array([T]))
            gas_constant = float(mixture.gas_constant()[0])
            step = (float(s0[0]) - s) / gas_constant - log_p + float(np.log(mixture.reference_pressure))
            log_p += float(np.clip(step, -2.0, 2.0))
            if abs(step) < 1e-13:
                break
        return float(np.exp(log_p))

    def _good(self, pair: Solvable, x: float, y: float, amounts: Array, start: Array) -> bool:
        """Judge an answer: elements kept, the pair met at the solver's temperature, free energy at its minimum."""
        if not np.all(np.isfinite(amounts)):
            return False
        want = self._sum(start, self.table.atoms)
        if np.max(np.abs(self._sum(amounts, self.table.atoms) - want)) > ACCEPTED_RESIDUAL * np.max(np.abs(want)):
            return False
        found, _, lost = temperature(mix(self.table, amounts[None]), pair, np.array([x]), np.array([y]))
        if lost[0] or abs(float(found[0]) / self.phase.T - 1.0) > ACCEPTED_RESIDUAL:
            return False
        return self.optimality(amounts) <= OPTIMALITY_TOLERANCE

    def optimality(self, amounts: Array) -> float:
        """Largest |mu_j - sum_e a_je lambda_e| / (R T) over species that are present and may react."""
        n = amounts[self.columns]
        x = n / float(np.sum(n))
        use = (x > TRACE) & ~self.inert
        if not use.any():
            return 0.0
        T = np.array([self.phase.T])
        mu = gibbs(self.table, T)[0][self.columns][use] + np.log(x[use] * self.phase.P / self.table.reference_pressure)
        atoms = self.active_atoms[use]
        scale = np.sqrt(x[use])[:, None]
        potentials = np.linalg.lstsq(atoms * scale, mu * scale[:, 0], rcond=None)[0]
        miss = mu - np.array([float(np.sum(row * potentials)) for row in atoms])
        return float(np.max(np.abs(miss)))


@lru_cache(maxsize=32)
def _made(table: SpeciesTable, thread: int) -> _Phase:
    return _Phase(table)


def _phase(table: SpeciesTable) -> _Phase:
    """The phase of a table: made once a thread, for a Cantera phase must not be shared between threads."""
    return _made(table, threading.get_ident())


def _definition(table: SpeciesTable, chosen: npt.NDArray[np.intp]) -> dict[str, Any]:
    """A Cantera phase definition from the table's own numbers.

    The unburned fuel gets a private element, so that no solver can burn it.
    """
    elements: list[str] = [e for e in table.elements if table.atoms[chosen][:, table.elements.index(e)].any()]
    own, species = [], []
    for j in chosen:
        name = table.names[j]
        if table.inert[j]:
            symbol = "Fu"
            own.append({"symbol": symbol, "atomic-weight": float(table.molar_mass[j])})
            elements = [*elements, symbol]
            atoms: dict[str, float] = {symbol: 1.0}
        else:
            atoms = {e: float(a) for e, a in zip(table.elements, table.atoms[j], strict=True) if a}
        species.append(
            {
                "name": name,
                "composition": atoms,
                "thermo": {
                    "model": "NASA7",
                    "reference-pressure": table.reference_pressure,
                    "temperature-ranges": [float(table.t_min[j]), 1000.0, float(table.t_max[j])],
                    "data": [[float(c) for c in table.low[j]], [float(c) for c in table.high[j]]],
                },
            }
        )
    return {
        "phases": [{"name": "gas", "thermo": "ideal-gas", "elements": elements, "species": [s["name"] for s in species]}],
        "elements": own,
        "species": species,
    }
