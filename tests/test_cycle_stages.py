"""Compression, combustion and expansion: textbook formulas on a gas of constant cp, integrals on the real one."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.cycle.stages import burn, compress, end_of_constant_volume, expand, freeze_composition, replaced, rows_of
from fuelair.gas.engine import Status
from fuelair.gas.graphite import carbon_activity
from fuelair.gas.species import build

NODES, WEIGHTS = np.polynomial.legendre.leggauss(24)


def work_along(pressure, low, high):
    """Integral of p dv by Gauss quadrature over ln v."""
    a, b = np.log(low), np.log(high)
    v = np.exp(0.5 * (b - a) * NODES + 0.5 * (a + b))
    return float(np.sum(WEIGHTS * pressure(v) * v) * 0.5 * (b - a))


@pytest.fixture
def cold(fake, make, solve):
    """A cycle on the gas of constant cp: run(heat_addition, r, phi, ...) -> Run."""
    engine = fake()

    def run(heat_addition, *, r=10.0, phi=0.5, admission="premixed", **more):
        recipe, settings = make(fake.fuel, admission, heat_addition, r=r, equivalence_ratio=phi, **more)
        return solve(engine, replace(recipe, table=engine.table), settings, "fuel-air-complete")

    return run


def figure(run, key):
    assert run.result.status[0] == Status.OK, Status(int(run.result.status[0])).label
    return float(run.result.figures[key][0])


@pytest.mark.parametrize("r", [4.0, 10.0, 30.0])
@pytest.mark.parametrize("phi", [0.1, 0.9])
def test_otto(cold, r, phi):
    run = cold("constant-volume", r=r, phi=phi)
    assert figure(run, "indicated_efficiency") == pytest.approx(1.0 - r**-0.4, rel=1e-12)
    assert figure(run, "compression_temperature_K") == pytest.approx(350.0 * r**0.4, rel=1e-13)
    assert figure(run, "compression_pressure_Pa") == pytest.approx(101325.0 * r**1.4, rel=1e-13)
    cv = 2.5 * 101325.0 * float(run.charge.trapped.v[0]) / 350.0
    q = float(run.charge.fuel_mass[0]) * 47e6
    assert figure(run, "peak_temperature_K") == pytest.approx(350.0 * r**0.4 + q / cv, rel=1e-12)
    assert figure(run, "heat_added_J_per_kg") == pytest.approx(q, rel=1e-14)
    assert figure(run, "work_J_per_kg") == pytest.approx(q * (1.0 - r**-0.4), rel=1e-12)
    assert figure(run, "imep_gross_Pa") == pytest.approx(
        q * (1.0 - r**-0.4) / (run.charge.trapped.v[0] * (1.0 - 1.0 / r)), rel=1e-12
    )
    assert figure(run, "isfc_kg_per_J") == pytest.approx(1.0 / (47e6 * (1.0 - r**-0.4)), rel=1e-12)


@pytest.mark.parametrize("r", [10.0, 22.0])
def test_diesel(cold, r):
    run = cold("constant-pressure", r=r)
    b = figure(run, "cutoff_ratio")
    assert b == pytest.approx(figure(run, "peak_temperature_K") / (350.0 * r**0.4), rel=1e-13)
    assert figure(run, "indicated_efficiency") == pytest.approx(1.0 - r**-0.4 * (b**1.4 - 1.0) / (1.4 * (b - 1.0)), rel=1e-12)
    assert figure(run, "peak_pressure_Pa") == figure(run, "compression_pressure_Pa")


@pytest.mark.parametrize("rise", [1.2, 1.8])
def test_dual(cold, rise):
    r, limit = 14.0, rise * 101325.0 * 14.0**1.4
    run = cold("pressure-limited", r=r, pressure_limit=limit)
    a, b = rise, figure(run, "cutoff_ratio")
    assert run.result.flags["limited"][0]
    expected = 1.0 - r**-0.4 * (a * b**1.4 - 1.0) / ((a - 1.0) + 1.4 * a * (b - 1.0))
    assert figure(run, "indicated_efficiency") == pytest.approx(expected, rel=1e-12)
    assert figure(run, "peak_pressure_Pa") == limit
    at = run.result.point("limit")
    assert at.state.p[0] == pytest.approx(limit, rel=1e-9)
    assert at.state.T[0] == pytest.approx(a * 350.0 * r**0.4, rel=1e-9)
    assert at.volume[0] == pytest.approx(run.compression.state.v[0], rel=1e-12)


def test_a_limit_that_is_not_reached_leaves_constant_volume(cold):
    free = cold("constant-volume")
    far = cold("pressure-limited", pressure_limit=1.0001 * float(free.burn.state.p[0]))
    for key in ("peak_pressure_Pa", "peak_temperature_K", "indicated_efficiency", "exhaust_temperature_K"):
        assert figure(far, key) == figure(free, key)
    assert not far.result.flags["limited"][0]
    assert figure(far, "cutoff_ratio") == 1.0
    assert not far.result.has("limit")


def test_a_limit_at_compression_pressure_is_constant_pressure(cold):
    diesel = cold("constant-pressure")
    held = cold("pressure-limited", pressure_limit=float(diesel.compression.state.p[0]) * (1.0 + 1e-13))
    assert figure(held, "peak_temperature_K") == pytest.approx(figure(diesel, "peak_temperature_K"), rel=1e-11)
    assert figure(held, "indicated_efficiency") == pytest.approx(figure(diesel, "indicated_efficiency"), rel=1e-11)


def test_pressure_limited_lies_between_the_two(gas, make, solve):
    common = {"r": 15.0, "equivalence_ratio": 0.6, "pressure": 2e5}
    cv = solve(gas, *make("n-heptane", "direct", "constant-volume", **common))
    cp = solve(gas, *make("n-heptane", "direct", "constant-pressure", **common))
    limits = np.linspace(float(cp.burn.state.p[0]), float(cv.burn.state.p[0]), 7)[1:-1]
    held = solve(gas, *make("n-heptane", "direct", "pressure-limited", pressure_limit=limits, **common))
    assert (held.result.status == Status.OK).all()
    for key, sign in (
        ("peak_temperature_K", 1),
        ("indicated_efficiency", 1),
        ("release_temperature_K", -1),
        ("cutoff_ratio", -1),
    ):
        values = [float(cp.result.figures[key][0]), *held.result.figures[key], float(cv.result.figures[key][0])]
        assert (np.diff(values) * sign > 0.0).all(), key
    assert np.array_equal(held.burn.state.p, limits)


def test_a_limit_below_the_compression_pressure_is_a_status(gas, make, solve):
    run = solve(
        gas, *make("n-heptane", "direct", "pressure-limited", r=15.0, equivalence_ratio=0.6, pressure_limit=[30e5, 200e5])
    )
    assert run.result.status.tolist() == [Status.LIMIT_BELOW_COMPRESSION, Status.OK]


@pytest.mark.parametrize(("admission", "fuel"), [("premixed", "iso-octane"), ("direct", "n-dodecane")])
def test_compression_and_expansion_work_are_the_integrals_of_p_dv(gas, make, solve, admission, fuel):
    run = solve(gas, *make(fuel, admission, r=14.0, equivalence_ratio=0.8, fuel_pressure=800e5))
    table, start = run.charge.recipe.table, run.charge.trapped

    def line(state, chemistry):
        def pressure(v):
            n = np.tile(state.amounts, (len(v), 1))
            return gas.state(table, "SV", np.full(len(v), state.s[0]), v, n, chemistry).p

        return pressure

    v1, v2 = float(start.v[0]), float(run.compression.state.v[0])
    assert run.compression.work[0] == pytest.approx(work_along(line(start, "frozen"), v2, v1), rel=1e-10)
    burned, release = run.burn.state, run.release
    shifting = work_along(line(burned, "equilibrium"), float(burned.v[0]), float(release.v[0]))
    assert burned.u[0] - release.u[0] == pytest.approx(shifting, rel=1e-7)
    frozen = expand(gas, table, burned, release.v, "frozen")
    expected = work_along(line(burned, "frozen"), float(burned.v[0]), float(release.v[0]))
    assert burned.u[0] - frozen.u[0] == pytest.approx(expected, rel=1e-10)


def test_polytropic_compression_books_its_heat(gas, make):
    table = build(fuels.load("methane").vapour)
    amounts = np.tile(table.amounts({"O2": 0.21, "N2": 0.79}), (2, 1))
    start = gas.state(table, "TP", np.array([300.0, 350.0]), np.array([1e5, 3e5]), amounts)
    ratio = np.array([12.0, 16.0])
    for n in (1.0, 1.2, 1.35, 1.6):
        end = compress(gas, table, start, ratio, np.full(2, n))
        assert end.state.p == pytest.approx(start.p * ratio**n, rel=1e-14)
        assert end.state.v == pytest.approx(start.v / ratio, rel=1e-13)
        for i in range(2):
            v1 = float(start.v[i])
            work = work_along(lambda v, i=i, v1=v1, n=n: float(start.p[i]) * (v1 / v) ** n, v1 / ratio[i], v1)
            assert end.work[i] == pytest.approx(work, rel=1e-12)
        assert end.heat == pytest.approx(end.state.u - start.u - end.work, abs=1e-6)
        # heat goes in only above the isentropic exponent of this air, some 1.36 to 1.39 over the stroke
        assert ((end.heat > 0.0) == (n > 1.4)).all()
    free = compress(gas, table, start, ratio)
    assert np.array_equal(free.heat, np.zeros(2))
    assert free.state.s == pytest.approx(start.s, rel=1e-13)


def test_combustion_keeps_energy_and_never_loses_entropy(gas, make, solve):
    phi = np.array([0.05, 0.3, 0.7, 1.0, 1.3, 2.0])
    for fuel, admission in (("methane", "premixed"), ("methanol", "direct")):
        for mode in ("constant-volume", "constant-pressure", "pressure-limited"):
            run = solve(gas, *make(fuel, admission, mode, r=13.0, equivalence_ratio=phi, pressure_limit=75e5))
            assert (run.result.status == Status.OK).all()
            charge, mass = run.charge, 1.0 + run.charge.injected
            before = run.compression.state.u + charge.injected * charge.fuel_enthalpy
            after = mass * run.burn.state.u + run.burn.expansion_work * mass
            assert after == pytest.approx(before, abs=1e-9 * 1e6)
            if admission == "premixed":
                assert (run.burn.state.s > run.compression.state.s).all()


def test_the_burned_amount_at_the_limit_gives_the_limit(gas, make, solve):
    for fuel, admission in (("methane", "premixed"), ("n-dodecane", "direct")):
        run = solve(gas, *make(fuel, admission, "pressure-limited", r=14.0, equivalence_ratio=[0.4, 0.8], pressure_limit=65e5))
        charge = run.charge
        at, share = end_of_constant_volume(
            gas,
            charge.recipe.table,
            run.compression.state,
            reactants=charge.reactants(),
            injected=charge.injected,
            fuel_enthalpy=charge.fuel_enthalpy,
            pressure_limit=np.full(2, 65e5),
            limited=run.burn.limited,
            chemistry="equilibrium",
        )
        assert run.burn.limited.all()
        assert at.p == pytest.approx(np.full(2, 65e5), rel=1e-8)
        assert share[0] > share[1] > 0.0


def test_freezing_on_the_way_lies_between_frozen_and_equilibrium(gas, make, solve):
    recipe, settings = make("iso-octane", "premixed", r=9.0, equivalence_ratio=1.0)
    run = solve(gas, recipe, settings)
    table, burned, volume = recipe.table, run.burn.state, run.release.v
    frozen, shifting = (expand(gas, table, burned, volume, e) for e in ("frozen", "equilibrium"))
    previous = float(frozen.T[0])
    for T in (2700.0, 2400.0, 2100.0, 1950.0):
        between = expand(gas, table, burned, volume, "equilibrium", np.array([T]))
        assert previous < float(between.T[0]) < float(shifting.T[0])
        assert between.s[0] == pytest.approx(burned.s[0], rel=1e-10)
        previous = float(between.T[0])
    above = expand(gas, table, burned, volume, "equilibrium", np.array([3500.0]))
    assert above.T[0] == pytest.approx(frozen.T[0], rel=1e-10)
    below = expand(gas, table, burned, volume, "equilibrium", np.array([1000.0]))
    assert below.T[0] == shifting.T[0]


def test_the_frozen_composition_is_the_equilibrium_at_the_freeze_temperature(gas, make, solve):
    run = solve(gas, *make("iso-octane", "premixed", r=9.0, equivalence_ratio=1.0))
    table, burned = run.charge.recipe.table, run.burn.state
    n = freeze_composition(gas, table, burned, run.release, np.array([2300.0]))
    at = gas.state(table, "ST", burned.s, np.array([2300.0]), burned.amounts, "equilibrium")
    assert np.array_equal(n, at.amounts)
    assert np.array_equal(freeze_composition(gas, table, burned, run.release, np.array([5000.0])), burned.amounts)
    assert np.array_equal(freeze_composition(gas, table, burned, run.release, np.array([300.0])), run.release.amounts)


def test_gas_that_would_soot_is_frozen_from_where_it_begins(gas, make, solve):
    run = solve(gas, *make("iso-octane", "premixed", r=9.0, equivalence_ratio=[1.2, 2.6]))
    table, burned = run.charge.recipe.table, run.burn.state
    assert (run.result.status == Status.OK).all()
    pure = gas.state(table, "SV", burned.s, run.release.v, burned.amounts, "equilibrium")
    assert (carbon_activity(table, pure) > 1.0).tolist() == [False, True]
    assert run.release.T[0] == pytest.approx(pure.T[0], rel=1e-13)
    sooted = run.release
    assert sooted.s[1] == pytest.approx(burned.s[1], rel=1e-10)
    # its composition is one of the isentrope, at the temperature where the activity is just 1
    ratio = sooted.amounts[1, table.index("CO")] / sooted.amounts[1, table.index("CO2")]
    low, high = float(pure.T[1]), float(burned.T[1])
    for _ in range(40):
        T = 0.5 * (low + high)
        at = gas.state(table, "ST", burned.s[1:], np.array([T]), burned.amounts[1:], "equilibrium")
        low, high = (T, high) if carbon_activity(table, at)[0] > 1.0 else (low, T)
    assert at.amounts[0, table.index("CO")] / at.amounts[0, table.index("CO2")] == pytest.approx(ratio, rel=1e-4)


def test_complete_combustion_is_hotter_than_equilibrium_when_lean_or_stoichiometric(gas, make, solve):
    recipe, settings = make("methane", "premixed", r=10.0, equivalence_ratio=[0.4, 0.8, 1.0])
    complete, shifting = (solve(gas, recipe, settings, m).burn.state.T for m in ("fuel-air-complete", "fuel-air-equilibrium"))
    assert (complete > shifting).all()
    assert (np.diff(complete - shifting) > 0.0).all()


def test_replaced_rows_are_whole_states(gas, make):
    table = build(fuels.load("methane").vapour)
    n = np.tile(table.amounts({"O2": 1.0}), (2, 1))
    one, other = (gas.state(table, "TP", np.full(2, T), np.full(2, 1e5), n) for T in (500.0, 900.0))
    both = replaced(other, np.array([True, False]), lambda rows: rows_of(one, rows))
    assert both.T.tolist() == [500.0, 900.0]
    assert both.h.tolist() == [one.h[0], other.h[1]]
    assert both.status.dtype == np.int8
    assert other.T.tolist() == [900.0, 900.0]
    assert replaced(other, np.array([False, False]), lambda rows: pytest.fail("asked for no row")) is other


def test_burning_nothing_changes_nothing(gas):
    table = build(fuels.load("methane").vapour)
    n = table.amounts({"O2": 0.21, "N2": 0.79})[None]
    start = gas.state(table, "TP", np.array([800.0]), np.array([40e5]), n)
    nothing = np.zeros(1)
    for mode in ("constant-volume", "constant-pressure"):
        end = burn(
            gas,
            table,
            start,
            reactants=n,
            injected=nothing,
            fuel_enthalpy=nothing,
            heat_addition=mode,
            pressure_limit=np.full(1, np.nan),
            chemistry="complete",
        )
        assert end.state.T[0] == pytest.approx(800.0, rel=1e-12)
        assert end.volume_ratio[0] == pytest.approx(1.0, rel=1e-12)
