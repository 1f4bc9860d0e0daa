"""The species table: data against Cantera's own, continuity at the break, the fuel vapour, the digest."""

from __future__ import annotations

import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.errors import DataError
from fuelair.fuel import Vapour
from fuelair.gas.mixture import gibbs, mix
from fuelair.gas.polynomials import T_BREAK, R
from fuelair.gas.species import FUEL, UNBURNED, build, data_versions, shape_is_molecule

TABLE = build()
T_LOW = (200.0, 298.15, 650.0, 999.9)
T_HIGH = (1000.1, 2000.0, 3500.0, 5999.9)  # at 6000 K the nine-coefficient data change range


def pure(table, name):
    amounts = np.zeros((1, len(table)))
    amounts[0, table.index(name)] = 1.0 / table.molar_mass[table.index(name)]
    return amounts


def ours(name, T):
    """cp, h, s at the reference pressure in J/(kmol K), J/kmol."""
    cp, h, s = mix(TABLE, pure(TABLE, name)).thermal(np.array([T]))
    m = TABLE.molar_mass[TABLE.index(name)]
    return cp[0] * m, h[0] * m, s[0] * m


@pytest.fixture(scope="module")
def bundled(bundled_species):
    return {s.name: s.thermo for s in bundled_species.values()}


@pytest.mark.parametrize("T", T_LOW)
@pytest.mark.parametrize("name", TABLE.names)
def test_below_the_break_the_data_are_canteras(bundled, name, T):
    thermo = bundled[name]
    cp, h, s = ours(name, T)
    assert cp == pytest.approx(thermo.cp(T), rel=1e-12)
    assert h == pytest.approx(thermo.h(T), rel=1e-12, abs=1e-9 * R * T)
    assert s == pytest.approx(thermo.s(T), rel=1e-12)


@pytest.mark.parametrize("T", T_HIGH)
@pytest.mark.parametrize("name", TABLE.names)
def test_above_the_break_they_are_canteras_less_the_jump_at_the_break(bundled, name, T):
    # The upper range is shifted by the jump that the bundled polynomials have at 1000 K, so the difference in
    # enthalpy is the same at every temperature; cp is untouched.
    thermo = bundled[name]
    jump_h = thermo.h(T_BREAK * (1 - 1e-13)) - thermo.h(T_BREAK * (1 + 1e-13))
    jump_s = thermo.s(T_BREAK * (1 - 1e-13)) - thermo.s(T_BREAK * (1 + 1e-13))
    cp, h, s = ours(name, T)
    assert cp == pytest.approx(thermo.cp(T), rel=1e-12)
    assert h - thermo.h(T) == pytest.approx(jump_h, abs=1e-8 * R)
    assert s - thermo.s(T) == pytest.approx(jump_s, abs=1e-10 * R)
    assert abs(jump_h) < 4e-7 * R * T_BREAK
    assert h == pytest.approx(thermo.h(T), abs=4e-7 * R * T_BREAK)


@pytest.mark.parametrize("name", TABLE.names)
def test_enthalpy_and_entropy_are_continuous_at_the_break(name):
    below, above = ours(name, np.nextafter(T_BREAK, 0.0)), ours(name, T_BREAK)
    assert below[1] == pytest.approx(above[1], abs=1e-9 * R)
    assert below[2] == pytest.approx(above[2], abs=1e-12 * R * 100)


def test_molar_masses_are_canteras(bundled_species):
    weights = {s.name: s.molecular_weight for s in bundled_species.values()}
    for name, mass in zip(TABLE.names, TABLE.molar_mass, strict=True):
        assert mass == pytest.approx(weights[name], rel=1e-14)


