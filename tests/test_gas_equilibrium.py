"""Equilibrium: the minimum of the free energy, elements, every pair, inert fuel, refusals, bits of a batch."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.gas.engine import Status, weighted
from fuelair.gas.mixture import gibbs
from fuelair.gas.polynomials import R
from fuelair.gas.species import build

TABLE = build(fuels.load("iso-octane").vapour)
PAIRS = ("TP", "TV", "HP", "UV", "SP", "SV", "ST")
MIXTURES = {
    phi: TABLE.amounts({"O2": 12.5, "N2": 46.6, "Ar": 0.6, "CO2": 0.02, "fuel": phi})
    for phi in (0.05, 0.6, 0.999, 1.0, 1.001, 1.3, 2.0)
}


def grid(temperatures, pressures, mixtures=tuple(MIXTURES)):
    rows = list(itertools.product(mixtures, temperatures, pressures))
    return np.array([MIXTURES[r[0]] for r in rows]), np.array([r[1] for r in rows]), np.array([r[2] for r in rows])


def given(state, pair):
    letters = {"T": state.T, "P": state.p, "H": state.h, "U": state.u, "S": state.s, "V": state.v}
    return letters[pair[0]], letters[pair[1]]


@pytest.fixture(scope="module")
def solved(gas):
    amounts, T, p = grid((900.0, 1400.0, 2000.0, 2800.0, 3600.0), (1e5, 20e5, 300e5))
    state = gas.state(TABLE, "TP", T, p, amounts, "equilibrium")
    assert (state.status == Status.OK).all()
    return amounts, state


def test_elements_are_kept_exactly(solved):
    amounts, state = solved
    want, have = weighted(amounts, TABLE.atoms), weighted(state.amounts, TABLE.atoms)
    assert (np.abs(have - want) <= 1e-14 * want.max(axis=1, keepdims=True)).all()
    assert (np.abs(have - want)[want > 0.0] <= 1e-12 * want[want > 0.0]).all()
    assert (state.amounts >= 0.0).all()


def test_no_species_can_lower_the_free_energy(solved):
    """The conditions of the minimum: mu_j = sum of element potentials for every species that the set may form.

    The problem is convex, so whatever satisfies them is the minimum; nothing of the solver enters here.
    """
    _, state = solved
    mu0 = gibbs(TABLE, state.T)
    x = state.mole_fractions()
    for i in range(len(state.T)):
        allowed = (x[i] > 0.0) & ~TABLE.inert
        with np.errstate(divide="ignore"):
            mu = mu0[i] + np.log(x[i] * state.p[i] / TABLE.reference_pressure)
        # cold stoichiometric gas has too few major species to fix the potentials: take the next smaller ones too
        least = next(e for e in (1e-7, 1e-10, 1e-13, 1e-16) if np.linalg.matrix_rank(TABLE.atoms[allowed & (x[i] > e)]) == 5)
        much = allowed & (x[i] > least)
        weight = np.sqrt(x[i][much])
        potential = np.linalg.lstsq(TABLE.atoms[much] * weight[:, None], mu[much] * weight, rcond=None)[0]
        miss = np.abs(mu - TABLE.atoms @ potential)
        assert miss[much].max() < 1e-7, (i, state.T[i], state.p[i], TABLE.names[int(np.argmax(np.where(much, miss, 0.0)))])
        traces = allowed & ~much & (x[i] > 1e-25)
        assert miss[traces].max(initial=0.0) < 1e-4, (i, state.T[i], state.p[i])


def test_it_is_a_minimum_against_other_compositions_of_the_same_elements(solved):
    _, state = solved
    reactions = [
        {"CO2": -1, "CO": 1, "O2": 0.5},
        {"H2O": -1, "H2": 1, "O2": 0.5},
        {"N2": -0.5, "O2": -0.5, "NO": 1},
        {"H2O": -1, "OH": 1, "H2": 0.5},
        {"O2": -0.5, "O": 1},
        {"H2": -0.5, "H": 1},
    ]

    def free_energy(n, i):
        x = n[n > 0.0] / n.sum()
        mu = gibbs(TABLE, state.T[i : i + 1])[0][n > 0.0] + np.log(x * state.p[i] / TABLE.reference_pressure)
        return float(np.sum(n[n > 0.0] * mu))

    tried = 0
    for i in range(len(state.T)):
        least = free_energy(state.amounts[i], i)
        for change, sign in itertools.product(reactions, (1.0, -1.0)):
            names = [TABLE.index(k) for k in change]
            extent = 0.2 * min(state.amounts[i][j] / abs(v) for j, v in zip(names, change.values(), strict=True))
            if extent / state.amounts[i].sum() < 1e-6:
                continue  # too little of it for the difference to be seen in 16 digits
            other = state.amounts[i].copy()
            for j, v in zip(names, change.values(), strict=True):
                other[j] += sign * extent * v
            assert free_energy(other, i) > least
            tried += 1
    assert tried > 200


@pytest.mark.parametrize("pair", PAIRS)
def test_every_pair_leads_back(gas, solved, pair):
    amounts, start = solved
    back = gas.state(TABLE, pair, *given(start, pair), amounts, "equilibrium")
    assert (back.status == Status.OK).all()
    # the given pair is met exactly by construction; the other properties to what an engine promises
    x, y = given(start, pair)
    again = given(back, pair)
    scale = {"H": R * 0.036 * start.T, "U": R * 0.036 * start.T, "S": R * 0.036 * np.ones_like(start.T)}
    assert (np.abs(again[0] - x) <= 1e-12 * scale.get(pair[0], x)).all()
    assert (np.abs(again[1] - y) <= 1e-12 * scale.get(pair[1], y)).all()
    assert pytest.approx(start.T, rel=1e-8) == back.T
    assert back.p == pytest.approx(start.p, rel=1e-8)
    assert back.s == pytest.approx(start.s, rel=1e-8)
    fractions = np.abs(back.mole_fractions() - start.mole_fractions())
    assert fractions.max() < 1e-8


@pytest.mark.parametrize("pair", ["HP", "UV", "SP", "SV"])
@pytest.mark.parametrize("T", [4000.0, 5000.0, 5900.0])
def test_states_up_to_the_end_of_the_data_are_found(gas, pair, T):
    amounts, T, p = grid((T,), (1e5, 50e5), (0.6, 1.3))
    start = gas.state(TABLE, "TP", T, p, amounts, "equilibrium")
    assert (start.status == Status.OK).all()
    back = gas.state(TABLE, pair, *given(start, pair), amounts, "equilibrium")
    assert back.status.tolist() == [Status.OK] * 4
    assert pytest.approx(start.T, rel=1e-8) == back.T


def test_a_pressure_found_from_entropy_and_temperature_is_right_or_refused(gas):
    oxygen = TABLE.amounts({"O2": 1.0, "fuel": 0.08})[None]
    for T, p in itertools.product((2000.0, 2500.0, 3000.0, 3500.0), (1e5, 3e5, 10e5)):
        start = gas.state(TABLE, "TP", np.array([T]), np.array([p]), oxygen, "equilibrium")
        found = gas.state(TABLE, "ST", start.s, start.T, oxygen, "equilibrium")
        if found.status[0] == Status.OK:
            assert found.p[0] == pytest.approx(p, rel=1e-7), (T, p)


def test_cold_lean_and_rich_gas_is_found_from_energy_and_volume(gas):
    amounts, T, p = grid((300.0, 500.0, 700.0), (1e5, 50e5), (0.6, 1.3))
    start = gas.state(TABLE, "TP", T, p, amounts, "equilibrium")
    back = gas.state(TABLE, "UV", start.u, start.v, amounts, "equilibrium")
    good = start.status == Status.OK
    assert good.sum() >= 6
    assert (back.status[good] == Status.OK).all()
    assert back.T[good] == pytest.approx(start.T[good], rel=1e-8)


def test_order_and_repetition_change_no_bit(gas, solved):
    amounts, start = solved
    order = np.random.default_rng(5).permutation(np.repeat(np.arange(len(start.T)), 2))[:120]
    for pair in ("TP", "HP", "UV", "SV", "ST"):
        x, y = given(start, pair)
        batch = gas.state(TABLE, pair, x, y, amounts, "equilibrium")
        mixed = gas.state(TABLE, pair, x[order], y[order], amounts[order], "equilibrium")
        for name in ("T", "p", "v", "u", "h", "s", "cp", "sound", "amounts", "status", "iterations"):
            assert np.array_equal(getattr(batch, name)[order], getattr(mixed, name)), (pair, name)
        alone = gas.state(TABLE, pair, x[9:10], y[9:10], amounts[9:10], "equilibrium")
        assert np.array_equal(alone.amounts[0], batch.amounts[9])


def test_a_guess_changes_nothing(gas, solved):
    amounts, start = solved
    plain = gas.state(TABLE, "UV", start.u[:6], start.v[:6], amounts[:6], "equilibrium")
    hinted = gas.state(TABLE, "UV", start.u[:6], start.v[:6], amounts[:6], "equilibrium", guess=np.full(6, 400.0))
    assert np.array_equal(plain.T, hinted.T)


def test_a_bad_element_kills_no_neighbour(gas):
    amounts = np.array([MIXTURES[1.0]] * 4)
    x = np.array([np.nan, 2500.0, 2500.0, 7000.0])
    y = np.array([1e6, 1e6, np.nan, 1e6])
    state = gas.state(TABLE, "TP", x, y, amounts, "equilibrium")
    alone = gas.state(TABLE, "TP", x[1:2], y[1:2], amounts[1:2], "equilibrium")
    assert state.status.tolist() == [Status.NO_SOLUTION, Status.OK, Status.NO_SOLUTION, Status.OUTSIDE_DATA]
    assert state.T[1] == alone.T[0]
    assert np.array_equal(state.amounts[1], alone.amounts[0])
    assert np.isnan([state.h[0], state.p[2]]).all()


def test_outside_the_data(gas):
    amounts = np.array([MIXTURES[0.6]] * 3)
    state = gas.state(TABLE, "TP", np.array([6001.0, 2000.0, 2000.0]), np.array([1e5, 601e5, 600e5]), amounts, "equilibrium")
    assert state.status.tolist() == [Status.OUTSIDE_DATA, Status.OUTSIDE_DATA, Status.OK]


@pytest.mark.parametrize(
    ("carbon", "status"), [(1.0001, Status.CARBON_OVER_OXYGEN), (1.0, Status.CARBON_OVER_OXYGEN), (0.98, Status.OK)]
)
def test_as_much_carbon_as_oxygen_is_refused(gas, carbon, status):
    amounts = TABLE.amounts({"O2": 0.5, "N2": 2.0, "fuel": carbon / 8.0})[None]
    for pair, x, y in (("TP", 2000.0, 1e6), ("TV", 2000.0, 0.6)):
        state = gas.state(TABLE, pair, np.array([x]), np.array([y]), amounts, "equilibrium")
        assert Status(int(state.status[0])) is status
        assert np.isnan(state.h[0]) == (status is not Status.OK)


def test_unburned_fuel_keeps_its_amount_and_counts_in_every_property(gas):
    amounts = TABLE.amounts({"O2": 12.5, "N2": 47.0, "fuel": 0.7, "unburned-fuel": 0.05})[None]
    state = gas.state(TABLE, "TP", np.array([2400.0]), np.array([80e5]), amounts, "equilibrium")
    j, burns = TABLE.index("unburned-fuel"), TABLE.index("fuel")
    assert state.amounts[0, j] == amounts[0, j]
    assert state.amounts[0, burns] == 0.0
    # its carbon does not count against the oxygen either
    much = TABLE.amounts({"O2": 1.0, "N2": 3.76, "unburned-fuel": 1.0})[None]
    assert gas.state(TABLE, "TP", np.array([1500.0]), np.array([1e6]), much, "equilibrium").status[0] == Status.OK


def test_sulfur_leaves_as_dioxide(gas):
    table = build(fuels.load("marine-residual").vapour)
    amounts = table.amounts({"O2": 60.0, "N2": 226.0, "fuel": 1.0})[None]
    state = gas.state(table, "TP", np.array([1500.0]), np.array([10e5]), amounts, "equilibrium")
    sulfur = weighted(amounts, table.atoms)[0, table.elements.index("S")]
    assert state.status[0] == Status.OK
    assert state.amounts[0, table.index("SO2")] == pytest.approx(sulfur, rel=1e-12)


def test_water_gas_constant_and_dissociation_constants_are_met(gas, solved):
    _, state = solved
    g, x = gibbs(TABLE, state.T), state.mole_fractions()

    def constant(reaction):
        return sum(
            v * (g[:, TABLE.index(k)] + np.log(x[:, TABLE.index(k)] * state.p / TABLE.reference_pressure))
            for k, v in reaction.items()
        )

    there = (x[:, TABLE.index("CO")] > 1e-12) & (x[:, TABLE.index("H2")] > 1e-12) & (x[:, TABLE.index("O2")] > 1e-12)
    assert there.sum() > 60
    for reaction in ({"CO2": 1, "H2": 1, "CO": -1, "H2O": -1}, {"CO2": -2, "CO": 2, "O2": 1}, {"N2": -1, "O2": -1, "NO": 2}):
        assert np.abs(constant(reaction)[there]).max() < 1e-5
