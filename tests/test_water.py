"""Liquid water added to the intake or into the cylinder: energy by hand, saturation, closure, exergy, case keys."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import fuelair
from fuelair import resources
from fuelair.air import water_saturation_pressure
from fuelair.charge import BurnedGas, compose, water_enthalpy
from fuelair.cycle import exergy
from fuelair.cycle.result import REAL_MODEL, REFERENCE_MODEL
from fuelair.errors import InputError
from fuelair.gas.cantera_gas import CanteraGas
from fuelair.gas.engine import Status, total, weighted
from fuelair.gas.polynomials import R
from fuelair.gas.real_engine import RealGas
from fuelair.gas.species import FUEL

M_WATER = 18.01528
LATENT = 44.004e6 / M_WATER  # CRC: -241.826 and -285.830 kJ/mol at 298.15 K
LIQUID_CP = 75.3e3 / M_WATER  # CRC
ENGINES = {REFERENCE_MODEL: CanteraGas(), REAL_MODEL: RealGas()}
INTAKE = {"pressure": 2e5, "temperature": 360.0, "r": 11.0, "from_intake": True, "equivalence_ratio": 0.5}
CYLINDER = {"pressure": 3e5, "temperature": 330.0, "r": 15.0, "residual": 0.03, "equivalence_ratio": 0.6}


def none_back(recipe):
    """No burned gas comes back."""
    n, table = len(recipe), recipe.table
    return BurnedGas(np.zeros((n, len(table))), np.zeros(n), np.zeros(n), np.zeros(n))


def intake(make, **given):
    return make("hydrogen", "premixed", **{**INTAKE, **given})[0]


def cylinder(make, ratio, fuel="n-dodecane", **given):
    recipe, settings = make(fuel, "direct", "constant-volume", **{**CYLINDER, "water_ratio": ratio, **given})
    return replace(recipe, water_at_combustion=True), settings


def enthalpy(engine, table, T, p, amounts):
    """Of a stream that need not weigh one kilogram [J]."""
    mass = total(amounts * table.molar_mass)
    return mass * engine.state(table, "TP", np.array([T]), np.array([p]), amounts / mass[:, None]).h


# --- intake -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("model", ENGINES)
@pytest.mark.parametrize("T_water", [285.0, 340.0])
def test_intake_water_cools_the_charge_by_its_heat(make, model, T_water):
    engine = ENGINES[model]
    recipe = intake(make, water_ratio=1.2, water_temperature=T_water)
    wet, dry = compose(recipe, engine, none_back(recipe)), compose(intake(make), engine, none_back(recipe))
    assert wet.status[0] == dry.status[0] == Status.OK
    table = recipe.table
    water = table.index("H2O")
    # by hand, per kg of dry charge: the dry charge as it is, vapour at 298.15 K less latent heat, liquid warmed
    kg = float(wet.water_added[0] / (1.0 - wet.water_added[0]))
    assert kg == pytest.approx(1.2 * float(dry.fuel_mass[0]), rel=1e-12)
    vapour = np.zeros((1, len(table)))
    vapour[0, water] = kg / table.molar_mass[water]
    low = float(enthalpy(CanteraGas(), table, 298.15, 1e3, vapour)[0])
    have = float(dry.trapped.h[0]) + low + kg * (LIQUID_CP * (T_water - 298.15) - LATENT)
    coldest, hottest = 250.0, 400.0
    for _ in range(60):
        T = 0.5 * (coldest + hottest)
        above = float(enthalpy(engine, table, T, 2e5, dry.trapped.amounts + vapour)[0]) > have
        coldest, hottest = (coldest, T) if above else (T, hottest)
    assert float(wet.trapped.T[0]) == pytest.approx(T, abs=1e-8)
    assert 30.0 < float(dry.trapped.T[0] - wet.trapped.T[0]) < 60.0


def test_warmer_water_cools_less_and_more_water_cools_more(make, gas):
    recipe = intake(make, water_ratio=np.array([0.0, 0.5, 1.0, 1.5]))
    T = compose(recipe, gas, none_back(recipe)).trapped.T
    assert (np.diff(T) < -5.0).all()
    warm = intake(make, water_ratio=1.0, water_temperature=350.0)
    assert compose(warm, gas, none_back(warm)).trapped.T[0] > T[2]


def test_no_water_is_no_water(make, gas):
    none, zero = intake(make), intake(make, water_ratio=0.0)
    a, b = (compose(r, gas, none_back(r)) for r in (replace(none, water_ratio=None, water_temperature=None), zero))
    assert np.array_equal(a.trapped.amounts, b.trapped.amounts)
    assert np.array_equal(a.trapped.T, b.trapped.T)
    assert b.water_added[0] == b.water_injected[0] == 0.0


def test_too_much_water_is_refused_and_its_neighbour_is_not(make, gas):
    recipe = intake(make, water_ratio=np.array([0.5, 6.0]))
    charge = compose(recipe, gas, none_back(recipe))
    assert charge.status.tolist() == [Status.OK, Status.VAPOUR_ABOVE_SATURATION]
    assert charge.water_saturation_ratio[0] < 1.0
    cold = intake(make, water_ratio=np.array([0.2, 0.8]), temperature=295.0)
    charge = compose(cold, gas, none_back(cold))
    assert charge.water_saturation_ratio[1] > 1.0
    assert charge.status[1] == Status.VAPOUR_ABOVE_SATURATION
    x = charge.trapped.mole_fractions()[:, cold.table.index("H2O")]
    expected = x * charge.trapped.p / water_saturation_pressure(charge.trapped.T)
    assert charge.water_saturation_ratio == pytest.approx(expected, rel=1e-12)


def test_added_water_is_not_drained_and_the_air_s_own_water_is(make, gas):
    """Water is added behind the cooler: what condenses there is the air's own."""
    humid = {"humidity": 0.03, "temperature": 300.0, "equivalence_ratio": 0.3}
    dry, wet = intake(make, **humid), intake(make, water_ratio=0.1, **humid)
    a, b = (compose(r, gas, none_back(r)) for r in (dry, wet))
    assert a.drained_water[0] > 0.01
    assert b.drained_water[0] == a.drained_water[0]
    assert b.receiver_dew_point[0] == a.receiver_dew_point[0]
    assert float(b.water_added[0] / b.fuel_mass[0]) == pytest.approx(0.1, rel=1e-12)
    assert float(a.water_in[0] / a.dry_air[0]) == pytest.approx(0.03 - float(a.drained_water[0]), rel=1e-12)
    # saturated air takes no more: evaporation cools it and the added water comes on top
    assert b.status[0] == Status.VAPOUR_ABOVE_SATURATION


