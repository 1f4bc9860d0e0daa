"""The generic Newton: Cantera's answers, elements, the minimum itself, failures, bits, any start."""

from __future__ import annotations

import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.gas.cantera_gas import SOLVERS
from fuelair.gas.complete import oxygen_excess, solid_carbon
from fuelair.gas.engine import Status, total, weighted
from fuelair.gas.frozen import frozen_state
from fuelair.gas.gibbs import equilibrate
from fuelair.gas.mixture import gibbs
from fuelair.gas.species import build

PAIRS = ("TP", "TV", "HP", "UV", "SP", "SV", "ST")
FUELS = ("iso-octane", "methanol", "ammonia", "hydrogen", "marine-residual")  # C, H, O, N, S between them
PHI = (0.05, 0.3, 0.7, 0.99, 1.0, 1.01, 1.5, 2.0, 2.5, 3.0)


def mixtures(table, phi, inert=1e-3):
    """Fuel and air, a little fuel that does not react; (N, S)."""
    one = np.eye(len(table))[[table.index("fuel")]]
    demand = -float(oxygen_excess(table, one)[0]) / 2.0
    parts = [{"O2": 1.0, "N2": 3.73, "Ar": 0.045, "CO2": 0.002, "fuel": p / demand, "unburned-fuel": inert} for p in phi]
    return np.array([table.amounts(p) for p in parts])


def box(table, n=90, seed=7):
    """Amounts, T, p, phi over the whole box (SO2 has data to 5000 K); what must form solid carbon is left out."""
    rng = np.random.default_rng(seed)
    T, p = rng.uniform(400.0, min(5500.0, table.t_max.min() - 10.0), n), 600e5 * (0.05 / 600.0) ** rng.uniform(0.0, 1.0, n)
    phi = np.array(PHI)[rng.integers(0, len(PHI), n)]
    amounts = mixtures(table, phi)
    keep = ~solid_carbon(table, amounts)
    return amounts[keep], T[keep], p[keep], phi[keep]


def forms(table, n):
    return np.tile(table.forms, (n, 1))


def given(state, pair):
    letters = {"T": state.T, "P": state.p, "H": state.h, "U": state.u, "S": state.s, "V": state.v}
    return letters[pair[0]], letters[pair[1]]


@pytest.fixture(scope="module", params=FUELS)
def case(request, gas):
    table = build(fuels.load(request.param).vapour)
    amounts, T, p, _ = box(table)
    state = gas.state(table, "TP", T, p, amounts, "equilibrium")
    assert (state.status == Status.OK).all()
    cantera = state.iterations <= len(SOLVERS)  # where Cantera itself answered, not the Newton in its place
    assert cantera.mean() > 0.8
    return table, amounts, state, cantera


@pytest.mark.parametrize("pair", PAIRS)
def test_every_pair_gives_what_cantera_gives(case, pair):
    table, amounts, state, cantera = case
    found = equilibrate(table, pair, *given(state, pair), amounts, forms(table, len(amounts)))
    assert not found.failed.any()
    assert np.abs(found.T / state.T - 1.0).max() < 1e-8
    x, expected = found.amounts / total(found.amounts)[:, None], state.mole_fractions()
    seen = (expected > 1e-10) & cantera[:, None]
    assert seen.sum() > 500
    assert np.abs(x[seen] / expected[seen] - 1.0).max() < 1e-7


@pytest.mark.parametrize("pair", PAIRS)
def test_elements_close_and_the_inert_stays(case, pair):
    table, amounts, state, _ = case
    found = equilibrate(table, pair, *given(state, pair), amounts, forms(table, len(amounts)))
    want, have = weighted(amounts, table.atoms), weighted(found.amounts, table.atoms)
    assert (np.abs(have - want) <= 1e-13 * want.max(axis=1, keepdims=True)).all()
    assert np.array_equal(found.amounts[:, table.inert], amounts[:, table.inert])
    assert (found.amounts >= 0.0).all()
    assert (found.amounts[:, table.index("fuel")] == 0.0).all()


