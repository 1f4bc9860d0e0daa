"""Air-standard companions: closed forms of the cold cycle, an independent integral for the one with variable cp."""

from __future__ import annotations

import numpy as np
import pytest

from fuelair.air import dry_air
from fuelair.cycle.air_standard import ColdAir, run, variable_air
from fuelair.cycle.geometry import Volumes
from fuelair.gas.engine import Status
from fuelair.gas.species import build

COLD = ColdAir()
CV, CP = 287.05 / 0.4, 287.05 * 1.4 / 0.4


def figure(result, key, i=0):
    assert result.status[i] == Status.OK, Status(int(result.status[i])).label
    return float(result.figures[key][i])


@pytest.fixture
def charge(gas, make, trap):
    """A charge and its settings; the air cycle takes its state, ratio and heat."""

    def built(heat_addition="constant-volume", fuel="iso-octane", admission="premixed", **more):
        recipe, settings = make(fuel, admission, heat_addition, **({"equivalence_ratio": 0.6} | more))
        return trap(gas, recipe, settings), settings

    return built


@pytest.mark.parametrize("r", [5.0, 12.0, 25.0])
def test_otto(charge, r):
    c, settings = charge(r=r)
    result = run("air-cold", COLD, c, settings)
    assert figure(result, "indicated_efficiency") == pytest.approx(1.0 - r**-0.4, rel=1e-12)
    q = float(c.fuel_mass[0]) * 44.652e6
    assert figure(result, "heat_added_J_per_kg") == pytest.approx(q, rel=1e-3)  # 44.652 MJ/kg: the vapour's
    assert figure(result, "peak_temperature_K") == pytest.approx(350.0 * r**0.4 + float(c.heat_added[0]) / CV, rel=1e-13)
    assert figure(result, "peak_pressure_Pa") == pytest.approx(
        101325.0 * r * figure(result, "peak_temperature_K") / 350.0, rel=1e-12
    )
    assert figure(result, "release_temperature_K") == pytest.approx(figure(result, "peak_temperature_K") * r**-0.4, rel=1e-12)


def test_diesel(charge):
    r = 18.0
    c, settings = charge("constant-pressure", "n-dodecane", "direct", r=r)
    result = run("air-cold", COLD, c, settings)
    b = figure(result, "cutoff_ratio")
    assert b == pytest.approx(1.0 + float(c.heat_added[0]) / (CP * 350.0 * r**0.4), rel=1e-12)
    assert figure(result, "indicated_efficiency") == pytest.approx(1.0 - r**-0.4 * (b**1.4 - 1.0) / (1.4 * (b - 1.0)), rel=1e-12)


def test_dual(charge):
    r, a = 14.0, 1.5
    limit = a * 101325.0 * r**1.4
    c, settings = charge("pressure-limited", "n-dodecane", "direct", r=r, pressure_limit=limit)
    result = run("air-cold", COLD, c, settings)
    b = figure(result, "cutoff_ratio")
    expected = 1.0 - r**-0.4 * (a * b**1.4 - 1.0) / ((a - 1.0) + 1.4 * a * (b - 1.0))
    assert figure(result, "indicated_efficiency") == pytest.approx(expected, rel=1e-12)
    assert result.flags["limited"][0]
    assert result.point("limit").state.T[0] == pytest.approx(a * 350.0 * r**0.4, rel=1e-12)
    assert figure(result, "peak_pressure_Pa") == limit


@pytest.mark.parametrize("k", [1.3, 5.0 / 3.0])
def test_k_and_r_are_inputs(charge, k):
    c, settings = charge(r=9.0)
    result = run("air-cold", ColdAir(k=k, gas_constant=300.0), c, settings)
    assert figure(result, "indicated_efficiency") == pytest.approx(1.0 - 9.0 ** (1.0 - k), rel=1e-12)
    assert result.point("trapped").state.v[0] == pytest.approx(300.0 * 350.0 / 101325.0, rel=1e-14)


