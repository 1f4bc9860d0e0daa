"""Exergy: the fuel's against published values, destruction computed twice, a balance that adds up."""

from __future__ import annotations

import numpy as np
import pytest

import fuelair
from fuelair import fuel as fuels
from fuelair import resources
from fuelair.cycle import exergy
from fuelair.cycle.geometry import Volumes
from fuelair.gas.engine import Status, weighted
from fuelair.gas.species import FUEL, build

# Standard chemical exergy [kJ/mol]: methane 831.2 (Szargut 2007; 831.65 in 1988), hydrogen 236.09, carbon monoxide 274.71,
# methanol vapour 722.3, ammonia 337.9 (Szargut 1989, from memory)
SZARGUT = {"methane": 831.65, "hydrogen": 236.09, "methanol": 722.3, "ammonia": 337.9}


@pytest.mark.parametrize("name", SZARGUT)
def test_standard_chemical_exergy_of_the_vapour(name):
    table = build(fuels.load(name).vapour)
    molar = exergy.standard_vapour_exergy(table) * table.molar_mass[table.index(FUEL)] / 1e6
    assert molar == pytest.approx(SZARGUT[name], rel=2e-3)


def test_the_reference_gases_have_the_exergy_of_their_own_dilution():
    table = build()
    potential = exergy.element_potentials(table)
    # R T0 ln(p0 / p00): O2 3.97, CO2 19.87 (Szargut, from memory), at 298.15 K
    for name, pressure in exergy.REFERENCE_PRESSURES.items():
        n = np.zeros((1, len(table)))
        n[0, table.index(name)] = 1.0
        from fuelair.gas.mixture import gibbs

        g = (
            8314.46261815324
            * 298.15
            * (gibbs(table, np.array([298.15]))[0, table.index(name)] + np.log(101325.0 / table.reference_pressure))
        )
        own = g - float(weighted(n, table.atoms)[0] @ potential)
        assert own == pytest.approx(8314.46261815324 * 298.15 * np.log(101325.0 / pressure), abs=1.0)


def test_dead_air_is_worth_nothing(gas):
    table = build()
    x = dict(exergy.REFERENCE_PRESSURES)
    whole = sum(x.values())
    state = gas.state(table, "TP", np.array([298.15]), np.array([whole]), table.amounts(x)[None])
    assert exergy.flow(table, state)[0] == pytest.approx(0.0, abs=1.0)  # of some 8e5 J/kg in h and T0 s
    warm = gas.state(table, "TP", np.array([400.0]), np.array([whole]), table.amounts(x)[None])
    assert exergy.flow(table, warm)[0] > 10e3


def test_styrylo_ratio_of_a_gas_oil():
    # beta = 1.0401 + 0.1728 H/C + ... : 1.0401 + 0.1728 * 0.1575 for a hydrocarbon with 13.6 % hydrogen
    fuel = fuels.load("renewable-diesel")
    ratio = fuel.mass_ratio("H")
    assert exergy.styrylo_ratio(fuel) == pytest.approx(1.0401 + 0.1728 * ratio, rel=1e-12)
    assert 1.06 < exergy.styrylo_ratio(fuels.load("diesel")) < 1.08


@pytest.mark.parametrize(
    ("fuel", "admission", "mode"),
    [
        ("methane", "premixed", "constant-volume"),
        ("hydrogen", "direct", "pressure-limited"),
        ("methanol", "direct", "constant-pressure"),
        ("methanol", "port-liquid", "constant-volume"),
        ("renewable-diesel", "direct", "pressure-limited"),
        ("gasoline", "early-direct", "constant-volume"),
    ],
)
def test_destruction_computed_twice_agrees_and_is_positive(gas, make, solve, fuel, admission, mode):
    run = solve(
        gas,
        *make(
            fuel,
            admission,
            mode,
            r=13.0,
            equivalence_ratio=[0.1, 0.4, 0.9, 1.2],
            temperature=400.0,
            pressure_limit=70e5,
            fuel_pressure=300e5,
            combustion_efficiency=0.97,
        ),
    )
    assert (run.result.status == Status.OK).all()
    b = exergy.balance(run)
    assert b.destroyed_by_balance == pytest.approx(b.destroyed_by_entropy, rel=1e-9)
    assert (b.destroyed_by_entropy > 0.0).all()
    share = b.destroyed_by_entropy / b.fuel
    assert (share > 0.08).all()
    assert (share < 0.6).all()
    assert (np.diff(share) < 0.0).all()  # the leaner, the colder the flame, the more is destroyed
    assert (b.destroyed_blowdown > 0.0).all()


@pytest.mark.parametrize(("admission", "fuel"), [("direct", "methanol"), ("premixed", "methane")])
def test_the_balance_of_the_closed_part_adds_up(gas, make, solve, admission, fuel):
    """``work`` is the exergy of the work from the start of compression to release, against p0."""
    volumes = Volumes(*(np.array([x]) for x in (0.07, 1.0, 0.96, 0.07)))
    run = solve(
        gas,
        *make(
            fuel,
            admission,
            equivalence_ratio=0.6,
            pressure=2.9e5,
            exhaust_pressure=2.7e5,
            temperature=335.0,
            volumes=volumes,
            fuel_pressure=400e5,
        ),
    )
    b = exergy.balance(run)
    brought = b.fuel if admission == "direct" else 0.0
    left = b.trapped + brought - b.destroyed_by_entropy - b.release
    assert left[0] == pytest.approx(float(b.work[0]), rel=1e-9)


def test_pressing_a_liquid_at_the_dead_temperature_brings_v_dp(gas, make, trap):
    """At T0 the work of pressing reversibly is v (p - p0): dh - T0 ds = v dp, whatever the expansivity."""
    recipe, settings = make("methanol", "direct", fuel_pressure=[101325.0, 600e5])
    per_kg, _ = exergy.fuel_exergy(trap(gas, recipe, settings))
    volume = recipe.fuel.liquid_volume
    # the liquid stiffens: at 600 bar its mean volume is a few percent below that at 1 bar
    assert per_kg[1] - per_kg[0] == pytest.approx(volume * (600e5 - 101325.0), rel=0.06)


def test_liquid_and_vapour_differ_by_the_free_energy_of_evaporation(gas, make, trap):
    recipe, settings = make("methanol", "direct")
    liquid, marked = exergy.fuel_exergy(trap(gas, recipe, settings))
    assert not marked
    vapour = exergy.standard_vapour_exergy(recipe.table)
    expected = 8314.46 / recipe.fuel.molar_mass * 298.15 * np.log(recipe.fuel.saturation_pressure(298.15) / 101325.0)
    assert liquid[0] - vapour == pytest.approx(expected, rel=1e-4)
    # Szargut: methanol liquid 718.0 kJ/mol (from memory)
    assert liquid[0] * recipe.fuel.molar_mass / 1e6 == pytest.approx(718.0, rel=2e-3)


@pytest.mark.parametrize("name", ["workboat", "hydrogen-genset", "methanol-ferry", "gasoline-launch"])
def test_every_demo(name):
    a = fuelair.assess(fuelair.Case.read(resources.demos() / f"{name}.toml"))
    b = a.exergy
    assert b.destroyed_by_balance[0] == pytest.approx(float(b.destroyed_by_entropy[0]), rel=1e-9)
    assert 0.1 < b.destroyed_by_entropy[0] / b.fuel[0] < 0.35
    assert a.exergy_figures()["fuel_basis"] == (
        "species data" if name in ("hydrogen-genset", "methanol-ferry") else "Szargut-Styrylo ratio"
    )