def test_nothing_can_lower_the_free_energy(case):
    """mu_j = sum of element potentials, fitted here; the problem is convex, so that is the minimum."""
    table, amounts, state, _ = case
    T, p = state.T, state.p
    found = equilibrate(table, "TP", T, p, amounts, forms(table, len(T)))
    x, mu0 = found.amounts / total(found.amounts)[:, None], gibbs(table, T)
    for i in range(len(T)):
        there = (x[i] > 0.0) & ~table.inert
        mu = mu0[i] + np.log(np.where(there, x[i], 1.0) * p[i] / table.reference_pressure)
        rank = np.linalg.matrix_rank(table.atoms[there])
        least = next(e for e in (1e-7, 1e-10, 1e-13, 1e-16) if np.linalg.matrix_rank(table.atoms[there & (x[i] > e)]) == rank)
        much = there & (x[i] > least)
        weight = np.sqrt(x[i][much])
        potential = np.linalg.lstsq(table.atoms[much] * weight[:, None], mu[much] * weight, rcond=None)[0]
        miss = np.abs(mu - table.atoms @ potential)
        assert miss[much].max() < 1e-8, (i, T[i], p[i])
        assert miss[there & (x[i] > 1e-25)].max() < 1e-4, (i, T[i], p[i])


def test_what_it_judges_is_seen_by_the_test():
    """A composition 0.1 % off its minimum misses the potentials by as much."""
    table = build(fuels.load("iso-octane").vapour)
    amounts = mixtures(table, (1.0,))
    T, p = np.array([2600.0]), np.array([50e5])
    n = equilibrate(table, "TP", T, p, amounts, forms(table, 1)).amounts[0].copy()
    n[table.index("NO")] *= 1.001
    x = n / n.sum()
    use = (x > 1e-7) & ~table.inert
    mu = gibbs(table, T)[0] + np.log(np.where(use, x, 1.0) * p / table.reference_pressure)
    weight = np.sqrt(x[use])
    potential = np.linalg.lstsq(table.atoms[use] * weight[:, None], mu[use] * weight, rcond=None)[0]
    assert np.abs(mu - table.atoms @ potential)[use].max() > 5e-4


@pytest.mark.parametrize("pair", ["TP", "HP", "UV", "SV", "ST"])
def test_the_start_does_not_matter(pair):
    table = build(fuels.load("methanol").vapour)
    amounts, T, p, _ = box(table, n=40)
    state = frozen_state(table, "TP", T, p, equilibrate(table, "TP", T, p, amounts, forms(table, len(T))).amounts)
    base = equilibrate(table, pair, *given(state, pair), amounts, forms(table, len(T)))
    assert not base.failed.any()
    for guess in (60.0, 300.0, 1000.0, 4000.0, np.nan, -1.0):
        found = equilibrate(table, pair, *given(state, pair), amounts, forms(table, len(T)), guess=np.full(len(T), guess))
        assert not found.failed.any(), guess
        assert np.abs(found.T / base.T - 1.0).max() < 1e-9, guess
        assert (np.abs(found.amounts - base.amounts).max(axis=1) <= 1e-9 * total(base.amounts)).all(), guess


def test_a_guess_far_above_the_data_never_passes_for_a_solution():
    """Above 6000 K the polynomials of the data run astray and offer further roots: those must be marked."""
    table = build(fuels.load("ammonia").vapour)
    amounts, T, p, _ = box(table, n=60)
    for pair in ("HP", "UV", "SP", "SV"):
        state = frozen_state(table, "TP", T, p, equilibrate(table, "TP", T, p, amounts, forms(table, len(T))).amounts)
        for guess in (5900.0, 1e4):
            found = equilibrate(table, pair, *given(state, pair), amounts, forms(table, len(T)), guess=np.full(len(T), guess))
            good = ~found.failed
            assert (np.abs(found.T[good] / state.T[good] - 1.0) < 1e-8).all(), (pair, guess)


def test_failures_are_marked_and_stay_alone():
    table = build(fuels.load("iso-octane").vapour)
    amounts = mixtures(table, (0.8,) * 7)
    amounts[3] = table.amounts({"N2": 1.0, "fuel": 1.0})  # no oxygen: carbon beyond what a gas of this set can carry
    for pair in PAIRS:
        x, y = {"T": 2200.0, "H": 1e5, "U": 1e5, "S": 8.5e3}[pair[0]], {"P": 20e5, "V": 0.4, "T": 2200.0}[pair[1]]
        xs, ys = np.full(7, x), np.full(7, y)
        clean = equilibrate(table, pair, xs, ys, mixtures(table, (0.8,) * 7), forms(table, 7))
        assert not clean.failed.any()
        xs[0], ys[1], xs[2], ys[4] = np.nan, np.nan, np.inf, -1.0 if pair != "ST" else np.nan
        found = equilibrate(table, pair, xs, ys, amounts, forms(table, 7))
        assert found.failed[[0, 1, 2, 4]].all(), pair
        assert not found.failed[[5, 6]].any()
        assert np.array_equal(found.amounts[5:], clean.amounts[5:])
        assert np.array_equal(found.T[5:], clean.T[5:])