# --- cylinder -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("model", ENGINES)
def test_cylinder_water_lowers_the_peak_by_a_balance_made_by_hand(make, solve, model):
    engine = ENGINES[model]
    given = {"residual": 0.0, "water_temperature": 320.0}
    wet, dry = (solve(engine, *cylinder(make, ratio, **given), model) for ratio in (0.8, 0.0))
    assert wet.result.status[0] == dry.result.status[0] == Status.OK
    assert np.array_equal(wet.compression.state.T, dry.compression.state.T)  # nothing has joined yet
    table, charge = dry.charge.recipe.table, dry.charge
    water, fuel = table.index("H2O"), table.index(FUEL)
    kg_fuel = float(charge.fuel_mass[0])
    kg_water = 0.8 * kg_fuel
    # hand-made: u2 + fuel as supplied + liquid water, in the volume of the end of compression
    vapour = np.zeros((1, len(table)))
    vapour[0, water] = 1.0 / table.molar_mass[water]
    standard = float(CanteraGas().state(table, "TP", np.array([298.15]), np.array([1e3]), vapour).h[0])
    liquid = standard - LATENT + LIQUID_CP * (320.0 - 298.15)
    mass = 1.0 + kg_fuel + kg_water
    u = (float(dry.compression.state.u[0]) + kg_fuel * float(charge.fuel_enthalpy[0]) + kg_water * liquid) / mass
    amounts = charge.trapped.amounts.copy()
    amounts[0, fuel] += kg_fuel / table.molar_mass[fuel]
    amounts[0, water] += kg_water / table.molar_mass[water]
    v = dry.compression.state.v / mass
    hand = engine.state(table, "UV", np.array([u]), v, amounts / mass, "equilibrium")
    assert float(wet.burn.state.T[0]) == pytest.approx(float(hand.T[0]), rel=1e-10)
    assert float(wet.burn.state.p[0]) == pytest.approx(float(hand.p[0]), rel=1e-10)
    assert 60.0 < float(dry.burn.state.T[0] - wet.burn.state.T[0]) < 200.0
    # rough, without chemistry: latent heat and the warming of kg_water over the heat capacity of the burned gas
    warming = 2.5e3 * (float(wet.burn.state.T[0]) - 298.15)
    rough = kg_water * (LATENT + warming - R / M_WATER * float(wet.burn.state.T[0])) / (mass * float(dry.burn.state.cp[0]))
    assert float(dry.burn.state.T[0] - wet.burn.state.T[0]) == pytest.approx(rough, rel=0.35)


