"""The reference gas engine: equilibrium by Cantera, one state after the other.

Equilibrium is asked of Cantera's solvers in a fixed ladder, from a fixed start (complete
combustion of the same elements at 2500 K), so nothing depends on what ran before. Every answer is
then judged by numbers that Cantera did not make: its composition, elements restored exactly, is put
back into the table's own polynomials, where the given pair fixes the temperature anew; that
temperature must agree with Cantera's, and every present species must sit at the minimum of the free
energy. Where Cantera fails, the generic Newton of `gibbs.py` answers and is judged the same way.
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
from fuelair.gas.gibbs import equilibrate
from fuelair.gas.mixture import gibbs, mix
from fuelair.gas.species import SpeciesTable, cantera_thermo

SOLVERS: tuple[tuple[Literal["element_potential"], float], ...] = (
    ("element_potential", 1e-12),
    ("element_potential", 1e-9),
)
"""Solvers of Cantera and their relative tolerances, in the order they are tried; the Newton of `gibbs.py` comes last."""
MAX_STEPS = 5000
START_TEMPERATURE, START_PRESSURE = 2500.0, 5e6
ACCEPTED_RESIDUAL = 1e-8
"""Largest relative residual of elements and of temperature that counts as solved."""
OPTIMALITY_TOLERANCE = 1e-5
"""Largest allowed |mu - sum of element potentials| over R T of species above ``TRACE``."""
TRACE = 1e-6


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
        iterations, near = np.zeros(n, np.int32), np.full(n, START_TEMPERATURE)
        for i in np.flatnonzero(~failed):
            solved = _phase(table).solve(pair, float(x[i]), float(y[i]), start[i])
            if solved is None:
                failed[i] = True
                continue
            out[i], near[i], iterations[i] = solved
        mixture = mix(table, out)
        T, _, lost = temperature(mixture, pair, x, y, near)
        state = assemble(mixture, pair, T, x, y, out, iterations, failed | lost)
        state.status[refused] = Status.CARBON_OVER_OXYGEN
        return state


class _Phase:
    """One Cantera phase over a fixed subset of the table, with its own solver ladder."""

    def __init__(self, table: SpeciesTable) -> None:
        import cantera as ct

        chosen = np.flatnonzero(table.forms | table.inert)
        self.table, self.columns, self.error = table, chosen, ct.CanteraError
        self.phase = ct.Solution(yaml=json.dumps(_definition(table, chosen)))
        self.active_atoms = table.reactive_atoms[chosen]
        self.inert = table.inert[chosen]
        self.present = self.active_atoms.any(axis=0)

    def solve(self, pair: Pair, x: float, y: float, start: Array) -> tuple[Array, float, int] | None:
        """Equilibrium amounts (S,), temperature [K] and how many solvers were asked, or None."""
        if pair == "ST":
            return self._at_entropy(x, y, start)
        for count, (solver, tolerance) in enumerate(SOLVERS, start=1):
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")  # Cantera warns of temperatures outside the data; the status says it
                try:
                    self.phase.TPX = START_TEMPERATURE, START_PRESSURE, start[self.columns]
                    setattr(self.phase, "TD" if pair == "TV" else pair, (x, 1.0 / y if pair == "TV" else y))
                    self.phase.equilibrate(pair, solver=solver, rtol=tolerance, max_steps=MAX_STEPS)
                except (self.error, ValueError, ZeroDivisionError):
                    continue
            amounts = self._amounts(start)
            if self._good(pair, x, y, amounts, start, self.phase.T, self.phase.P):
                return amounts, self.phase.T, count
        return self._newton(pair, x, y, start)

    def _at_entropy(self, s: float, T: float, start: Array) -> tuple[Array, float, int] | None:
        """The pair ST, which Cantera does not offer: the Newton finds the pressure, Cantera confirms the composition."""
        found = self._newton("ST", s, T, start)
        if found is None:
            return None
        mixture = mix(self.table, found[0][None])
        _, _, s0 = mixture.thermal(np.array([T]))
        pressure = float(mixture.reference_pressure * np.exp((s0[0] - s) / mixture.gas_constant()[0]))
        again = self.solve("TP", T, pressure, start)
        return found if again is None else (again[0], T, again[2])

    def _newton(self, pair: Pair, x: float, y: float, start: Array) -> tuple[Array, float, int] | None:
        """Last resort: the generic Newton of `gibbs.py`, judged like the others.

        Cold rich gas needs it, where no frozen gas of the start composition fits the pair, and hot thin gas.
        """
        table = self.table
        allowed = np.zeros((1, len(table)), np.bool_)
        allowed[0, self.columns] = ~self.inert
        one = equilibrate(table, pair, np.array([x]), np.array([y]), start[None], allowed)
        if one.failed[0]:
            return None
        amounts, T = one.amounts[0], float(one.T[0])
        mixture = mix(table, amounts[None])
        state = assemble(mixture, pair, np.array([T]), np.array([x]), np.array([y]), amounts[None], one.iterations, one.failed)
        good = self._good(pair, x, y, amounts, start, T, float(state.p[0]))
        return (amounts, T, len(SOLVERS) + 1) if good else None

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

    def _good(self, pair: Pair, x: float, y: float, amounts: Array, start: Array, T: float, p: float) -> bool:
        """Judge an answer: elements kept, the pair met at the solver's temperature, free energy at its minimum."""
        if not np.all(np.isfinite(amounts)):
            return False
        want = self._sum(start, self.table.atoms)
        if np.max(np.abs(self._sum(amounts, self.table.atoms) - want)) > ACCEPTED_RESIDUAL * np.max(np.abs(want)):
            return False
        found, _, lost = temperature(mix(self.table, amounts[None]), pair, np.array([x]), np.array([y]), np.array([T]))
        if lost[0] or abs(float(found[0]) / T - 1.0) > ACCEPTED_RESIDUAL:
            return False
        return self.optimality(amounts, T, p) <= OPTIMALITY_TOLERANCE

    def optimality(self, amounts: Array, temperature: float, pressure: float) -> float:
        """Largest |mu_j - sum_e a_je lambda_e| / (R T) over species that are present and may react."""
        n = amounts[self.columns]
        x = n / float(np.sum(n))
        use = (x > TRACE) & ~self.inert
        if not use.any():
            return 0.0
        mu = gibbs(self.table, np.array([temperature]))[0][self.columns][use]
        mu = mu + np.log(x[use] * pressure / self.table.reference_pressure)
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
                "thermo": cantera_thermo(table, int(j)),
            }
        )
    return {
        "phases": [{"name": "gas", "thermo": "ideal-gas", "elements": elements, "species": [s["name"] for s in species]}],
        "elements": own,
        "species": species,
    }