@pytest.mark.parametrize("pair", ["HP", "UV", "SP", "SV"])
def test_what_no_gas_can_be_fails(pair):
    table = build(fuels.load("iso-octane").vapour)
    amounts = mixtures(table, (0.8, 0.8))
    second = {"P": 1e5, "V": 0.4}[pair[1]]
    absurd = {"H": (1e12, -1e12), "U": (1e12, -1e12), "S": (1e8, -1e8)}[pair[0]]
    found = equilibrate(table, pair, np.array(absurd), np.full(2, second), amounts, forms(table, 2))
    assert found.failed.all()


@pytest.mark.parametrize(("pair", "x", "y"), [("TP", -5.0, 1e5), ("TP", 0.0, 1e5), ("TV", 0.0, 0.4), ("ST", 8e3, -3.0)])
def test_a_temperature_that_is_none_fails_without_a_warning(pair, x, y):
    table = build(fuels.load("iso-octane").vapour)
    found = equilibrate(table, pair, np.array([x]), np.array([y]), mixtures(table, (0.8,)), forms(table, 1))
    assert found.failed.all()


@pytest.mark.parametrize("carbon_over_oxygen", [1.0, 1.2])
def test_engines_refuse_carbon_that_must_be_solid(gas, carbon_over_oxygen):
    table = build(fuels.load("methane").vapour)
    amounts = table.amounts({"O2": 1.0, "N2": 3.0, "fuel": 2.0 * carbon_over_oxygen})[None]
    state = gas.state(table, "TP", np.array([1500.0]), np.array([1e5]), amounts, "equilibrium")
    assert state.status[0] == Status.CARBON_OVER_OXYGEN
    assert np.isnan(state.p[0])


@pytest.mark.parametrize("pair", PAIRS)
def test_bits_do_not_depend_on_the_batch(pair):
    table = build(fuels.load("iso-octane").vapour)
    amounts, T, p, _ = box(table, n=40)
    state = frozen_state(table, "TP", T, p, equilibrate(table, "TP", T, p, amounts, forms(table, len(T))).amounts)
    x, y = given(state, pair)
    whole = equilibrate(table, pair, x, y, amounts, forms(table, len(T)))
    order = np.random.default_rng(1).permutation(len(T))
    mixed = equilibrate(table, pair, x[order], y[order], amounts[order], forms(table, len(T)))
    for name in ("amounts", "T", "failed", "iterations"):
        assert np.array_equal(getattr(mixed, name), getattr(whole, name)[order]), name
    for i in range(0, len(T), 4):
        alone = equilibrate(table, pair, x[i : i + 1], y[i : i + 1], amounts[i : i + 1], forms(table, 1))
        assert np.array_equal(alone.amounts[0], whole.amounts[i])
        assert alone.T[0] == whole.T[i]
        assert alone.iterations[0] == whole.iterations[i]


def test_absent_elements_are_dropped():
    """Nitrogen and argon alone, and hydrogen with oxygen without carbon."""
    table = build(fuels.load("iso-octane").vapour)
    amounts = np.array([table.amounts({"N2": 1.0, "Ar": 0.1}), table.amounts({"H2": 2.0, "O2": 1.0})])
    found = equilibrate(table, "TP", np.full(2, 3000.0), np.full(2, 1e5), amounts, forms(table, 2))
    assert not found.failed.any()
    assert weighted(found.amounts, table.atoms)[0, table.element("C")] == 0.0
    assert found.amounts[1, table.index("CO2")] == 0.0
    k = np.exp(
        -(2.0 * gibbs(table, np.array([3000.0]))[0, table.index("N")] - gibbs(table, np.array([3000.0]))[0, table.index("N2")])
    )
    x = found.amounts[0] / found.amounts[0].sum()
    assert x[table.index("N")] ** 2 / x[table.index("N2")] * 1e5 / table.reference_pressure == pytest.approx(k, rel=1e-10)
