"""A user's own fuel: reproduces a record from the same numbers, and says every mistake at once."""

import pytest

from fuelair.errors import InputError
from fuelair.fuel import card, formula, load, own, surrogates


def test_reproduces_n_dodecane_from_its_numbers():
    record = load("n-dodecane")
    mine = own(
        formula="C12H26",
        lower_heating_value=record.lower_heating_value_liquid,
        density=753.13,
        latent_heat=record.latent_heat,
        liquid_cp=record.liquid_cp,
        expansivity=record.expansivity,
    )
    assert mine.atoms == record.atoms
    assert mine.molar_mass == record.molar_mass
    assert mine.lower_heating_value_vapour == pytest.approx(record.lower_heating_value_vapour, rel=1e-14)
    assert mine.higher_heating_value_liquid == pytest.approx(record.higher_heating_value_liquid, rel=1e-14)
    assert mine.oxygen_demand == record.oxygen_demand
    assert dict(mine.vapour.shape) == dict(record.vapour.shape)
    # 753.13 at 288.15 K is 749.41 at 293.15 K by the expansivity; the record carries 749.44.
    assert float(mine.liquid_enthalpy(340.0, 8e7)) == pytest.approx(float(record.liquid_enthalpy(340.0, 8e7)), rel=1e-4)
    assert mine.warnings == ()


def test_mass_fractions_are_the_same_fuel():
    record = load("n-dodecane")
    mine = own(
        mass_fractions={"carbon": record.mass_fractions["C"], "H": record.mass_fractions["H"]},
        molar_mass=170.34,
        lower_heating_value=44.117e6,
        density=750.0,
        latent_heat=361e3,
    )
    assert dict(mine.atoms) == pytest.approx(dict(record.atoms), rel=1e-12)
    assert mine.oxygen_demand == pytest.approx(record.oxygen_demand, rel=1e-12)


def test_mass_fractions_are_normalised():
    mine = own(mass_fractions={"C": 0.8605, "H": 0.1390}, lower_heating_value=43e6, density=830.0)
    assert mine.mass_fractions["C"] == pytest.approx(0.8605 / 0.9995, rel=1e-12)
    assert any("molar mass not given" in w for w in mine.warnings)


def test_phase_decides_the_heating_value():
    gas = own(formula="C3H8", lower_heating_value=46.35e6)
    assert gas.lower_heating_value_vapour == 46.35e6
    assert gas.latent_heat is None
    liquid = own(formula="C7H16", lower_heating_value=44.56e6, density=688.0, latent_heat=365e3)
    assert liquid.lower_heating_value_liquid == pytest.approx(44.56e6, rel=1e-15)
    assert liquid.lower_heating_value_vapour == 44.56e6 + 365e3


def test_per_carbon_formula_scales_to_the_molar_mass():
    mine = own(formula="CH1.9", lower_heating_value=43e6, density=830.0, molar_mass=200.0)
    assert mine.molar_mass == pytest.approx(200.0, rel=1e-12)
    assert dict(mine.atoms)["H"] / dict(mine.atoms)["C"] == pytest.approx(1.9, rel=1e-12)
    bare = own(formula="CH1.9", lower_heating_value=43e6, density=830.0)
    assert any("per carbon atom" in w for w in bare.warnings)


def test_unlikely_heating_value_is_questioned_not_refused():
    mine = own(formula="C12H26", lower_heating_value=30e6, density=750.0)
    assert any("30 MJ/kg, but the composition suggests 43.89" in w for w in mine.warnings)


