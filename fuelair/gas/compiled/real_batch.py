"""The compiled engine of the real gas behind the seam: any number of states at a time, one after the other."""

from __future__ import annotations

import numpy as np

from fuelair.gas.compiled.generic import equilibrate
from fuelair.gas.compiled.real_fixed import FIELDS, fixed
from fuelair.gas.complete import solid_carbon
from fuelair.gas.engine import Array, Chemistry, GasState, Pair, Status
from fuelair.gas.real_engine import ACCEPTED
from fuelair.gas.real_gas import virial_table
from fuelair.gas.species import SpeciesTable


class RealBatchGas:
    """The states of `fuelair.gas.real_engine.RealGas`, compiled; the same meaning of every status.

    Stateless for its caller: equal calls give equal bits. The residual potentials take part in the Newton of the
    equilibrium; every equilibrium ends in a state of fixed composition that meets the given pair exactly, whose
    temperature must be that of the equilibrium itself. Releases the interpreter's lock while it computes.

    Parameters
    ----------
    fuel_fluid : fluid of the virial data that stands for the fuel vapour; None takes the nearest.
    """

    name = "compiled-real"

    def __init__(self, fuel_fluid: str | None = None) -> None:
        self.fuel_fluid = fuel_fluid

    def state(
        self, table: SpeciesTable, pair: Pair, x: Array, y: Array, amounts: Array, chemistry: Chemistry = "frozen",
        guess: Array | None = None,
    ) -> GasState:  # fmt: skip
        """States of a batch; see `fuelair.gas.engine.Engine.state`. ``guess`` is not needed and not used."""
        x, y = (np.array(a, dtype=float) for a in np.broadcast_arrays(x, y))
        amounts = np.array(amounts, dtype=float, order="C")
        gas = virial_table(table, self.fuel_fluid)
        if chemistry != "equilibrium":
            return fixed(table, gas, pair, x, y, amounts, complete=chemistry == "complete")
        found = equilibrate(table, pair, x, y, amounts, departure=gas)
        start = np.where(found.failed, 0.0, found.T)
        state = fixed(table, gas, pair, np.where(found.failed, np.nan, x), y, found.amounts, start=start)
        apart = ~(np.abs(found.T / state.T - 1.0) <= 10.0 * ACCEPTED)  # the equilibrium must be that of the state itself
        status = state.status.copy()
        status[found.failed | (apart & (status == Status.OK))] = Status.NO_SOLUTION
        refused = solid_carbon(table, amounts)
        status[refused] = Status.CARBON_OVER_OXYGEN
        bad = (status == Status.NO_SOLUTION) | refused
        fields = {k: np.where(bad, np.nan, getattr(state, k)) for k in FIELDS}
        return GasState(amounts=found.amounts, status=status, iterations=found.iterations, **fields)
