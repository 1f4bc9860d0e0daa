"""The trapped charge against hand arithmetic: oxygen, carbon, water, masses, enthalpy, evaporation, saturation."""

from __future__ import annotations

import numpy as np
import pytest

from fuelair import air
from fuelair import fuel as fuels
from fuelair.air import DryAir
from fuelair.charge import BurnedGas, compose, enters_as_liquid, heating_value, held, supply_enthalpy
from fuelair.gas.complete import composition
from fuelair.gas.engine import Status, total, weighted
from fuelair.gas.mixture import mix
from fuelair.gas.species import FUEL

AIR = DryAir.from_ratio(3.76)  # 1 O2 + 3.76 N2: easy to follow by hand
M_O2, M_N2 = 31.998, 28.014  # Cantera's atomic weights


def nothing(recipe):
    """Burned gas of which none comes back."""
    n = len(recipe)
    return BurnedGas(np.zeros((n, len(recipe.table))), np.zeros(n), np.zeros(n), np.zeros(n))


def moles(state, table, name):
    return state.amounts[:, table.index(name)]


def pure(table, name, n=1):
    out = np.zeros((n, len(table)))
    out[:, table.index(name)] = 1.0 / table.molar_mass[table.index(name)]
    return out


def enthalpy(table, amounts, T):
    return mix(table, amounts).thermal(np.broadcast_to(np.asarray(T, float), (len(amounts),)))[1]


def test_stoichiometric_ratio_by_hand(make):
    # CH4 + 2 (O2 + 3.76 N2): (2 * 31.998 + 7.52 * 28.014) / 16.043
    recipe, _ = make("methane", air=AIR)
    assert recipe.stoichiometric_air_fuel_ratio == pytest.approx((2 * M_O2 + 7.52 * M_N2) / 16.043, rel=1e-5)
    for name in fuels.names():
        recipe, _ = make(name)
        expected = fuels.load(name).stoichiometric_air_fuel_ratio(
            oxygen_mole_fraction=recipe.air.O2, air_molar_mass=recipe.air.molar_mass
        )
        assert recipe.stoichiometric_air_fuel_ratio == pytest.approx(expected, rel=3e-5), name


@pytest.mark.parametrize("phi", [0.5, 1.0, 1.4])
def test_oxygen_and_carbon_without_anything_that_comes_back(gas, make, phi):
    recipe, _ = make("methane", equivalence_ratio=phi, air=AIR)
    charge = compose(recipe, gas, nothing(recipe))
    table, n = recipe.table, charge.reactants()
    # phi CH4 + 2 O2 + 7.52 N2
    assert n[0, table.index(FUEL)] / n[0, table.index("O2")] == pytest.approx(phi / 2.0, rel=1e-12)
    assert charge.trapped_oxygen()[0] == pytest.approx(2.0 / (phi + 9.52), rel=1e-12)
    assert charge.oxygen_excess_ratio()[0] == pytest.approx(1.0 / phi, rel=1e-12)
    mass = phi * 16.043 + 2 * M_O2 + 7.52 * M_N2
    assert charge.fuel_mass[0] == pytest.approx(phi * 16.043 / mass, rel=1e-5)
    assert charge.dry_air[0] == pytest.approx(1.0 - charge.fuel_mass[0], rel=1e-14)
    # oxygen atoms beyond those of complete combustion: 4 - 4 phi
    assert charge.oxygen_left()[0] * mass == pytest.approx(4.0 - 4.0 * phi, rel=1e-4, abs=1e-9)


