"""The real-gas engine: pairs, the minimum of the free energy, limits, derivatives of its own states, status, bits."""

from __future__ import annotations

import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.gas.complete import oxygen_excess
from fuelair.gas.engine import PRESSURE_LIMIT_OF_DATA, Status, total, weighted
from fuelair.gas.mixture import gibbs
from fuelair.gas.polynomials import R
from fuelair.gas.real_engine import RealGas
from fuelair.gas.real_gas import DENSITY_LIMIT, residual, virial_table
from fuelair.gas.species import build

TABLE = build(fuels.load("n-dodecane").vapour)
ENGINE = RealGas()
PAIRS = ("TP", "TV", "HP", "UV", "SP", "SV", "ST")
CHEMISTRIES = ("frozen", "complete", "equilibrium")
N = 40


def mixtures(phi, table=TABLE):
    demand = -float(oxygen_excess(table, np.eye(len(table))[[table.index("fuel")]])[0]) / 2.0
    parts = [{"O2": 1.0, "N2": 3.73, "Ar": 0.04, "fuel": p / demand, "unburned-fuel": 1e-3} for p in phi]
    return np.array([table.amounts(p) for p in parts])


def box(n=N, seed=3):
    """Compressed, burning and expanding gas: 700 to 3300 K, 1 to 500 bar, phi 0.1 to 1.8."""
    rng = np.random.default_rng(seed)
    phi = rng.uniform(0.1, 1.8, n)
    T, p = rng.uniform(700.0, 3300.0, n), 10.0 ** rng.uniform(5.0, 7.7, n)
    T[-2:], p[-2:] = (1050.0, 2700.0), (300e5, 550e5)  # compressed and burned where it matters most
    return mixtures(phi), T, p


def given(state, pair):
    letters = {"T": state.T, "P": state.p, "H": state.h, "U": state.u, "S": state.s, "V": state.v}
    return letters[pair[0]], letters[pair[1]]


def slope(f, size):
    """df/dx at 0 by fourth-order central differences."""
    return (8.0 * (f(size) - f(-size)) - (f(2.0 * size) - f(-2.0 * size))) / (12.0 * size)


@pytest.fixture(scope="module", params=CHEMISTRIES)
def solved(request):
    amounts, T, p = box()
    state = ENGINE.state(TABLE, "TP", T, p, amounts, request.param)
    assert (state.status == Status.OK).all()
    Z = state.p * state.v / (R * total(state.amounts) * state.T)
    assert Z.max() > 1.08
    return request.param, amounts, state


@pytest.mark.parametrize("pair", PAIRS)
def test_every_pair_leads_back(solved, pair):
    chemistry, amounts, state = solved
    back = ENGINE.state(TABLE, pair, *given(state, pair), amounts, chemistry)
    assert (back.status == Status.OK).all()
    for name in ("T", "p", "v", "cp", "sound"):
        assert np.abs(getattr(back, name) / getattr(state, name) - 1.0).max() < 1e-11, name
    rt = R * total(state.amounts) * state.T
    assert (np.abs(back.h - state.h) / rt).max() < 1e-11
    assert (np.abs(back.u - state.u) / rt).max() < 1e-11
    assert (np.abs(back.s - state.s) * state.T / rt).max() < 1e-11
    assert np.abs(back.mole_fractions() - state.mole_fractions()).max() < 1e-11


@pytest.mark.parametrize("pair", PAIRS)
def test_the_given_pair_is_met_and_h_is_u_plus_pv(solved, pair):
    chemistry, amounts, state = solved
    back = ENGINE.state(TABLE, pair, *given(state, pair), amounts, chemistry)
    rt = R * total(state.amounts) * state.T
    scale = {"H": rt, "U": rt, "S": rt / state.T}
    for letter, want, have in zip(pair, given(state, pair), given(back, pair), strict=True):
        assert (np.abs(have - want) <= 1e-12 * scale.get(letter, want)).all()
    assert (np.abs(back.h - back.u - back.p * back.v) <= 1e-12 * rt).all()


def test_elements_and_the_inert_are_kept(solved):
    chemistry, amounts, state = solved
    want, have = weighted(amounts, TABLE.atoms), weighted(state.amounts, TABLE.atoms)
    assert (np.abs(have - want) <= 1e-13 * want.max(axis=1, keepdims=True)).all()
    assert np.abs(total(state.amounts * TABLE.molar_mass) - 1.0).max() < 1e-13
    assert np.array_equal(state.amounts[:, TABLE.inert], amounts[:, TABLE.inert])
    if chemistry == "frozen":
        assert np.array_equal(state.amounts, amounts)


