"""Blends: mass, atoms, energy and volume add up; mistakes are told all at once."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fuelair.errors import InputError
from fuelair.fuel import blend, load, own

LIQUIDS = ["gasoline", "diesel", "ethanol", "methanol", "n-heptane", "toluene", "fame", "marine-residual"]


def per_kilogram(fuel, element):
    return dict(fuel.atoms).get(element, 0.0) / fuel.molar_mass


@settings(max_examples=60, deadline=None)
@given(st.lists(st.sampled_from(LIQUIDS), min_size=2, max_size=5, unique=True), st.data())
def test_mass_blend_conserves(parts, data):
    raw = [data.draw(st.floats(0.01, 1.0)) for _ in parts]
    shares = [x / sum(raw) for x in raw]
    mixed = blend(list(zip(parts, shares, strict=True)))
    fuels = [load(p) for p in parts]
    for element in "CHONS":
        expected = sum(w * per_kilogram(f, element) for w, f in zip(shares, fuels, strict=True))
        assert per_kilogram(mixed, element) == pytest.approx(expected, rel=1e-11, abs=1e-15)
    for key in (
        "lower_heating_value_vapour",
        "lower_heating_value_liquid",
        "higher_heating_value_liquid",
        "latent_heat",
        "liquid_cp",
        "oxygen_demand",
    ):
        expected = sum(w * getattr(f, key) for w, f in zip(shares, fuels, strict=True))
        assert getattr(mixed, key) == pytest.approx(expected, rel=1e-11), key
    moles = sum(w / f.molar_mass for w, f in zip(shares, fuels, strict=True))
    assert mixed.molar_mass == pytest.approx(1.0 / moles, rel=1e-11)
    supply = sum(w * float(f.liquid_enthalpy(330.0, 5e7)) for w, f in zip(shares, fuels, strict=True))
    assert float(mixed.liquid_enthalpy(330.0, 5e7)) == pytest.approx(supply, rel=1e-11)


def test_volume_blend_by_hand():
    gasoline, ethanol = load("gasoline"), load("ethanol")
    # Ethanol's density is recorded at 293.15 K; 789.42 kg/m3 there is 793.7 at 288.15 K by its expansivity.
    at_15 = 789.42 * (1 + ethanol.expansivity * -5.0) / (1 + ethanol.expansivity * -10.0)
    masses = (0.9 * 745.0, 0.1 * at_15)
    share = masses[1] / sum(masses)
    mixed = blend([("gasoline", 0.9), ("ethanol", 0.1)], basis="volume")
    assert mixed.mass_fractions["O"] == pytest.approx(share * ethanol.mass_fractions["O"], rel=1e-12)
    assert mixed.density == pytest.approx(sum(masses), rel=1e-12)
    assert mixed.density_temperature == 288.15
    heat = (1 - share) * gasoline.lower_heating_value_liquid + share * ethanol.lower_heating_value_liquid
    assert mixed.lower_heating_value_liquid == pytest.approx(heat, rel=1e-12)
    recorded = load("gasoline-e10")
    assert recorded.lower_heating_value_liquid == mixed.lower_heating_value_liquid
    # EN 228 limits oxygen to 3.7 % by mass at 10 % ethanol by volume (from memory): the blend must come out there.
    assert 0.036 < recorded.mass_fractions["O"] < 0.038


def test_gases_blend_by_mole_and_get_mixing_entropy():
    mixed = blend([("methane", 0.8), ("hydrogen", 0.2)], basis="volume")
    assert dict(mixed.atoms) == pytest.approx({"C": 0.8, "H": 3.6}, rel=1e-12)
    mixing = -8314.462618 * (0.8 * math.log(0.8) + 0.2 * math.log(0.2))
    expected = 0.8 * load("methane").vapour.entropy + 0.2 * load("hydrogen").vapour.entropy + mixing
    assert mixed.vapour.entropy == pytest.approx(expected, rel=1e-12)
    assert mixed.latent_heat is None
    assert dict(mixed.vapour.shape) == pytest.approx({"CH4": 0.8, "H2": 0.2})


def test_inert_gas_dilutes():
    mixed = blend([("methane", 0.6), ("carbon-dioxide", 0.4)], basis="volume")
    methane = load("methane")
    assert mixed.lower_heating_value_vapour * mixed.molar_mass == pytest.approx(
        0.6 * methane.lower_heating_value_vapour * methane.molar_mass, rel=1e-12
    )
    assert mixed.oxygen_demand * mixed.molar_mass == pytest.approx(1.2, rel=1e-12)


def test_propane_with_butane_is_a_liquid_with_ideal_vapour_pressure():
    mixed = blend([("propane", 0.5), ("n-butane", 0.5)])
    x = 0.5 / load("propane").molar_mass * mixed.molar_mass
    expected = x * load("propane").saturation_pressure(298.15) + (1 - x) * load("n-butane").saturation_pressure(298.15)
    assert mixed.saturation_pressure(298.15) == pytest.approx(expected, rel=1e-12)
    assert mixed.phase(298.15, 3e5) == "gas"
    assert mixed.phase(298.15, 1e6) == "liquid"


def test_same_fuel_twice_over_changes_nothing():
    heptane = load("n-heptane")
    mixed = blend([("n-heptane", 1.0)])
    assert mixed.lower_heating_value_liquid == pytest.approx(heptane.lower_heating_value_liquid, rel=1e-14)
    assert dict(mixed.atoms) == pytest.approx(dict(heptane.atoms), rel=1e-14)
    assert mixed.vapour.entropy == pytest.approx(heptane.vapour.entropy, rel=1e-14)


def test_own_fuel_in_a_blend_and_liquid_with_gas():
    mine = own(formula="C16H32O2", lower_heating_value=36.5e6, density=865.0, name="mine")
    mixed = blend([("diesel", 0.7), (mine, 0.3)])
    expected = 0.7 * 43.0e6 + 0.3 * 36.5e6
    assert mixed.lower_heating_value_liquid == pytest.approx(expected, rel=1e-12)
    dual = blend([("diesel", 0.5), ("hydrogen", 0.5)])
    assert dual.latent_heat is None
    assert any("counts as vapour" in w for w in dual.warnings)


def test_all_mistakes_at_once():
    with pytest.raises(InputError) as caught:
        blend([("dieselx", 0.5), ("ethanol", 1.5), ("ethanol", -0.1)], basis="moles")
    text = str(caught.value)
    for part in (
        "no such fuel",
        "nearest: diesel",
        "fuel.blend[1].moles_fraction",
        "above 0, up to 1",
        "named twice",
        "no such basis",
    ):
        assert part in text
    assert len(caught.value.problems) == 5


@pytest.mark.parametrize(
    ("components", "basis", "said"),
    [
        ([("diesel", 0.5), ("fame", 0.4)], "mass", "do not sum to one"),
        ([], "mass", "at least one"),
        ([("diesel", math.nan)], "mass", "outside its range"),
        ([("diesel", 0.5), ("methane", 0.5)], "volume", "by volume"),
        ([("nitrogen", 1.0)], "mass", "nothing in it burns"),
    ],
)
def test_one_mistake(components, basis, said):
    with pytest.raises(InputError, match=said):
        blend(components, basis)