@pytest.mark.parametrize("model", ENGINES)
@pytest.mark.parametrize("place", ["intake", "cylinder"])
def test_mass_elements_energy_and_exergy_close(make, solve, model, place):
    engine, ratios = ENGINES[model], np.array([0.0, 0.3, 1.0])
    if place == "cylinder":
        recipe, settings = cylinder(make, ratios, residual=None, exhaust_pressure=2.8e5)
    else:
        recipe, settings = make("hydrogen", "premixed", **{**INTAKE, "residual": None}, water_ratio=ratios)
    run = solve(engine, recipe, settings, model)
    assert (run.result.status == Status.OK).all()
    for key, residual in run.result.ledger.items():
        assert np.abs(residual).max() < 1e-9, key
    e = exergy.balance(run)
    assert (np.abs(e.destroyed_by_entropy - e.destroyed_by_balance) < 1e-9 * e.fuel).all()
    assert (e.destroyed_by_entropy > 0.0).all()
    charge, table = run.charge, run.charge.recipe.table
    assert charge.water_added == pytest.approx(ratios * charge.fuel_mass, rel=1e-12)
    assert charge.water_injected == pytest.approx(charge.water_added if place == "cylinder" else 0.0 * ratios, rel=1e-12)
    assert total(charge.reactants() * table.molar_mass) == pytest.approx(np.ones(3), rel=1e-14)
    assert (np.diff(run.result.figures["peak_temperature_K"]) < -10.0).all()
    # atoms by hand: what is trapped plus what joins
    joins = np.zeros_like(charge.trapped.amounts)
    joins[:, table.index(FUEL)] = charge.fuel_injected / table.molar_mass[table.index(FUEL)]
    joins[:, table.index("H2O")] += charge.water_injected / table.molar_mass[table.index("H2O")]
    have = weighted(run.release.amounts, table.atoms) * (1.0 + charge.injected)[:, None]
    want = weighted(charge.trapped.amounts + joins, table.atoms)
    assert np.abs(have - want).max() < 1e-13 * want.max()


@pytest.mark.parametrize("place", ["intake", "cylinder"])
def test_water_brings_no_oxygen_to_burn(make, trap, gas, place):
    """Its oxygen is bound: free oxygen over demand stays, per kg of dry air."""
    ratios = np.array([0.0, 0.4, 1.2])
    recipe, settings = (
        cylinder(make, ratios, residual=0.0)
        if place == "cylinder"
        else make("hydrogen", "premixed", **{**INTAKE, "residual": 0.0}, water_ratio=ratios)
    )
    charge = trap(gas, recipe, settings)
    share = charge.oxygen_excess_ratio()
    assert share == pytest.approx(np.full(3, share[0]), rel=1e-12)
    assert share[0] == pytest.approx(1.0 / recipe.equivalence_ratio[0], rel=1e-9)
    assert charge.oxygen_left() / charge.dry_air == pytest.approx(
        np.full(3, charge.oxygen_left()[0] / charge.dry_air[0]), rel=1e-12
    )


def test_water_of_the_cylinder_comes_back_with_the_residual(make, trap, gas):
    recipe, settings = cylinder(make, np.array([0.0, 1.0]), residual=0.2)
    charge = trap(gas, recipe, settings)
    x = charge.trapped.mole_fractions()[:, recipe.table.index("H2O")]
    assert x[1] > x[0] + 0.005