def _misses(state, with_residual=True):
    """Distance of every major species from the fitted potentials of the elements, over R T."""
    x, rho = state.mole_fractions(), total(state.amounts) / state.v
    real = residual(virial_table(TABLE), state.T, rho, x).mu
    assert np.abs(real).max() > 0.3  # or the residual part would show nothing
    out = []
    for i in range(len(state.T)):
        there = (x[i] > 0.0) & ~TABLE.inert
        mu = gibbs(TABLE, state.T[i : i + 1])[0]
        mu = mu + np.log(np.where(there, x[i], 1.0) * rho[i] * R * state.T[i] / TABLE.reference_pressure)
        mu = mu + (real[i] if with_residual else 0.0)
        least = next(e for e in (1e-7, 1e-10, 1e-13, 1e-16) if np.linalg.matrix_rank(TABLE.atoms[there & (x[i] > e)]) == 5)
        much = there & (x[i] > least)
        weight = np.sqrt(x[i][much])
        potential = np.linalg.lstsq(TABLE.atoms[much] * weight[:, None], mu[much] * weight, rcond=None)[0]
        miss = np.abs(mu - TABLE.atoms @ potential)
        out.append((miss[much].max(), miss[there & (x[i] > 1e-25)].max()))
    return np.array(out)


def test_equilibrium_is_the_minimum_with_the_residual_potentials():
    amounts, T, p = box()
    state = ENGINE.state(TABLE, "TP", T, p, amounts, "equilibrium")
    miss = _misses(state)
    assert miss[:, 0].max() < 1e-8
    assert miss[:, 1].max() < 1e-6
    assert _misses(state, with_residual=False)[:, 0].max() > 0.01  # the ideal potentials would be another equilibrium
    burned = ENGINE.state(TABLE, "UV", state.u, state.v, amounts, "equilibrium")
    assert _misses(burned)[:, 0].max() < 1e-8


@pytest.mark.parametrize("chemistry", CHEMISTRIES)
def test_the_ideal_gas_is_the_limit_of_low_pressure(gas, chemistry):
    """The difference is B p/(R T), so 1e-5 of v at 1e3 Pa; it falls in proportion to p and with it below 1e-6."""
    amounts, T, _ = box()

    def gaps(pressure):
        p = np.full(N, pressure)
        real, ideal = (e.state(TABLE, "TP", T, p, amounts, chemistry) for e in (ENGINE, gas))
        rt = R * total(ideal.amounts) * T
        return {
            "v": real.v / ideal.v - 1.0,
            "u": (real.u - ideal.u) / rt,
            "h": (real.h - ideal.h) / rt,
            "s": (real.s - ideal.s) * T / rt,
            "cp": (real.cp - ideal.cp) * T / rt,
            "sound": real.sound / ideal.sound - 1.0,
            "x": np.abs(real.mole_fractions() - ideal.mole_fractions()).max(axis=1),
        }

    near, low = gaps(1e3), gaps(10.0)
    for name, gap in near.items():
        assert np.abs(gap).max() < 3e-5, name
        assert np.abs(low[name]).max() < 1e-6, name
    if chemistry == "frozen":
        assert low["v"] == pytest.approx(near["v"] / 100.0, rel=1e-3, abs=1e-12)
        x = amounts / total(amounts)[:, None]
        second = residual(virial_table(TABLE), T, np.full(N, 1e-6), x).Z - 1.0
        assert near["v"] == pytest.approx(second / 1e-6 * 1e3 / (R * T), rel=1e-3, abs=1e-9)


def test_heat_capacity_is_the_slope_of_enthalpy():
    amounts, T, p = box()
    state = ENGINE.state(TABLE, "TP", T, p, amounts)
    found = slope(lambda e: ENGINE.state(TABLE, "TP", T * (1.0 + e), p, amounts).h, 1e-3) / T
    away = np.abs(T - 1000.0) > 5.0  # the polynomials break at 1000 K
    assert np.abs(found / state.cp - 1.0)[away].max() < 1e-8


def test_speed_of_sound_is_the_slope_of_the_isentrope():
    amounts, T, p = box()
    state = ENGINE.state(TABLE, "TP", T, p, amounts)
    # w2 = dp/drho at s; with ln v = ln v0 - e, drho = rho de
    found = slope(lambda e: ENGINE.state(TABLE, "SV", state.s, state.v * np.exp(-e), amounts).p, 1e-3) * state.v
    away = np.abs(T - 1000.0) > 5.0
    assert np.abs(np.sqrt(found) / state.sound - 1.0)[away].max() < 1e-8


