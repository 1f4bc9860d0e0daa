"""Complete combustion: hand arithmetic, the water-gas constant at the state's own temperature, too little oxygen."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fuelair import fuel as fuels
from fuelair.gas.complete import complete_state, composition, oxygen_excess, water_gas_constant
from fuelair.gas.engine import Status, weighted
from fuelair.gas.species import build

TABLE = build(fuels.load("methane").vapour)


def charge(phi, **more):
    return TABLE.amounts({"O2": 2.0, "N2": 7.52, "fuel": phi, **more})[None]


def parts(amounts, base="N2"):
    """Amounts per two moles of oxygen: per 7.52 moles of nitrogen."""
    scale = 7.52 / amounts[0, TABLE.index(base)]
    return {k: float(amounts[0, TABLE.index(k)] * scale) for k in TABLE.names if amounts[0, TABLE.index(k)] > 0.0}


def test_lean_by_hand():
    # 0.6 CH4 + 2 O2 + 7.52 N2 -> 0.6 CO2 + 1.2 H2O + 0.8 O2 + 7.52 N2
    burned, short = composition(TABLE, charge(0.6), np.array([2000.0]))
    assert not short[0]
    assert parts(burned) == pytest.approx({"CO2": 0.6, "H2O": 1.2, "O2": 0.8, "N2": 7.52}, rel=1e-13)


def test_stoichiometric_by_hand():
    burned, _ = composition(TABLE, charge(1.0), np.array([2000.0]))
    expected = {"CO2": 1.0, "H2O": 2.0, "N2": 7.52}
    found = parts(burned)
    assert {k: found[k] for k in expected} == pytest.approx(expected, rel=1e-13)
    assert all(v < 1e-14 for k, v in found.items() if k not in expected)


@pytest.mark.parametrize("T", [900.0, 1740.0, 2600.0])
@pytest.mark.parametrize("phi", [1.02, 1.3, 1.9])
def test_rich_by_hand(phi, T):
    # phi CH4 + 2 O2: CO2 + CO = phi, H2O + H2 = 2 phi, oxygen 2 CO2 + CO + H2O = 4, K = CO H2O / (CO2 H2)
    burned, short = composition(TABLE, charge(phi), np.array([T]))
    assert not short[0]
    n = parts(burned)
    assert n["CO2"] + n["CO"] == pytest.approx(phi, rel=1e-13)
    assert n["H2O"] + n["H2"] == pytest.approx(2.0 * phi, rel=1e-13)
    assert 2.0 * n["CO2"] + n["CO"] + n["H2O"] == pytest.approx(4.0, rel=1e-13)
    k = float(water_gas_constant(TABLE, np.array([T]))[0])
    assert n["CO"] * n["H2O"] / (n["CO2"] * n["H2"]) == pytest.approx(k, rel=1e-10)
    assert "O2" not in n


def test_water_gas_constant_against_janaf():
    # log10 K of CO2 + H2 = CO + H2O, read in the NIST-JANAF tables (package janaf 1.4.0) at 1000, 1500, 2000, 3000 K.
    # Printed to 0.001; Cantera's data lie 0.001 to 0.007 above, mostly from the heat of formation of CO2.
    T = np.array([1000.0, 1500.0, 2000.0, 3000.0])
    difference = np.log10(water_gas_constant(TABLE, T)) - np.array([-0.158, 0.412, 0.659, 0.862])
    assert (difference > -0.001).all()
    assert (difference < 0.008).all()


def test_rich_state_meets_the_water_gas_constant_at_its_own_temperature(gas):
    amounts = np.vstack([charge(phi) for phi in (1.05, 1.2, 1.6)])
    start = gas.state(TABLE, "TP", np.full(3, 700.0), np.full(3, 20e5), amounts)
    for pair, x, y in (("UV", start.u, start.v), ("HP", start.h, start.p)):
        burned = complete_state(TABLE, pair, x, y, amounts)
        assert (burned.status == Status.OK).all()
        assert (burned.T > 1800.0).all()
        n = burned.amounts
        co, h2o, co2, h2 = (n[:, TABLE.index(k)] for k in ("CO", "H2O", "CO2", "H2"))
        assert co * h2o / (co2 * h2) == pytest.approx(water_gas_constant(TABLE, burned.T), rel=1e-10)
        met = {"UV": (burned.u, burned.v), "HP": (burned.h, burned.p)}[pair]
        assert met[0] == pytest.approx(x, rel=1e-12)
        assert met[1] == pytest.approx(y, rel=1e-13)


@pytest.mark.parametrize("pair", ["TP", "TV", "HP", "UV", "SP", "SV", "ST"])
def test_every_pair_leads_back(pair):
    amounts = np.vstack([charge(phi) for phi in (0.5, 1.0, 1.1, 1.8)])
    start = complete_state(TABLE, "TP", np.array([2300.0, 2700.0, 2600.0, 1700.0]), np.array([1e5, 70e5, 60e5, 5e5]), amounts)
    letters = {"T": start.T, "P": start.p, "H": start.h, "U": start.u, "S": start.s, "V": start.v}
    back = complete_state(TABLE, pair, letters[pair[0]], letters[pair[1]], amounts)
    assert (back.status == Status.OK).all()
    assert pytest.approx(start.T, rel=1e-11) == back.T
    assert back.p == pytest.approx(start.p, rel=1e-11)
    assert back.amounts == pytest.approx(start.amounts, rel=1e-10, abs=1e-16)


def test_too_little_oxygen_for_carbon_monoxide():
    # phi = 4: 4 C and 4 O atoms, all carbon as CO and all hydrogen as H2; beyond it there is nothing to burn with
    burned, short = composition(TABLE, charge(3.999), np.array([2000.0]))
    assert not short[0]
    assert parts(burned)["CO"] == pytest.approx(3.999, rel=1e-3)
    state = complete_state(
        TABLE, "TP", np.array([2000.0, 2000.0]), np.array([1e5, 1e5]), np.vstack([charge(4.01), charge(3.999)])
    )
    assert state.status.tolist() == [Status.OXYGEN_BELOW_CARBON_MONOXIDE, Status.OK]


def test_what_is_inert_stays():
    burned, _ = composition(TABLE, charge(0.6, **{"unburned-fuel": 0.1}), np.array([2000.0]))
    assert parts(burned)["unburned-fuel"] == pytest.approx(0.1, rel=1e-13)
    assert parts(burned)["CO2"] == pytest.approx(0.6, rel=1e-13)


def test_burned_gas_burns_to_itself():
    once, _ = composition(TABLE, charge(1.3), np.array([1740.0]))
    twice, _ = composition(TABLE, once, np.array([1740.0]))
    assert twice == pytest.approx(once, rel=1e-13, abs=1e-18)


@given(st.floats(0.01, 3.9), st.floats(300.0, 5000.0))
def test_elements_are_kept_and_nothing_is_negative(phi, T):
    amounts = charge(phi)
    burned, short = composition(TABLE, amounts, np.array([T]))
    assert not short[0]
    assert (burned >= 0.0).all()
    want = weighted(amounts, TABLE.atoms)
    assert (np.abs(weighted(burned, TABLE.atoms) - want) <= 1e-14 * want.max()).all()
    assert (oxygen_excess(TABLE, amounts)[0] < 0.0) == (phi > 1.0) or abs(phi - 1.0) < 1e-12


def test_order_and_company_change_no_bit():
    phis = (0.4, 1.3, 0.9, 1.7, 1.0)
    amounts = np.vstack([charge(phi) for phi in phis])
    start = complete_state(TABLE, "TP", np.full(5, 2200.0), np.full(5, 30e5), amounts)
    batch = complete_state(TABLE, "UV", start.u, start.v, amounts)
    order = np.array([4, 1, 1, 0, 3, 2, 0])
    mixed = complete_state(TABLE, "UV", start.u[order], start.v[order], amounts[order])
    for name in ("T", "p", "h", "s", "amounts", "status"):
        assert np.array_equal(getattr(batch, name)[order], getattr(mixed, name)), name
    for i in range(5):
        alone = complete_state(TABLE, "UV", start.u[i : i + 1], start.v[i : i + 1], amounts[i : i + 1])
        for name in ("T", "p", "h", "s", "amounts", "status"):
            assert np.array_equal(getattr(batch, name)[i : i + 1], getattr(alone, name)), (i, name)
