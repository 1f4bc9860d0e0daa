"""Would solid carbon form? The activity of graphite over a gas."""

from __future__ import annotations

import numpy as np

from fuelair.gas.engine import Array, GasState, total
from fuelair.gas.mixture import gibbs, gibbs_graphite
from fuelair.gas.species import SpeciesTable


def carbon_activity(table: SpeciesTable, state: GasState) -> Array:
    """Activity of graphite over gas in equilibrium, shape (N,): above 1 solid carbon would form.

    From 2 CO = CO2 + C with the free energy of graphite; zero where the gas holds no carbon monoxide.
    """
    pair = [table.index(name) for name in ("CO", "CO2")]
    x = state.amounts[:, pair] / total(state.amounts)[:, None]
    co, co2 = x[:, 0], x[:, 1]
    g = gibbs(table, state.T, pair)
    with np.errstate(divide="ignore", invalid="ignore"):
        log_ratio = np.log(co * co / co2 * state.p / table.reference_pressure)
    value = 2.0 * g[:, 0] - g[:, 1] - gibbs_graphite(table, state.T) + log_ratio
    return np.asarray(np.where((co > 0.0) & (co2 > 0.0), np.exp(np.minimum(value, 50.0)), 0.0))