def test_exergy_of_liquid_water_is_that_of_saturated_vapour(make, solve, gas):
    """At 298.15 K 0.9 kJ/mol (Szargut, from memory), at any other temperature more."""
    run = solve(gas, *cylinder(make, 0.5, water_temperature=np.array([298.15, 280.0, 350.0])))
    value = exergy.water_exergy(run.charge) * M_WATER / 1e6
    assert value[0] == pytest.approx(0.9, abs=0.06)
    assert value[1] > value[0]
    assert value[2] > value[0]


# --- the liquid's enthalpy ----------------------------------------------------------------------------------------


def test_enthalpy_of_liquid_water_against_iapws_95(make):
    coolprop = pytest.importorskip("CoolProp.CoolProp")
    T = np.linspace(280.0, 360.0, 17)
    recipe = intake(make, water_ratio=1.0, water_temperature=T)
    table = recipe.table
    vapour = np.zeros((1, len(table)))
    vapour[0, table.index("H2O")] = 1.0 / table.molar_mass[table.index("H2O")]
    datum = CanteraGas().state(table, "TP", np.array([298.15]), np.array([1e3]), vapour).h[0]
    own = water_enthalpy(recipe) - datum  # below ideal-gas vapour of 298.15 K
    ideal = coolprop.PropsSI("H", "T", 298.15, "D", 1e-7, "HEOS::Water")
    reference = np.array([coolprop.PropsSI("H", "T", t, "P", 2e5, "HEOS::Water") for t in T]) - ideal
    assert np.abs(own - reference).max() < 1.1e3  # constant cp within 1 kJ/kg up to 353 K, latent heat within 0.5


# --- the case -----------------------------------------------------------------------------------------------------


def case(**changes):
    return fuelair.Case.read(resources.demos() / "methanol-ferry.toml").replace(changes)


@pytest.mark.parametrize(("key", "value"), [("water_admission", "intake"), ("water_temperature", "40 degC")])
def test_water_keys_need_an_amount(key, value):
    with pytest.raises(InputError) as caught:
        case(**{f"charge.{key}": value})
    assert f"charge.{key}" in str(caught.value)
    assert "water_fuel_ratio" in str(caught.value)


@pytest.mark.parametrize(
    ("key", "value"),
    [("water_fuel_ratio", -0.1), ("water_fuel_ratio", 3.1), ("water_temperature", "-5 degC"), ("water_temperature", "120 degC"),
     ("water_admission", "exhaust")],
)  # fmt: skip
def test_water_keys_have_limits(key, value):
    given = {"charge.water_fuel_ratio": 0.3, f"charge.{key}": value}
    with pytest.raises(InputError, match=key):
        case(**given)


def test_water_in_a_case_reaches_the_cycle():
    warm = {"charge.intake_temperature": "90 degC"}
    base = fuelair.assess(case())
    into = fuelair.assess(case(**{"charge.water_fuel_ratio": 0.3, "charge.water_admission": "cylinder"}))
    intake_default = fuelair.assess(case(**{"charge.water_fuel_ratio": 0.1}, **warm))
    for found in (into, intake_default):
        result = found.results[found.headline]
        assert result.status[0] == Status.OK
        assert max(abs(float(v[0])) for v in result.ledger.values()) < 1e-9
    assert into.charge.water_injected[0] == pytest.approx(0.3 * into.charge.fuel_mass[0], rel=1e-12)
    assert into.charge.recipe.liquid_water_temperature[0] == 298.15
    assert intake_default.charge.water_injected[0] == 0.0
    assert intake_default.charge.water_added[0] == pytest.approx(0.1 * intake_default.charge.fuel_mass[0], rel=1e-12)
    assert intake_default.charge.trapped.T[0] < fuelair.assess(case(**warm)).charge.trapped.T[0] - 10.0
    peak = [f.results[f.headline].figures["peak_temperature_K"][0] for f in (base, into)]
    assert peak[1] < peak[0] - 20.0


def test_every_model_carries_the_added_water():
    found = fuelair.assess(case(**{"charge.water_fuel_ratio": 0.3, "charge.water_admission": "cylinder"}))
    for model, result in found.results.items():
        if not model.startswith("fuel-air"):
            continue
        assert result.status[0] == Status.OK, model
        assert result.point("burned").mass[0] == pytest.approx(1.0 + found.charge.injected[0], rel=1e-14)