def test_phi_0_60_fresh_is_0_547_on_all_oxygen_with_20_percent_recirculated(gas, make, trap):
    """Hand arithmetic, lean: recirculated gas of phi 0.6 brings 40 % of the oxygen of the air it was.

    CH1.8, air 1 O2 + 3.76 N2, per mole of CH1.8: demand 1.45 O2; fresh air 1.45/0.6 O2. The recirculated mass is a
    quarter of the fresh humid air; per kg of burned gas the oxygen is 0.4 of that in its air.
    """
    recipe, settings = make("n-dodecane", "direct", "constant-volume", r=15.0, equivalence_ratio=0.6, egr_fraction=0.2, air=AIR)
    charge = trap(gas, recipe, settings, "fuel-air-complete")
    assert charge.status[0] == Status.OK
    assert charge.recirculated[0] == pytest.approx(0.2, rel=1e-12)
    fuel_air_ratio = 0.6 / recipe.stoichiometric_air_fuel_ratio
    # burned gas that leaves comes from 1 kg air, x kg recirculated gas and the fuel; its free oxygen c per kg satisfies
    # c (1 + f + e) = o (1 - 0.6) + e c, with e = 0.25 kg and o = 1 kg air's oxygen
    c = 0.4 / (1.0 + fuel_air_ratio)
    excess = (1.0 + 0.25 * c) / 0.6
    assert charge.oxygen_excess_ratio()[0] == pytest.approx(excess, rel=1e-10)
    assert 1.0 / charge.oxygen_excess_ratio()[0] == pytest.approx(0.547, abs=5e-4)


@pytest.mark.parametrize("phi", [0.6, 1.0, 1.3])
def test_carbon_and_oxygen_of_recirculated_gas(gas, make, solve, phi):
    recipe, settings = make("methane", "premixed", r=10.0, equivalence_ratio=phi, egr_fraction=0.2, residual=0.05, air=AIR)
    run = solve(gas, recipe, settings)
    charge, table = run.charge, recipe.table
    assert run.result.status[0] == Status.OK
    # in a steady state what leaves has the elements of what comes fresh, and so has what stays
    fresh = table.amounts({"O2": 2.0, "N2": 7.52, FUEL: phi})
    for amounts in (charge.trapped.amounts, charge.reactants(), run.exhaust.leaving.amounts, charge.residual_amounts):
        assert weighted(amounts, table.atoms)[0] == pytest.approx(weighted(fresh[None], table.atoms)[0], rel=1e-10)
    carbon = weighted(run.exhaust.leaving.amounts, table.atoms)[0, 0]
    assert carbon == pytest.approx(phi / (phi * 16.043 + 2 * M_O2 + 7.52 * M_N2), rel=1e-5)
    assert charge.residual_fraction[0] == 0.05
    # 20 % of the air and recirculated gas together, both without fuel, of the 95 % that is not residual
    assert charge.recirculated[0] / (charge.recirculated[0] + charge.dry_air[0]) == pytest.approx(0.2, rel=1e-12)
    whole = charge.recirculated + charge.dry_air + charge.water_in + charge.fuel_mass + charge.residual_fraction
    assert whole[0] == pytest.approx(1.0, rel=1e-13)
    assert total(charge.trapped.amounts * table.molar_mass)[0] == pytest.approx(1.0, rel=1e-13)
    if phi < 1.0:
        # free oxygen after dissociation has frozen, counted as atoms: 4 - 4 phi per 2 O2
        free = charge.oxygen_left()[0]
        assert free * (phi * 16.043 + 2 * M_O2 + 7.52 * M_N2) == pytest.approx(4.0 - 4.0 * phi, rel=1e-4)


def test_combustion_efficiency_leaves_fuel_as_inert_vapour(gas, make):
    recipe, _ = make("methane", equivalence_ratio=0.8, combustion_efficiency=0.9, air=AIR)
    charge = compose(recipe, gas, nothing(recipe))
    n, table = charge.reactants(), recipe.table
    assert n[0, table.index("unburned-fuel")] / n[0, table.index(FUEL)] == pytest.approx(1.0 / 9.0, rel=1e-12)
    assert charge.heat_added[0] == pytest.approx(0.9 * charge.fuel_mass[0] * charge.lower_heating_value[0], rel=1e-14)
    assert charge.oxygen_excess_ratio()[0] == pytest.approx(1.25, rel=1e-12)  # over what all of the fuel would take
    assert charge.trapped.amounts[0, table.index("unburned-fuel")] == 0.0


