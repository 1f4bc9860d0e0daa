"""Graphite activity against the hand formula and against published free energies."""

from __future__ import annotations

import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.gas.graphite import carbon_activity
from fuelair.gas.mixture import gibbs, gibbs_graphite
from fuelair.gas.species import build

TABLE = build(fuels.load("methane").vapour)


def mixture(gas, T, p, **x):
    return gas.state(TABLE, "TP", np.array([T]), np.array([p]), TABLE.amounts(x)[None])


def test_activity_by_the_boudouard_constant_of_janaf(gas):
    # 2 CO = CO2 + C: log10 K = log10 Kf(CO2) - 2 log10 Kf(CO); the NIST-JANAF tables (package janaf) print log10 Kf
    janaf = pytest.importorskip("janaf")
    kf = {}
    for name, code in (("CO", "C-093"), ("CO2", "C-095")):
        frame = janaf.Table(code).df
        kf[name] = float(frame["log Kf"][list(frame["T(K)"]).index(1000.0)])
    x_co, x_co2, p = 0.3, 0.1, 4e5
    state = mixture(gas, 1000.0, p, CO=x_co, CO2=x_co2, N2=0.6)
    expected = 10.0 ** (kf["CO2"] - 2.0 * kf["CO"]) * x_co**2 / x_co2 * p / 1e5
    # Cantera's data differ from JANAF by 0.005 dex a reaction, and their 1 bar is labelled 1 atm: 1.3 %
    assert carbon_activity(TABLE, state)[0] == pytest.approx(expected, rel=0.03)


@pytest.mark.parametrize(("T", "p"), [(700.0, 1e5), (1000.0, 30e5), (1500.0, 5e5), (2200.0, 100e5)])
def test_activity_by_hand(gas, T, p):
    state = mixture(gas, T, p, CO=0.25, CO2=0.05, H2=0.1, N2=0.6)
    g = gibbs(TABLE, np.array([T]))[0]
    exponent = 2.0 * g[TABLE.index("CO")] - g[TABLE.index("CO2")] - gibbs_graphite(TABLE, np.array([T]))[0]
    expected = np.exp(exponent) * 0.25**2 / 0.05 * p / TABLE.reference_pressure
    assert carbon_activity(TABLE, state)[0] == pytest.approx(expected, rel=1e-11)


def test_the_water_gas_route_gives_the_same_activity_in_equilibrium(gas):
    """CO + H2 = H2O + C instead of 2 CO = CO2 + C: one equilibrium, one activity."""
    amounts = TABLE.amounts({"O2": 2.0, "N2": 7.52, "fuel": 2.4})[None]
    state = gas.state(TABLE, "TP", np.array([1100.0]), np.array([20e5]), amounts, "equilibrium")
    g, x = gibbs(TABLE, state.T)[0], state.mole_fractions()[0]
    i = {k: TABLE.index(k) for k in ("CO", "H2", "H2O", "CH4")}
    solid = gibbs_graphite(TABLE, state.T)[0]
    p = state.p[0] / TABLE.reference_pressure
    by_water = np.exp(g[i["CO"]] + g[i["H2"]] - g[i["H2O"]] - solid) * x[i["CO"]] * x[i["H2"]] / x[i["H2O"]] * p
    by_methane = np.exp(g[i["CH4"]] - 2.0 * g[i["H2"]] - solid) * x[i["CH4"]] / (x[i["H2"]] ** 2 * p)
    activity = carbon_activity(TABLE, state)[0]
    assert by_water == pytest.approx(activity, rel=1e-5)
    assert by_methane == pytest.approx(activity, rel=1e-5)


def test_no_monoxide_no_soot(gas):
    assert carbon_activity(TABLE, mixture(gas, 900.0, 1e5, CO2=0.1, N2=0.9))[0] == 0.0
    assert carbon_activity(TABLE, mixture(gas, 900.0, 1e5, CO=0.1, N2=0.9))[0] == 0.0


def test_graphite_itself_has_the_entropy_of_the_tables():
    # S(C, graphite, 298.15 K) = 5.74 J/(mol K), CODATA key values (from memory); formation enthalpy zero
    T = np.array([298.15])
    d = 1e-2
    entropy = -(gibbs_graphite(TABLE, T + d) * (T + d) - gibbs_graphite(TABLE, T - d) * (T - d)) / (2.0 * d) * 8.31446261815324
    assert entropy[0] == pytest.approx(5.74, abs=0.03)
    enthalpy = gibbs_graphite(TABLE, T)[0] * T[0] * 8.31446261815324e-3 + T[0] * entropy[0] * 1e-3  # kJ/mol
    assert enthalpy == pytest.approx(0.0, abs=0.01)
