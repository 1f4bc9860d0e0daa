"""Frozen states: every pair leads back to the same state, the ends of the data, bits of a batch."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.gas.engine import Status, total, weighted, worst
from fuelair.gas.frozen import frozen_state
from fuelair.gas.mixture import mix
from fuelair.gas.polynomials import R
from fuelair.gas.species import build

PAIRS = ("TP", "TV", "HP", "UV", "SP", "SV", "ST")
TABLE = build(fuels.load("iso-octane").vapour)
BURNED = {"N2": 0.72, "CO2": 0.11, "H2O": 0.12, "CO": 0.02, "H2": 0.01, "OH": 0.005, "NO": 0.005, "Ar": 0.01}
FRESH = {"N2": 0.78, "O2": 0.2, "Ar": 0.009, "fuel": 0.017}
TEMPERATURES = (201.0, 298.15, 600.0, 999.9999999, 1000.0, 1000.0000001, 1700.0, 3000.0, 5999.0)
PRESSURES = (2e3, 1e5, 599e5)


def grid():
    rows = [(x, T, p) for x in (BURNED, FRESH, {"H2": 1.0}, {"Ar": 1.0}) for T, p in itertools.product(TEMPERATURES, PRESSURES)]
    return np.array([TABLE.amounts(x) for x, _, _ in rows]), np.array([r[1] for r in rows]), np.array([r[2] for r in rows])


def given(state, pair):
    letters = {"T": state.T, "P": state.p, "H": state.h, "U": state.u, "S": state.s, "V": state.v}
    return letters[pair[0]], letters[pair[1]]


@pytest.mark.parametrize("pair", PAIRS)
def test_every_pair_leads_back(pair):
    amounts, T, p = grid()
    start = frozen_state(TABLE, "TP", T, p, amounts)
    assert (start.status == Status.OK).all()
    back = frozen_state(TABLE, pair, *given(start, pair), amounts)
    assert (back.status == Status.OK).all()
    # an enthalpy near zero or an entropy that is a small difference loses a digit or two of the 16
    for name in ("T", "p", "v"):
        assert getattr(back, name) == pytest.approx(getattr(start, name), rel=1e-12), name
    scale = R * total(amounts) * T
    assert (np.abs(back.h - start.h) <= 1e-11 * scale).all()
    assert (np.abs(back.u - start.u) <= 1e-11 * scale).all()
    assert (np.abs(back.s - start.s) <= 1e-11 * scale / T).all()
    # h and s are made continuous at 1000 K, cp is not: it jumps there by up to 2e-9
    jump = np.where(np.abs(T - 1000.0) < 1e-6, 5e-9, 1e-11)
    assert (np.abs(back.cp / start.cp - 1.0) <= jump).all()
    assert (np.abs(back.sound / start.sound - 1.0) <= jump).all()


def test_the_pair_itself_is_met_to_the_last_digits():
    amounts, T, p = grid()
    start = frozen_state(TABLE, "TP", T, p, amounts)
    for pair in PAIRS:
        x, y = given(start, pair)
        back = frozen_state(TABLE, pair, x, y, amounts)
        again_x, again_y = given(back, pair)
        assert again_x == pytest.approx(x, rel=1e-13, abs=1e-9), pair
        assert again_y == pytest.approx(y, rel=1e-13), pair


def test_against_cantera_s_own_solution(bundled_species):
    ct = pytest.importorskip("cantera")
    names = list(BURNED)
    species = [s for s in bundled_species.values() if s.name in names]
    phase = ct.Solution(thermo="ideal-gas", species=species)
    for T, p in itertools.product((250.0, 700.0, 999.0, 1001.0, 2200.0, 4000.0), (1e5, 150e5)):
        phase.TPX = T, p, BURNED
        s = frozen_state(TABLE, "TP", np.array([T]), np.array([p]), TABLE.amounts(BURNED)[None])
        # above 1000 K enthalpy and entropy differ by the jump of the bundled polynomials that the table takes out
        jump = 0.0 if T < 1000.0 else 4e-7
        rt = ct.gas_constant * T / phase.mean_molecular_weight
        assert s.h[0] == pytest.approx(phase.enthalpy_mass, abs=(1e-11 + jump * 1000.0 / T) * rt)
        assert s.u[0] == pytest.approx(phase.int_energy_mass, abs=(1e-11 + jump * 1000.0 / T) * rt)
        assert s.s[0] == pytest.approx(phase.entropy_mass, abs=(1e-10 + jump) * rt / T)
        assert s.cp[0] == pytest.approx(phase.cp_mass, rel=1e-12)
        assert s.v[0] == pytest.approx(phase.volume_mass, rel=1e-12)
        assert s.sound[0] == pytest.approx(phase.sound_speed, rel=1e-12)


def test_order_and_repetition_change_no_bit():
    amounts, T, p = grid()
    start = frozen_state(TABLE, "TP", T, p, amounts)
    order = np.random.default_rng(3).permutation(np.repeat(np.arange(len(T)), 2))
    for pair in PAIRS:
        x, y = given(start, pair)
        batch = frozen_state(TABLE, pair, x, y, amounts)
        mixed = frozen_state(TABLE, pair, x[order], y[order], amounts[order])
        for name in ("T", "p", "v", "u", "h", "s", "cp", "sound", "status", "iterations"):
            assert np.array_equal(getattr(batch, name)[order], getattr(mixed, name)), (pair, name)
        for i in (0, 17, 60):
            alone = frozen_state(TABLE, pair, x[i : i + 1], y[i : i + 1], amounts[i : i + 1])
            assert alone.T[0] == batch.T[i]
            assert alone.s[0] == batch.s[i]


def test_outside_the_data_is_said_and_still_has_numbers():
    n = np.tile(TABLE.amounts(BURNED), (5, 1))
    T = np.array([199.0, 6001.0, 1000.0, 1000.0, 1000.0])
    p = np.array([1e5, 1e5, 601e5, 600e5, 1e5])
    state = frozen_state(TABLE, "TP", T, p, n)
    assert state.status.tolist() == [Status.OUTSIDE_DATA] * 3 + [Status.OK] * 2
    assert np.isfinite(state.h).all()


@pytest.mark.parametrize(
    ("pair", "x", "y", "status"),
    [
        ("HP", 1e9, 1e5, Status.OUTSIDE_DATA),
        ("HP", -1e9, 1e5, Status.OUTSIDE_DATA),
        ("UV", 1e9, 1.0, Status.OUTSIDE_DATA),
        ("SV", -1e5, 1.0, Status.OUTSIDE_DATA),
        ("HP", np.nan, 1e5, Status.NO_SOLUTION),
        ("UV", 0.0, np.nan, Status.NO_SOLUTION),
        ("HP", 0.0, -1e5, Status.NO_SOLUTION),
        ("UV", 0.0, 0.0, Status.NO_SOLUTION),
        ("TP", np.nan, 1e5, Status.NO_SOLUTION),
        ("ST", 7000.0, np.nan, Status.NO_SOLUTION),
    ],
)
def test_a_pair_that_no_gas_can_have_is_named_and_kills_no_neighbour(pair, x, y, status):
    amounts = np.tile(TABLE.amounts(BURNED), (2, 1))
    good = frozen_state(TABLE, "TP", np.array([1500.0]), np.array([1e6]), amounts[:1])
    gx, gy = given(good, pair)
    state = frozen_state(TABLE, pair, np.array([x, gx[0]]), np.array([y, gy[0]]), amounts)
    assert state.status.tolist() == [status, Status.OK]
    assert np.isnan([state.T[0], state.h[0], state.s[0]]).all()
    assert state.T[1] == pytest.approx(1500.0, rel=1e-12)


def test_validity_is_that_of_the_species_present():
    table = TABLE
    narrow = type(table)(
        **{f: getattr(table, f) for f in table.__dataclass_fields__}
        | {"t_max": np.where(np.array(table.names) == "fuel", 1500.0, table.t_max)}
    )
    T, p = np.array([1600.0, 1600.0]), np.array([1e5, 1e5])
    amounts = np.array([table.amounts(FRESH), table.amounts(BURNED)])
    assert frozen_state(narrow, "TP", T, p, amounts).status.tolist() == [Status.OUTSIDE_DATA, Status.OK]


def test_entropy_of_mixing():
    both = TABLE.amounts({"N2": 0.79, "O2": 0.21})[None]
    state = frozen_state(TABLE, "TP", np.array([500.0]), np.array([TABLE.reference_pressure]), both)
    parts = 0.0
    for name, x in (("N2", 0.79), ("O2", 0.21)):
        pure = frozen_state(
            TABLE, "TP", np.array([500.0]), np.array([TABLE.reference_pressure]), TABLE.amounts({name: 1.0})[None]
        )
        mass = TABLE.molar_mass[TABLE.index(name)]
        parts += x * (pure.s[0] * mass - R * np.log(x))
    mean = 0.79 * TABLE.molar_mass[TABLE.index("N2")] + 0.21 * TABLE.molar_mass[TABLE.index("O2")]
    assert state.s[0] == pytest.approx(parts / mean, rel=1e-13)


def test_sums_over_species():
    rng = np.random.default_rng(1)
    n, w = rng.random((7, 19)), rng.random((19, 4))
    w[3] = 0.0
    assert total(n) == pytest.approx(n.sum(axis=1), rel=1e-14)
    assert weighted(n, w) == pytest.approx(n @ w, rel=1e-14)
    assert total(n)[2] == total(n[2:3])[0]
    assert np.array_equal(weighted(n, w)[2], weighted(n[2:3], w)[0])


def test_mixture_gas_constant_and_cp():
    m = mix(TABLE, TABLE.amounts({"Ar": 1.0})[None])
    assert m.gas_constant()[0] == pytest.approx(R / TABLE.molar_mass[TABLE.index("Ar")], rel=1e-15)
    assert m.thermal(np.array([300.0]))[0][0] == pytest.approx(2.5 * R / 39.95, rel=1e-4)  # monatomic: cp = 5/2 R


def test_worst_keeps_the_first_failure():
    a, b = np.array([0, 3, 0], np.int8), np.array([2, 1, 0], np.int8)
    assert worst(a, b).tolist() == [2, 3, 0]


def test_every_status_but_ok_has_a_reason_and_a_label():
    for status in Status:
        assert bool(status.reason) == (status is not Status.OK)
        assert status.label == status.label.lower().replace("_", "-")