@pytest.mark.parametrize("admission", ["premixed", "direct"])
def test_unburned_fuel_that_comes_back_stays_unburned(gas, make, trap, admission):
    recipe, settings = make("methane", admission, r=10.0, equivalence_ratio=0.8, combustion_efficiency=0.9, residual=0.2, air=AIR)
    charge = trap(gas, recipe, settings)
    n, rest = charge.reactants(), recipe.table.index("unburned-fuel")
    # of each kg that is present at combustion the same share is unburned as of what leaves: 10 % of all carbon
    carbon = weighted(n, recipe.table.atoms)[0, 0]
    assert n[0, rest] / carbon == pytest.approx(0.1, rel=1e-9)


def test_water_that_cannot_stay_vapour_is_drained_and_balances(gas, make):
    humidity = 0.035
    recipe, _ = make(
        "n-dodecane", "direct", equivalence_ratio=0.5, humidity=humidity, pressure=4e5, temperature=318.15, from_intake=True
    )
    charge = compose(recipe, gas, nothing(recipe))
    saturation = float(air.water_saturation_pressure(318.15))
    table = recipe.table
    ratio = table.molar_mass[table.index("H2O")] / (
        1.0 / total(table.amounts({k: v for k, v in recipe.air.composition().items() if v})[None])[0]
    )
    left = ratio * saturation / (4e5 - saturation)
    assert charge.drained_water[0] == pytest.approx(humidity - left, rel=1e-10)
    assert charge.water_in[0] / charge.dry_air[0] == pytest.approx(left, rel=1e-10)
    assert charge.receiver_dew_point[0] == pytest.approx(318.15, abs=1e-6)
    warm, _ = make(
        "n-dodecane", "direct", equivalence_ratio=0.5, humidity=humidity, pressure=1e5, temperature=330.0, from_intake=True
    )
    kept = compose(warm, gas, nothing(warm))
    assert kept.drained_water[0] == 0.0
    assert kept.water_in[0] / kept.dry_air[0] == pytest.approx(humidity, rel=1e-12)
    assert kept.receiver_dew_point[0] < 330.0


def test_gas_holds_water_up_to_saturation():
    water, others, pressure = np.array([0.2, 0.01, 1.0]), np.array([0.8, 0.99, 0.0]), np.full(3, 1e5)
    kept = held(water, others, np.array([320.0, 320.0, 380.0]), pressure)
    assert kept[0] / (0.8 + kept[0]) * 1e5 == pytest.approx(float(air.water_saturation_pressure(320.0)), rel=1e-12)
    assert kept[1:].tolist() == [0.01, 1.0]


def test_recirculated_water_condenses_in_the_cooler(gas, make, trap):
    common = {"equivalence_ratio": 0.9, "egr_fraction": 0.3, "pressure": 4e5, "temperature": 360.0, "from_intake": True}
    cooled = trap(gas, *make("methane", "direct", r=12.0, egr_temperature=315.0, **common))
    hot = trap(gas, *make("methane", "direct", r=12.0, egr_temperature=400.0, **common))
    assert cooled.drained_water[0] > 0.01
    assert hot.drained_water[0] == 0.0
    assert cooled.status[0] == hot.status[0] == Status.OK
    # a mixture of air at 360 K with recirculated gas at 400 K lies between
    assert 360.0 < hot.trapped.T[0] < 400.0


def test_hot_recirculated_gas_is_not_drained_at_the_temperature_of_the_air(gas, make, trap):
    """Air at 300 K with a third of gas at 500 K mixes to 360 K or so, where its vapour can stay."""
    charge = trap(
        gas,
        *make(
            "methane",
            "direct",
            r=12.0,
            egr_temperature=500.0,
            equivalence_ratio=0.95,
            egr_fraction=0.35,
            pressure=1.5e5,
            temperature=300.0,
            from_intake=True,
        ),
    )
    T = float(charge.trapped.T[0])
    x = charge.trapped.mole_fractions()[0, charge.recipe.table.index("H2O")]
    could = float(air.water_saturation_pressure(T)) / float(charge.trapped.p[0])
    assert T > 350.0
    assert charge.drained_water[0] == 0.0 or x == pytest.approx(could, rel=1e-6)