@pytest.mark.parametrize("chemistry", ["frozen", "equilibrium"])
def test_dh_is_t_ds_plus_v_dp_and_du_is_t_ds_less_p_dv(chemistry):
    """Along slanted lines; in equilibrium the chemical terms vanish, which no engine meets whose potentials are off."""
    amounts, T, p = box()
    state = ENGINE.state(TABLE, "TP", T, p, amounts, chemistry)
    step = 1e-3
    line = {
        k: ENGINE.state(TABLE, "TP", T * np.exp(k * step), p * np.exp(-0.7 * k * step), amounts, chemistry)
        for k in (-2, -1, 1, 2)
    }

    def along(name):
        return (
            8.0 * (getattr(line[1], name) - getattr(line[-1], name)) - (getattr(line[2], name) - getattr(line[-2], name))
        ) / 12.0

    away = np.abs(T - 1000.0) > 5.0
    rt = R * total(state.amounts) * T * step
    first = along("h") - state.T * along("s") - state.v * along("p")
    second = along("u") - state.T * along("s") + state.p * along("v")
    assert np.abs(first / rt)[away].max() < 1e-8
    assert np.abs(second / rt)[away].max() < 1e-8


def test_an_isentrope_in_equilibrium_does_the_work_of_its_pressure():
    amounts, T, p = box(8)
    start = ENGINE.state(TABLE, "TP", T + 1200.0, p, amounts, "equilibrium")
    at, weights = np.polynomial.legendre.leggauss(24)
    width = np.log(8.0)
    work = np.zeros(len(T))
    for a, w in zip(at, weights, strict=True):
        v = start.v * np.exp(0.5 * width * (1.0 + a))
        work += 0.5 * width * w * ENGINE.state(TABLE, "SV", start.s, v, amounts, "equilibrium").p * v
    end = ENGINE.state(TABLE, "SV", start.s, 8.0 * start.v, amounts, "equilibrium")
    away = (end.T - 1000.0) * (start.T - 1000.0) > 0.0
    assert away.sum() > 5
    assert (start.u - end.u)[away] == pytest.approx(work[away], rel=1e-8)


# --- status -------------------------------------------------------------------------------------------------------


def test_above_the_pressure_of_the_data_nothing_is_claimed():
    amounts = mixtures((0.6, 0.6))
    p = PRESSURE_LIMIT_OF_DATA * np.array([0.999, 1.001])
    for chemistry in CHEMISTRIES:
        state = ENGINE.state(TABLE, "TP", np.full(2, 2500.0), p, amounts, chemistry)
        assert state.status.tolist() == [Status.OK, Status.OUTSIDE_DATA]
        assert np.isfinite(state.v).all()


def test_beyond_the_density_of_its_validity_nothing_is_claimed():
    amounts = np.tile(TABLE.amounts({"O2": 0.21, "N2": 0.78, "Ar": 0.01}), (2, 1))
    v = total(amounts) / (DENSITY_LIMIT * np.array([0.999, 1.001]))
    state = ENGINE.state(TABLE, "TV", np.full(2, 500.0), v, amounts)
    assert state.p.max() < PRESSURE_LIMIT_OF_DATA
    assert state.status.tolist() == [Status.OK, Status.OUTSIDE_DATA]


def test_cold_wet_gas_is_no_gas_and_its_neighbours_are():
    wet, dry = TABLE.amounts({"H2O": 1.0}), TABLE.amounts({"N2": 1.0})
    amounts = np.array([dry, wet, dry])
    for pair, x, y in (("TP", 300.0, 5e6), ("TV", 300.0, 0.02)):
        state = ENGINE.state(TABLE, pair, np.full(3, x), np.full(3, y), amounts)
        assert state.status[1] in (Status.NO_SOLUTION, Status.OUTSIDE_DATA)
        assert state.status[[0, 2]].tolist() == [Status.OK, Status.OK]
        assert np.array_equal(state.p[[0, 2]], ENGINE.state(TABLE, pair, np.full(2, x), np.full(2, y), amounts[[0, 2]]).p)


@pytest.mark.parametrize("chemistry", CHEMISTRIES)
@pytest.mark.parametrize("pair", PAIRS)
def test_nan_kills_no_neighbour(pair, chemistry):
    amounts, T, p = box(6)
    state = ENGINE.state(TABLE, "TP", T, p, amounts, chemistry)
    x, y = (np.array(a) for a in given(state, pair))
    clean = ENGINE.state(TABLE, pair, x, y, amounts, chemistry)
    x[1], y[3] = np.nan, np.nan
    found = ENGINE.state(TABLE, pair, x, y, amounts, chemistry)
    assert (found.status[[1, 3]] == Status.NO_SOLUTION).all()
    assert np.isnan(found.u[[1, 3]]).all()
    rest = [0, 2, 4, 5]
    for name in ("T", "p", "v", "u", "h", "s", "cp", "sound", "amounts", "status"):
        assert np.array_equal(getattr(found, name)[rest], getattr(clean, name)[rest]), name