@pytest.mark.parametrize("name", fuels.names())
def test_complete_combustion_at_298_k_releases_the_record_s_heating_value(name):
    fuel = fuels.load(name)
    table = build(fuel.vapour)
    atoms = dict(fuel.atoms)
    c, h, o, n, s = (atoms.get(e, 0.0) for e in "CHONS")
    products = {"CO2": c, "H2O": h / 2.0, "N2": n / 2.0, **({"SO2": s} if s else {})}
    enthalpy = {
        k: float(mix(table, pure(table, k)).thermal(np.array([298.15]))[1][0]) * table.molar_mass[table.index(k)]
        for k in (*products, "O2", FUEL)
    }
    oxygen = c + h / 4.0 + s - o / 2.0
    released = enthalpy[FUEL] + oxygen * enthalpy["O2"] - sum(v * enthalpy[k] for k, v in products.items())
    mass = table.molar_mass[table.index(FUEL)]
    # per kg; the atoms of the record and Cantera's atomic weights may differ by rounding of the molar mass
    assert released / mass == pytest.approx(fuel.lower_heating_value_vapour, rel=1e-12)
    assert mass == pytest.approx(fuel.molar_mass, rel=2e-5)


def test_unburned_fuel_is_the_same_gas_but_inert():
    table = build(fuels.load("methanol").vapour)
    fuel, rest = table.index(FUEL), table.index(UNBURNED)
    assert table.inert.tolist() == [j == rest for j in range(len(table))]
    for array in (table.atoms, table.low, table.high, table.molar_mass):
        assert np.array_equal(array[fuel], array[rest])
    assert not table.reactive_atoms[rest].any()
    assert table.reactive_atoms[fuel].any()


def test_equal_tables_have_equal_digests_and_others_do_not():
    vapour = fuels.load("methane").vapour
    other = Vapour(
        vapour.name, vapour.atoms, vapour.molar_mass, vapour.lower_heating_value * (1.0 + 1e-9), vapour.shape, vapour.entropy
    )
    assert build(vapour).digest == build(vapour).digest
    assert len({build(vapour).digest, build(other).digest, build().digest, build(vapour, extra=("C2H2,acetylene",)).digest}) == 4


def test_a_given_entropy_is_met_at_the_reference_state():
    plain = fuels.load("methane").vapour
    given = Vapour("methane", plain.atoms, plain.molar_mass, plain.lower_heating_value, plain.shape, 190e3)
    table = build(given)
    _, _, s = mix(table, pure(table, FUEL)).thermal(np.array([298.15]))
    assert s[0] * table.molar_mass[table.index(FUEL)] == pytest.approx(190e3, rel=1e-14)
    assert shape_is_molecule(given)


def test_a_shape_of_other_atoms_is_not_the_molecule():
    assert shape_is_molecule(fuels.load("methane").vapour)
    assert not shape_is_molecule(fuels.load("diesel").vapour)


def test_unknown_species_are_named():
    with pytest.raises(DataError, match=r"in nasa_gas.yaml: .*unobtainium"):
        build(extra=("unobtainium",))
    with pytest.raises(DataError, match=r"in nasa_gas.yaml: .*unobtainium"):
        build(Vapour("x", (("H", 2.0),), 2.016, 1e8, (("unobtainium", 1.0),)))
    with pytest.raises(DataError, match="'SO2' is not in the table"):
        TABLE.index("SO2")


def test_amounts_are_per_kilogram():
    n = TABLE.amounts({"N2": 3.76, "O2": 1.0})
    assert float(np.sum(n * TABLE.molar_mass)) == pytest.approx(1.0, rel=1e-15)
    assert n[TABLE.index("N2")] / n[TABLE.index("O2")] == pytest.approx(3.76, rel=1e-15)


@pytest.mark.parametrize("T", [298.15, 800.0, 1500.0, 3000.0])
def test_gibbs_is_enthalpy_less_entropy(T):
    g = gibbs(TABLE, np.array([T]))[0]
    for name in TABLE.names:
        _, h, s = ours(name, T)
        assert g[TABLE.index(name)] == pytest.approx((h - T * s) / (R * T), rel=1e-12)


def test_versions_name_the_data():
    ct = pytest.importorskip("cantera")
    assert data_versions() == {
        "cantera": ct.__version__,
        "species_data": f"nasa_gas.yaml, N2 and O2 of airNASA9.yaml, of Cantera {ct.__version__}",
    }