def test_enthalpy_of_intake_and_residual_by_hand(gas, make):
    recipe, _ = make(
        "methane",
        "premixed",
        equivalence_ratio=0.9,
        pressure=0.5e5,
        exhaust_pressure=1.1e5,
        temperature=310.0,
        fuel_temperature=310.0,
        from_intake=True,
        air=AIR,
    )
    table = recipe.table
    burned, _ = composition(table, table.amounts({"O2": 2.0, "N2": 7.52, FUEL: 0.9})[None], np.array([1740.0]))
    residual = gas.state(table, "TP", np.array([1000.0]), np.array([1.1e5]), burned)
    x = 0.12
    charge = compose(recipe, gas, BurnedGas(burned, np.array([x]), residual.h, residual.v))
    fresh = table.amounts({"O2": 2.0, "N2": 7.52, FUEL: 0.9})[None]
    h = (1.0 - x) * enthalpy(table, fresh, 310.0) + x * (residual.h + residual.v * (0.5e5 - 1.1e5))
    assert charge.trapped.h[0] == pytest.approx(float(h[0]), rel=1e-12)
    assert charge.trapped.p[0] == 0.5e5
    assert charge.trapped.amounts[0] == pytest.approx(((1.0 - x) * fresh + x * burned)[0], rel=1e-12, abs=1e-18)
    assert charge.residual_fraction[0] == x
    assert charge.fuel_mass[0] == pytest.approx(
        (1.0 - x) * float(fresh[0, table.index(FUEL)] * table.molar_mass[table.index(FUEL)]), rel=1e-12
    )


@pytest.mark.parametrize("share", [0.0, 0.4, 1.0])
def test_the_charge_gives_its_share_of_the_latent_heat(gas, make, share):
    recipe, _ = make(
        "ethanol",
        "port-liquid",
        equivalence_ratio=0.6,
        temperature=360.0,
        from_intake=True,
        evaporated_by_gas=share,
        fuel_temperature=298.15,
    )
    charge = compose(recipe, gas, nothing(recipe))
    table, fuel = recipe.table, recipe.fuel
    assert charge.status[0] == Status.OK
    m = float(charge.fuel_mass[0])
    before = (1.0 - m) * float(enthalpy(table, table.amounts(recipe.air.composition())[None], 360.0)[0])
    vapour = float(enthalpy(table, pure(table, FUEL), 298.15)[0])
    assert charge.trapped.h[0] == pytest.approx(before + m * (vapour - share * fuel.latent_heat), rel=1e-11)
    assert charge.wall_heat[0] == pytest.approx((1.0 - share) * m * fuel.latent_heat, rel=1e-12, abs=1e-9)


def test_more_evaporation_by_the_gas_is_colder(gas, make):
    recipe, _ = make(
        "ethanol", "port-liquid", equivalence_ratio=0.6, temperature=360.0, from_intake=True, evaporated_by_gas=[0.0, 0.5, 1.0]
    )
    T = compose(recipe, gas, nothing(recipe)).trapped.T
    assert (np.diff(T) < -10.0).all()


def test_methanol_at_phi_1_cannot_all_evaporate_from_a_receiver_at_340_k(gas, make):
    recipe, _ = make("methanol", "port-liquid", equivalence_ratio=[1.0, 0.1], temperature=340.0, from_intake=True)
    charge = compose(recipe, gas, nothing(recipe))
    assert charge.status.tolist() == [Status.VAPOUR_ABOVE_SATURATION, Status.OK]
    assert charge.saturation_ratio[0] > 1.0 > charge.saturation_ratio[1] > 0.0
    x = charge.trapped.mole_fractions()[0, recipe.table.index(FUEL)]
    limit = recipe.fuel.saturation_pressure(float(charge.trapped.T[0]))
    assert charge.saturation_ratio[0] == pytest.approx(float(x) * 101325.0 / limit, rel=1e-12)
    direct, _ = make("methanol", "direct", equivalence_ratio=1.0, temperature=340.0, from_intake=True)
    assert compose(direct, gas, nothing(direct)).status[0] == Status.OK


