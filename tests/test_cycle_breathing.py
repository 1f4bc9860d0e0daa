"""Blowdown, residual gas, gas exchange and the amount of fuel: balances by hand, fixed points from anywhere."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fuelair.cycle import breathing
from fuelair.cycle.geometry import Volumes
from fuelair.gas.engine import Status, total
from fuelair.gas.mixture import mix

PART_LOAD = {
    "r": 10.5,
    "equivalence_ratio": 1.0,
    "pressure": 0.5e5,
    "temperature": 310.0,
    "exhaust_pressure": 1.05e5,
    "from_intake": True,
    "residual": None,
}
LATE = Volumes(*(np.array([x]) for x in (0.1, 0.97, 0.93, 0.108)))


def energy(table, state):
    mixture = mix(table, state.amounts)
    return mixture.thermal(state.T)[1] - mixture.gas_constant() * state.T


def enthalpy(table, state):
    return mix(table, state.amounts).thermal(state.T)[1]


@pytest.mark.parametrize("admission", ["premixed", "direct"])
@pytest.mark.parametrize("model", ["fuel-air-equilibrium", "fuel-air-frozen", "fuel-air-complete", "fuel-air-freeze-below"])
def test_blowdown_energy_balance_by_hand(gas, make, solve, model, admission):
    """m4 u4 + p_e (V4 - V6) = m6 u6 + m_e h_e, and the residual fills V6 at p_e."""
    run = solve(gas, *make("iso-octane", admission, **PART_LOAD, volumes=LATE), model)
    assert run.result.status[0] == Status.OK
    table, p_e = run.charge.recipe.table, 1.05e5
    m4 = 1.0 + float(run.charge.injected[0])
    scale = float(run.charge.trapped.v[0]) / 0.97
    v4, v6 = 0.93 * scale, 0.108 * scale
    stays, leaves = run.result.point("blown-down"), run.result.point("exhaust")
    m6, me = float(stays.mass[0]), float(leaves.mass[0])
    assert m6 + me == pytest.approx(m4, rel=1e-14)
    assert m6 * float(stays.state.v[0]) == pytest.approx(v6, rel=1e-10)
    assert stays.state.p[0] == leaves.state.p[0] == p_e
    left = m4 * float(energy(table, run.release)[0]) + p_e * (v4 - v6)
    right = m6 * float(energy(table, stays.state)[0]) + me * float(enthalpy(table, leaves.state)[0])
    assert left == pytest.approx(right, abs=1e-10 * 3e6)
    assert m6 == pytest.approx(float(run.charge.residual_fraction[0]), abs=1e-10)


def test_gas_that_stays_expands_isentropically(gas, make, solve):
    run = solve(gas, *make("methane", "premixed", r=10.0, exhaust_pressure=1.2e5), "fuel-air-frozen")
    stays = run.exhaust.remaining
    assert stays.s[0] == pytest.approx(run.release.s[0], rel=1e-12)
    assert np.array_equal(stays.amounts, run.release.amounts)


def test_composition_leaves_equilibrium_at_the_freeze_temperature(gas, make, solve):
    hot = solve(gas, *make("methane", "premixed", r=8.0, equivalence_ratio=1.1, temperature=400.0))
    cold = solve(gas, *make("methane", "premixed", r=15.0, equivalence_ratio=1.1))
    assert hot.release.T[0] > 1740.0 > cold.release.T[0]
    for run in (hot, cold):
        table = run.charge.recipe.table
        source = run.release if run is hot else run.burn.state
        at = gas.state(table, "ST", source.s, np.array([1740.0]), source.amounts, "equilibrium")
        for state in (run.exhaust.remaining, run.exhaust.leaving):
            assert state.amounts == pytest.approx(at.amounts, rel=1e-9, abs=1e-16)
        x = run.exhaust.leaving.mole_fractions()[0]
        co, h2o, co2, h2 = (x[table.index(k)] for k in ("CO", "H2O", "CO2", "H2"))
        # K = 3.5 of exhaust analysis (Heywood 1988, from memory) belongs to about 1740 K
        assert co * h2o / (co2 * h2) == pytest.approx(3.5, rel=0.03)


def test_exhaust_pressure_above_release_is_back_flow_not_an_error(gas, make, solve):
    run = solve(gas, *make("methane", "premixed", r=10.0, equivalence_ratio=0.1, exhaust_pressure=[2.5e5, 1.0e5]))
    assert run.result.status.tolist() == [Status.OK, Status.OK]
    assert run.result.flags["back-flow"].tolist() == [True, False]
    assert run.exhaust.blowdown_work[0] == 0.0 < run.exhaust.blowdown_work[1]
    # p_e presses gas back in: what leaves is hotter than what was released
    assert run.exhaust.leaving.T[0] > run.release.T[0]


@pytest.mark.parametrize("admission", ["premixed", "direct"])
def test_the_fixed_point_does_not_depend_on_its_start(gas, make, trap, monkeypatch, admission):
    recipe, settings = make("iso-octane", admission, **PART_LOAD, egr_fraction=0.1, humidity=0.008)
    one = trap(gas, recipe, settings)
    monkeypatch.setattr(breathing, "FIRST_RESIDUAL", 0.3)
    monkeypatch.setattr(breathing, "FIRST_RESIDUAL_TEMPERATURE", 1900.0)
    monkeypatch.setattr(breathing, "DEFAULT_FREEZE", 2600.0)
    other = trap(gas, recipe, settings)
    assert one.status[0] == other.status[0] == Status.OK
    assert other.residual_fraction == pytest.approx(one.residual_fraction, rel=1e-10)
    assert pytest.approx(one.trapped.T, rel=1e-10) == other.trapped.T
    assert other.residual_amounts == pytest.approx(one.residual_amounts, rel=1e-8, abs=1e-14)


def test_residual_by_the_perfect_gas_formula(fake, make, solve):
    """Constant cp, no fuel to speak of: x = (p_e V6 / T6) / (p_i V1 / T1), T6 = T4 (p_e / p4)^((k-1)/k)."""
    engine = fake()
    recipe, settings = make(
        fake.fuel,
        "premixed",
        r=9.0,
        equivalence_ratio=0.7,
        pressure=0.6e5,
        temperature=300.0,
        fuel_temperature=300.0,
        exhaust_pressure=1.0e5,
        from_intake=True,
        residual=None,
    )
    run = solve(engine, replace(recipe, table=engine.table), settings, "fuel-air-complete")
    assert run.result.status[0] == Status.OK
    f = {k: float(v[0]) for k, v in run.result.figures.items()}
    T1, x = float(run.charge.trapped.T[0]), float(run.charge.residual_fraction[0])
    T6 = f["release_temperature_K"] * (1.0e5 / f["release_pressure_Pa"]) ** (0.4 / 1.4)
    assert f["blowdown_temperature_K"] == pytest.approx(T6, rel=1e-11)
    # per volume: moles are kept, so partial amounts follow p V / T; mass per mole differs little: compare by amounts
    n6 = 1.0e5 / 9.0 / T6
    n1 = 0.6e5 / T1
    moles = x * float(total(run.charge.residual_amounts)[0]) / float(total(run.charge.trapped.amounts)[0])
    assert moles == pytest.approx(n6 / n1, rel=1e-10)
    # first law of the intake for constant cp: cp T1 n1 = cp T_i n_i + n6 (cp T6 + R T6 (p_i - p_e) / p_e)
    left = 3.5 * T1 * n1
    right = 3.5 * 300.0 * (n1 - n6) + n6 * T6 * (3.5 + (0.6 - 1.0) / 1.0)
    assert left == pytest.approx(right, rel=1e-10)


def test_more_exhaust_pressure_means_more_residual_and_no_room_is_a_status(gas, make, trap):
    recipe, settings = make("iso-octane", "premixed", **{**PART_LOAD, "exhaust_pressure": [0.5e5, 0.8e5, 1.2e5, 60e5]})
    charge = trap(gas, recipe, settings)
    assert charge.status[:3].tolist() == [Status.OK] * 3
    assert (np.diff(charge.residual_fraction[:3]) > 0.01).all()
    assert charge.status[3] in (Status.NO_FRESH_CHARGE, Status.NOT_CONVERGED)


@pytest.mark.parametrize("admission", ["premixed", "port-liquid", "direct"])
def test_a_charge_with_more_carbon_than_oxygen_says_so_when_its_residual_is_solved(gas, make, solve, admission):
    for residual in (None, 0.05, 0.0):
        run = solve(
            gas,
            *make("toluene", admission, r=10.0, equivalence_ratio=2.8, temperature=420.0, from_intake=True, residual=residual),
        )
        assert Status(int(run.result.status[0])) is Status.CARBON_OVER_OXYGEN, residual


def test_a_large_given_residual_converges(gas, make, trap):
    charge = trap(gas, *make("iso-octane", "premixed", r=10.0, from_intake=True, residual=[0.5, 0.7, 0.9]))
    assert charge.status.tolist() == [Status.OK] * 3


def test_fuel_mass_is_met(gas, make, trap):
    for admission, residual in (("direct", 0.0), ("port-liquid", None), ("premixed", 0.05)):
        recipe, settings = make(
            "ethanol",
            admission,
            r=11.0,
            pressure=0.9e5,
            temperature=360.0,
            exhaust_pressure=1.0e5,
            from_intake=True,
            residual=residual,
            swept_volume=0.5e-3,
        )
        charge = trap(gas, recipe, settings, fuel_mass=np.array([30e-6]))
        assert charge.status[0] == Status.OK
        trapped = 0.5e-3 * 11.0 / 10.0 / float(charge.trapped.v[0])
        assert charge.fuel_mass[0] * trapped == pytest.approx(30e-6, rel=1e-10)


@pytest.mark.parametrize(("mode", "limit"), [("constant-pressure", np.nan), ("pressure-limited", 140e5)])
def test_the_cut_off_ratio_solves_back(gas, make, solve, mode, limit):
    ratios = np.array([1.2, 1.5, 1.9])
    for residual in (0.0, None):
        recipe, settings = make(
            "n-dodecane",
            "direct",
            mode,
            r=17.0,
            pressure=2e5,
            temperature=330.0,
            exhaust_pressure=1.8e5,
            pressure_limit=limit,
            from_intake=residual is None,
            residual=residual,
            size=3,
        )
        run = solve(gas, recipe, settings, cutoff_ratio=ratios)
        assert (run.result.status == Status.OK).all()
        assert run.burn.volume_ratio == pytest.approx(ratios, rel=1e-9)
        phi = run.charge.recipe.equivalence_ratio
        assert (np.diff(phi) > 0.05).all()
        again = solve(gas, recipe.with_equivalence_ratio(phi), settings)
        assert again.burn.volume_ratio == pytest.approx(ratios, rel=1e-9)


def test_a_cut_off_ratio_beyond_a_stoichiometric_mixture_is_a_status(gas, make, trap):
    recipe, settings = make("n-dodecane", "direct", "constant-pressure", r=17.0, size=2)
    charge = trap(gas, recipe, settings, cutoff_ratio=np.array([9.0, 1.5]))
    assert charge.status.tolist() == [Status.CUTOFF_NOT_REACHED, Status.OK]


def test_a_limit_below_compression_is_told_from_a_cut_off_ratio_not_reached(gas, make, solve):
    """A limit of 20 bar at r = 20: every amount of fuel expands further than 1.5, so "not reached" would mislead."""
    run = solve(gas, *make("n-dodecane", "direct", "pressure-limited", r=20.0, pressure_limit=20e5), cutoff_ratio=np.array([1.5]))
    assert Status(int(run.result.status[0])) is Status.LIMIT_BELOW_COMPRESSION


def test_the_whole_cycle_closes_the_first_law(gas, make, solve):
    """What comes in, less what leaves, is the net work over the whole cycle, intake and exhaust strokes included."""
    closing = np.array([0.1, 0.104, 0.12])
    volumes = Volumes(np.full(3, 0.1), np.full(3, 1.04), np.full(3, 1.0), closing)
    run = solve(gas, *make("iso-octane", "premixed", **PART_LOAD, volumes=volumes, size=3))
    assert (run.result.status == Status.OK).all()
    charge = run.charge
    came = charge.intake_enthalpy + charge.injected * charge.fuel_enthalpy
    left = run.exhaust.leaving_mass * run.exhaust.leaving.h
    net = run.result.figures["imep_net_Pa"] * charge.trapped.v / 1.04
    for i in range(3):
        assert came[i] - left[i] == pytest.approx(net[i], rel=1e-9), f"exhaust closes at V = {closing[i]} V_d"


def test_short_circuited_air_mixes_by_enthalpy(gas, make, solve):
    run = solve(gas, *make("n-dodecane", "direct", r=14.0, equivalence_ratio=0.5, residual=0.08, four_stroke=False))
    table = run.charge.recipe.table
    fresh = table.amounts({k: v for k, v in run.charge.recipe.air.composition().items() if v})[None]
    air = gas.state(table, "TP", np.array([350.0]), np.array([101325.0]), fresh)
    extra = np.array([0.4])
    mixed = breathing.short_circuit(
        gas, table, run.exhaust, extra=extra, extra_enthalpy=air.h, extra_amounts=fresh, pressure=np.array([101325.0])
    )
    m = run.exhaust.leaving_mass
    assert mixed.h[0] * (m[0] + 0.4) == pytest.approx(float(run.exhaust.leaving.h[0] * m[0] + 0.4 * air.h[0]), rel=1e-11)
    assert mixed.amounts * (m[0] + 0.4) == pytest.approx(run.exhaust.leaving.amounts * m[0] + 0.4 * fresh, rel=1e-13, abs=1e-18)
    assert 350.0 < mixed.T[0] < run.exhaust.leaving.T[0]
    assert run.result.figures["pmep_Pa"][0] == 0.0


def test_an_element_that_fails_leaves_the_others_their_bits(gas, make, trap, solve):
    keys = {"r": 11.0, "from_intake": True, "residual": None, "temperature": 400.0}
    batch = solve(gas, *make("toluene", "premixed", equivalence_ratio=[0.8, 2.9, 1.1], **keys))
    for i, phi in ((0, 0.8), (2, 1.1)):
        alone = solve(gas, *make("toluene", "premixed", equivalence_ratio=phi, **keys))
        for key, value in alone.result.figures.items():
            assert value[0] == batch.result.figures[key][i], key


def test_without_anything_that_comes_back_no_cycle_is_run(fake, make):
    engine = fake()
    recipe, settings = make(fake.fuel, "direct")

    def never(charge, settings):
        raise AssertionError("the cycle was run")

    charge = breathing.solve_charge(replace(recipe, table=engine.table), engine, settings, never)
    assert charge.status[0] == Status.OK
    assert charge.residual_fraction[0] == 0.0
    recipe, settings = make(fake.fuel, "direct", residual=0.01)
    with pytest.raises(AssertionError, match="the cycle was run"):
        breathing.solve_charge(replace(recipe, table=engine.table), engine, settings, never)