def test_every_pair_of_the_cold_air_leads_back():
    start = COLD("TP", np.array([300.0, 2500.0]), np.array([1e5, 80e5]))
    letters = {"T": start.T, "P": start.p, "H": start.h, "U": start.u, "S": start.s, "V": start.v}
    for pair in ("TP", "TV", "HP", "UV", "SP", "SV"):
        back = COLD(pair, letters[pair[0]], letters[pair[1]])
        assert pytest.approx(start.T, rel=1e-13) == back.T
        assert back.p == pytest.approx(start.p, rel=1e-13)
        assert back.s == pytest.approx(start.s, rel=1e-12)
    assert start.sound == pytest.approx(np.sqrt(1.4 * 287.05 * start.T), rel=1e-14)
    assert COLD("UV", np.array([-1.0]), np.array([1.0])).status[0] == Status.NO_SOLUTION
    with pytest.raises(ValueError, match="pair ST is not offered"):
        COLD("ST", start.s, start.T)


@pytest.fixture(scope="module")
def integrals(bundled_species):
    """cp of dry air from Cantera's own phase, and its integrals by Gauss quadrature, split at the break of the data."""
    ct = pytest.importorskip("cantera")
    x = {k: v for k, v in dry_air().composition().items() if v > 0.0}
    phase = ct.Solution(thermo="ideal-gas", species=[s for s in bundled_species.values() if s.name in x])
    phase.TPX = 300.0, 1e5, x
    gas_constant = ct.gas_constant / phase.mean_molecular_weight
    nodes, weights = np.polynomial.legendre.leggauss(12)

    def integral(function, low, high):
        if low < 1000.0 < high:
            return integral(function, low, 1000.0) + integral(function, 1000.0, high)
        T = 0.5 * (high - low) * nodes + 0.5 * (high + low)
        return float(np.sum(weights * np.array([function(t) for t in T])) * 0.5 * (high - low))

    def cp(T):
        phase.TP = T, 1e5
        return phase.cp_mass

    return gas_constant, cp, integral


def solve_for(function, low, high):
    for _ in range(100):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if function(middle) < 0.0 else (low, middle)
    return 0.5 * (low + high)


def test_variable_air_against_an_independent_quadrature(gas, charge, integrals):
    r, (gas_constant, cp, integral) = 10.0, integrals
    c, settings = charge(r=r)
    result = run("air-variable", variable_air(gas, dry_air()), c, settings)

    def entropy(low, high):
        return integral(lambda t: (cp(t) - gas_constant) / t, low, high)

    T2 = solve_for(lambda t: entropy(350.0, t) - gas_constant * np.log(r), 400.0, 1500.0)
    q = float(c.heat_added[0])
    T3 = solve_for(lambda t: integral(lambda s: cp(s) - gas_constant, T2, t) - q, T2, 5000.0)
    T4 = solve_for(lambda t: gas_constant * np.log(r) - entropy(t, T3), 400.0, T3)
    assert figure(result, "compression_temperature_K") == pytest.approx(T2, rel=1e-9)
    assert figure(result, "peak_temperature_K") == pytest.approx(T3, rel=1e-9)
    assert figure(result, "release_temperature_K") == pytest.approx(T4, rel=1e-9)
    lost = integral(lambda s: cp(s) - gas_constant, 350.0, T4)
    assert figure(result, "indicated_efficiency") == pytest.approx(1.0 - lost / q, rel=1e-9)


def test_variable_air_meets_relative_pressure_tables(gas):
    # Keenan and Kaye air table as reprinted in textbooks (from memory): pr 1.3860 at 300 K, 114.0 at 1000 K
    table = build()
    n = table.amounts({k: v for k, v in dry_air(1976).composition().items() if v})[None]
    s = [gas.state(table, "TP", np.array([T]), np.array([1e5]), n).s[0] for T in (300.0, 1000.0)]
    r = float(8314.46261815324 * n.sum())
    assert np.exp((s[1] - s[0]) / r) == pytest.approx(114.0 / 1.3860, rel=2e-3)