def test_a_charge_too_cold_to_be_a_gas_at_all_names_its_vapour(gas, make):
    recipe, _ = make("methanol", "port-liquid", equivalence_ratio=2.5, temperature=375.0, pressure=0.335e5, from_intake=True)
    charge = compose(recipe, gas, nothing(recipe))
    assert Status(int(charge.status[0])) is Status.VAPOUR_ABOVE_SATURATION


@pytest.mark.parametrize("name", fuels.names())
def test_complete_combustion_at_298_k_releases_the_heating_value_of_the_phase_supplied(gas, make, name):
    fuel = fuels.load(name)
    for admission in ("premixed", "direct"):
        recipe, _ = make(name, admission, equivalence_ratio=0.7, temperature=298.15, pressure=101325.0)
        table = recipe.table
        liquid = admission == "direct" and fuel.phase(298.15, 101325.0) == "liquid"
        assert enters_as_liquid(recipe)[0] == liquid
        expected = fuel.lower_heating_value_liquid if liquid else fuel.lower_heating_value_vapour
        assert heating_value(recipe)[0] == expected
        # 298.15 K and 101 325 Pa; n-butane and the like are gases there
        oxygen = table.amounts({"O2": 1.0})
        before = pure(table, FUEL) + 30.0 * oxygen[None]
        after, _ = composition(table, before, np.array([298.15]))
        released = supply_enthalpy(recipe) + 30.0 * enthalpy(table, oxygen[None], 298.15) - enthalpy(table, after, 298.15)
        assert released[0] == pytest.approx(expected, rel=2e-11), admission


def test_supplied_liquid_carries_temperature_and_pressure(make):
    fuel = fuels.load("n-dodecane")
    recipe, _ = make("n-dodecane", "direct", fuel_temperature=[298.15, 350.0, 298.15], fuel_pressure=[101325.0, 101325.0, 1000e5])
    h = supply_enthalpy(recipe)
    assert h[1] - h[0] == pytest.approx(fuel.liquid_cp * 51.85, rel=1e-12)
    push = fuel.liquid_volume * (1.0 - fuel.expansivity * 298.15) * (1000e5 - 101325.0)
    if fuel.pressure_terms is None:
        assert h[2] - h[0] == pytest.approx(push, rel=1e-12)
    assert h[2] - h[0] == pytest.approx(push, rel=0.15)
    assert 50e3 < h[2] - h[0] < 150e3


def test_premixed_fuel_brings_the_temperature_at_which_it_is_supplied(gas, make):
    """``fuel_temperature`` is the fuel's own, at the mixer; the air's is the receiver's."""
    recipe, _ = make(
        "hydrogen", "premixed", equivalence_ratio=1.0, temperature=320.0, from_intake=True, fuel_temperature=[250.0, 320.0]
    )
    T = compose(recipe, gas, nothing(recipe)).trapped.T
    assert T[0] < T[1] - 1.0


def test_more_residual_than_charge_is_a_status(gas, make):
    recipe, _ = make("methane", equivalence_ratio=[0.8, 0.8], from_intake=True, exhaust_pressure=5e5)
    burned = BurnedGas(
        np.tile(recipe.table.amounts({"N2": 0.8, "CO2": 0.2}), (2, 1)), np.array([1.2, 0.1]), np.full(2, 1e6), np.full(2, 1.0)
    )
    charge = compose(recipe, gas, burned)
    assert charge.status[0] == Status.NO_FRESH_CHARGE
    assert charge.status[1] == Status.OK