@pytest.mark.parametrize(
    ("text", "family"),
    [
        ("H2", "hydrogen"),
        ("NH3", "ammonia"),
        ("CH4", "methane"),
        ("C3H6", "light-gas"),
        ("C16H34", "paraffinic"),
        ("CH3OH", "methanol"),
        ("C4H9OH", "ethanol"),
        ("C19H36O2", "ester"),
        ("C8H10", "aromatic"),
        ("C8H15", "gasoline"),
        ("C14H26", "diesel"),
        ("C30H45", "residual"),
    ],
)
def test_family_and_shape_mass(text, family):
    atoms = formula.parse(text)
    assert surrogates.family_of(atoms) == family
    for each in surrogates.FAMILIES:
        mass = surrogates.shape_mass(surrogates.shape(each, atoms))
        assert mass == pytest.approx(formula.molar_mass(atoms), rel=1e-12)


def test_every_family_sums_to_one():
    for family, members in surrogates.FAMILIES.items():
        assert sum(members.values()) == pytest.approx(1.0, abs=1e-12), family


@pytest.mark.parametrize(
    ("text", "atoms"),
    [
        ("C12H26", {"C": 12.0, "H": 26.0}),
        ("C7.5H13.4O0.1", {"C": 7.5, "H": 13.4, "O": 0.1}),
        ("CH3OCH3", {"C": 2.0, "H": 6.0, "O": 1.0}),
        ("C8 H18", {"C": 8.0, "H": 18.0}),
        ("SH2", {"H": 2.0, "S": 1.0}),
    ],
)
def test_formula(text, atoms):
    assert dict(formula.parse(text)) == pytest.approx(atoms)


@pytest.mark.parametrize("text", ["", "C12X3", "c12h26", "C12H26+", "(CH2)6", "12", "C0H0", "Cl2"])
def test_bad_formula(text):
    with pytest.raises(InputError, match=r"fuel\.own\.formula"):
        own(formula=text, lower_heating_value=43e6)


def test_all_mistakes_at_once():
    with pytest.raises(InputError) as caught:
        own(
            mass_fractions={"C": 0.9, "H": 0.2, "Fe": 0.1},
            lower_heating_value=43.0,
            density=8.3,
            liquid_cp=2.0,
            phase="solid",
            shape="heavy",
        )
    text = str(caught.value)
    for part in (
        "fuel.own.lower_heating_value",
        "1 to 150 MJ/kg",
        "fuel.own.density",
        "400 to 1300 kg/m3",
        "fuel.own.liquid_cp",
        "1000 to 6000 J/(kg K)",
        "fuel.own.phase",
        "mass_fractions.Fe",
        "fuel.own.shape",
    ):
        assert part in text, part


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        ({"mass_fractions": {"C": 0.9, "H": 0.2}}, "do not sum to one"),
        ({}, "formula or mass fractions"),
        ({"formula": "CH4", "mass_fractions": {"C": 1.0}}, "formula or mass fractions"),
        ({"formula": "CH4", "phase": "liquid"}, "needs its density"),
        ({"formula": "CO2"}, "needs no air"),
        ({"formula": "C2H2O5"}, "needs no air"),
        ({"formula": "S"}, "neither carbon nor hydrogen"),
        ({"formula": "CH4", "latent_heat": 4e5}, "liquid properties given for a gas"),
        ({"formula": "C8H18", "density": float("nan")}, "not a finite number"),
        ({"formula": "C8H18", "lower_heating_value": 0.0}, "outside its range"),
    ],
)
def test_one_mistake(arguments, said):
    with pytest.raises(InputError, match=said):
        own(**{"lower_heating_value": 43e6, **arguments})


def test_sulfur_and_nitrogen_are_carried():
    mine = own(mass_fractions={"C": 0.86, "H": 0.11, "S": 0.025, "N": 0.005}, lower_heating_value=40.5e6, density=980.0)
    by_hand = 0.86 / 12.011 + 0.11 / 4.032 + 0.025 / 32.06
    assert mine.oxygen_demand == pytest.approx(by_hand, rel=1e-12)
    rows = {row.label: row for row in card(mine)}
    assert rows["Lower heating value, liquid"].value == "40.5 MJ/kg"
    assert rows["Lower heating value, liquid"].standing == "given"