def test_the_air_cycles_take_state_ratio_and_heat_of_the_charge(gas, charge):
    volumes = Volumes(*(np.array([x]) for x in (0.1, 1.02, 0.95, 0.1)))
    c, settings = charge(volumes=volumes, residual=0.06, pressure=1.4e5, exhaust_pressure=1.2e5)
    for state in (COLD, variable_air(gas, dry_air())):
        result = run("air", state, c, settings)
        assert result.point("trapped").state.T[0] == c.trapped.T[0]
        assert result.point("trapped").state.p[0] == c.trapped.p[0]
        assert figure(result, "heat_added_J_per_kg") == c.heat_added[0]
        assert result.point("compressed").state.v[0] * 10.2 == pytest.approx(result.point("trapped").state.v[0], rel=1e-12)
        assert result.point("release").state.v[0] * 1.02 == pytest.approx(result.point("trapped").state.v[0] * 0.95, rel=1e-12)
        assert figure(result, "residual_fraction") == 0.06
        assert max(abs(float(v[0])) for v in result.ledger.values()) < 1e-13


def test_the_same_cut_off_ratio_instead_of_the_same_heat(gas, charge):
    r = 16.0
    for mode, limit in (("constant-pressure", np.nan), ("pressure-limited", 90e5)):
        c, settings = charge(mode, "n-dodecane", "direct", r=r, pressure_limit=limit)
        result = run("air-cold", COLD, c, settings, cutoff_ratio=np.array([2.2]))
        assert figure(result, "cutoff_ratio") == pytest.approx(2.2, rel=1e-14)
        a = 1.0 if mode == "constant-pressure" else 90e5 / (101325.0 * r**1.4)
        expected = 1.0 - r**-0.4 * (a * 2.2**1.4 - 1.0) / ((a - 1.0) + 1.4 * a * 1.2)
        assert figure(result, "indicated_efficiency") == pytest.approx(expected, rel=1e-12)  # over its own heat
        heat = CV * (a - 1.0) * 350.0 * r**0.4 + CP * a * 350.0 * r**0.4 * 1.2
        assert figure(result, "heat_added_J_per_kg") == pytest.approx(heat, rel=1e-12)


def test_a_limit_below_its_own_compression_pressure_is_the_air_s_own_status(gas, charge):
    """At r = 16 constant k compresses to a higher pressure than cp of air that rises."""
    c, settings = charge("pressure-limited", "n-dodecane", "direct", r=16.0, pressure_limit=48e5)
    cold = run("air-cold", COLD, c, settings)
    variable = run("air-variable", variable_air(gas, dry_air()), c, settings)
    assert Status(int(cold.status[0])) is Status.LIMIT_BELOW_COMPRESSION
    assert Status(int(variable.status[0])) is Status.OK


def test_polytropic_compression(charge):
    c, settings = charge(r=12.0, exponent=1.3)
    result = run("air-cold", COLD, c, settings)
    assert figure(result, "compression_temperature_K") == pytest.approx(350.0 * 12.0**0.3, rel=1e-13)
    assert abs(float(result.ledger["energy_closed_part"][0])) < 1e-13


def test_blowdown_by_hand(charge):
    """Perfect gas: what leaves has the enthalpy of h_e = u4 + p_e v4, the residual mass aside."""
    c, settings = charge(r=10.0, exhaust_pressure=1.5e5)
    result = run("air-cold", COLD, c, settings)
    T4, p4 = figure(result, "release_temperature_K"), figure(result, "release_pressure_Pa")
    v4 = 287.05 * T4 / p4
    assert figure(result, "exhaust_temperature_K") == pytest.approx((CV * T4 + 1.5e5 * v4) / CP, rel=1e-12)
    T6 = T4 * (1.5e5 / p4) ** (0.4 / 1.4)
    assert figure(result, "blowdown_temperature_K") == pytest.approx(T6, rel=1e-12)
    available = CV * (T4 - T6) - 1.5e5 * (287.05 * T6 / 1.5e5 - v4)
    assert figure(result, "blowdown_energy_J_per_kg") == pytest.approx(available, rel=1e-11)


def test_what_leaves_the_data_after_release_is_said(gas, charge):
    """Cold lean air expanded against a vacuum: the gas that stays is below 200 K."""
    c, settings = charge(equivalence_ratio=0.05, temperature=250.0, fuel="methane", pressure=1e5, exhaust_pressure=0.05e5, r=10.0)
    result = run("air-variable", variable_air(gas, dry_air()), c, settings)
    stays = result.point("blown-down").state
    assert stays.status[0] == Status.OUTSIDE_DATA
    assert result.status[0] == Status.OUTSIDE_DATA