def test_a_nan_neighbour_leaves_the_entropy_pair_without_a_warning():
    """The gas exchange of a batch asks for ST with NaN where a case does not cross its freeze temperature."""
    amounts, _, _ = box(3)
    s = np.array([8.4e3, np.nan, 8.2e3])
    found = ENGINE.state(TABLE, "ST", s, np.full(3, 1740.0), amounts, "equilibrium")
    assert found.status[[0, 2]].tolist() == [Status.OK, Status.OK]
    assert found.status[1] == Status.NO_SOLUTION


@pytest.mark.parametrize("chemistry", CHEMISTRIES)
def test_an_empty_stream_is_no_warning(chemistry):
    """A batch in which only some cases recirculate exhaust holds streams without mass."""
    amounts, T, p = box(3)
    amounts[1] = 0.0
    state = ENGINE.state(TABLE, "TP", T, p, amounts, chemistry)
    whole = ENGINE.state(TABLE, "TP", T[[0, 2]], p[[0, 2]], amounts[[0, 2]], chemistry)
    assert np.array_equal(state.h[[0, 2]], whole.h)


@pytest.mark.parametrize("chemistry", CHEMISTRIES)
@pytest.mark.parametrize(("pair", "x", "y"), [("HP", -1e12, 1e5), ("UV", -1e9, 0.1), ("SV", -1e9, 0.1), ("HP", 1e12, 1e5)])
def test_what_no_gas_can_be_has_a_status_and_no_warning(pair, x, y, chemistry):
    state = ENGINE.state(TABLE, pair, np.array([x]), np.array([y]), mixtures((0.8,)), chemistry)
    assert state.status[0] in (Status.NO_SOLUTION, Status.OUTSIDE_DATA)


def test_carbon_beyond_oxygen_is_refused():
    amounts = np.array([TABLE.amounts({"O2": 5.0, "N2": 20.0, "fuel": 1.0}), mixtures((1.0,))[0]])
    state = ENGINE.state(TABLE, "TP", np.full(2, 1800.0), np.full(2, 1e6), amounts, "equilibrium")
    assert state.status.tolist() == [Status.CARBON_OVER_OXYGEN, Status.OK]
    assert np.isnan(state.u[0])


# --- bits ---------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("chemistry", CHEMISTRIES)
@pytest.mark.parametrize("pair", PAIRS)
def test_bits_do_not_depend_on_the_batch(pair, chemistry):
    amounts, T, p = box()
    state = ENGINE.state(TABLE, "TP", T, p, amounts, chemistry)
    x, y = given(state, pair)
    whole = ENGINE.state(TABLE, pair, x, y, amounts, chemistry)
    order = np.random.default_rng(9).permutation(N)
    mixed = ENGINE.state(TABLE, pair, x[order], y[order], amounts[order], chemistry)
    names = ("T", "p", "v", "u", "h", "s", "cp", "sound", "amounts", "status", "iterations")
    for name in names:
        assert np.array_equal(getattr(mixed, name), getattr(whole, name)[order]), name
    for i in range(0, N, 5):
        alone = ENGINE.state(TABLE, pair, x[i : i + 1], y[i : i + 1], amounts[i : i + 1], chemistry)
        for name in names:
            assert np.array_equal(getattr(alone, name)[0], getattr(whole, name)[i]), (name, i)


def test_the_guess_and_earlier_calls_leave_no_trace():
    amounts, T, p = box(6)
    first = ENGINE.state(TABLE, "TP", T, p, amounts, "equilibrium")
    ENGINE.state(TABLE, "UV", first.u + 3e5, first.v, amounts, "equilibrium")
    again = RealGas().state(TABLE, "TP", T, p, amounts, "equilibrium", guess=np.full(6, 400.0))
    assert np.array_equal(first.amounts, again.amounts)
    assert np.array_equal(first.u, again.u)


def test_it_changes_no_argument():
    amounts, T, p = box(6)
    before = amounts.copy(), T.copy(), p.copy()
    for chemistry in CHEMISTRIES:
        ENGINE.state(TABLE, "TP", T, p, amounts, chemistry)
    assert all(np.array_equal(a, b) for a, b in zip(before, (amounts, T, p), strict=True))
