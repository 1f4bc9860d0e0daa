"""The compiled generic Newton: everything that holds for `gibbs.py`, traces, its second start, its bracket, bits, steps.

By hand over more states: ``python tests/test_compiled_generic.py 100000``.
"""

from __future__ import annotations

import importlib.util
import sys
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numba
import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.gas import gibbs as array_code
from fuelair.gas.compiled import generic, jit, newton, real_fixed
from fuelair.gas.compiled.generic import equilibrate
from fuelair.gas.complete import oxygen_excess, solid_carbon
from fuelair.gas.engine import total, weighted
from fuelair.gas.frozen import frozen_state
from fuelair.gas.mixture import gibbs
from fuelair.gas.species import build

PAIRS = ("TP", "TV", "HP", "UV", "SP", "SV", "ST")
FUELS = ("n-dodecane", "methanol", "ammonia", "hydrogen", "marine-residual")


def load(name, **replaced):
    """Another file of tests, with some of its names replaced."""
    spec = importlib.util.spec_from_file_location(f"fuelair_compiled_{name}", Path(__file__).with_name(f"{name}.py"))
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    for key, value in replaced.items():
        setattr(module, key, value)
    return module


def in_place(table, pair, x, y, amounts, allowed, **given):
    """The compiled function with the arguments of the array code, whose tests all allow what the table forms."""
    assert np.array_equal(allowed, np.tile(table.forms, (len(x), 1)))
    return equilibrate(table, pair, x, y, amounts, **given)


same = load("test_gas_gibbs", equilibrate=in_place)
case = same.case
globals().update({name: test for name, test in vars(same).items() if name.startswith("test_")})


def box(name, n, seed, T=(200.0, 5500.0), p=(0.1e5, 600e5), phi=(0.05, 2.5)):
    """Table, amounts, T and p at random: in air, in oxygen, in anything between; a tenth exactly stoichiometric, half with
    a little fuel that does not react; without what must form solid carbon."""
    rng, table = np.random.default_rng([seed, len(name)]), build(fuels.load(name).vapour)
    hot = np.exp(rng.uniform(np.log(max(T[0], table.t_min.max())), np.log(min(T[1], table.t_max.min())), n))
    pressure, ratio = np.exp(rng.uniform(*np.log(p), n)), np.where(np.arange(n) % 10 == 9, 1.0, rng.uniform(*phi, n))
    demand = -float(oxygen_excess(table, np.eye(len(table))[[table.index("fuel")]])[0]) / 2.0
    nitrogen = np.choose(rng.integers(0, 3, n), [np.full(n, 3.73), np.zeros(n), rng.uniform(0.0, 4.0, n)])
    amounts = np.zeros((n, len(table)))
    for species, value in (
        ("O2", 1.0),
        ("N2", nitrogen),
        ("Ar", 0.01 * nitrogen),
        ("fuel", ratio / demand),
        ("unburned-fuel", 1e-3 * rng.integers(0, 2, n)),
    ):
        amounts[:, table.index(species)] = value
    amounts /= total(amounts * table.molar_mass)[:, None]
    keep = ~solid_carbon(table, amounts)
    return table, amounts[keep], hot[keep], pressure[keep]


def given(state, pair):
    of = {"T": state.T, "P": state.p, "H": state.h, "U": state.u, "S": state.s, "V": state.v}
    return of[pair[0]], of[pair[1]]


def fractions(amounts):
    return amounts / total(amounts)[:, None]


def solved(name, n, seed=0, **limits):
    """Table, amounts and states in equilibrium."""
    table, amounts, T, p = box(name, n, seed, **limits)
    found = equilibrate(table, "TP", T, p, amounts)
    assert not found.failed.any()
    return table, amounts, frozen_state(table, "TP", T, p, found.amounts)


def compare(name, pair, n, seed=0):
    """Largest differences from the array code: of temperature, of mole fractions above 1e-10; and of the elements."""
    table, amounts, state = solved(name, n, seed)
    x, y = given(state, pair)
    own = equilibrate(table, pair, x, y, amounts)
    other = array_code.equilibrate(table, pair, x, y, amounts, np.tile(table.forms, (len(x), 1)))
    assert not own.failed.any()
    assert not other.failed.any()
    a, b = fractions(own.amounts), fractions(other.amounts)
    want = weighted(amounts, table.atoms)
    gap = np.abs(weighted(own.amounts, table.atoms) - want).max(axis=1) / want.max(axis=1)
    return np.abs(own.T / other.T - 1.0).max(), np.abs(a / np.where(b > 1e-10, b, np.nan) - 1.0), gap.max()


@pytest.mark.parametrize("pair", PAIRS)
@pytest.mark.parametrize("name", FUELS)
def test_it_agrees_with_the_array_code(name, pair):
    T, x, gap = compare(name, pair, 30, PAIRS.index(pair))
    assert T < 1e-10
    assert np.nanmax(x) < 1e-6
    assert gap <= 1e-13


@pytest.mark.parametrize("first", [0, 1])
@pytest.mark.parametrize("pair", PAIRS)
def test_both_starts_lead_to_the_same_state(pair, first):
    table, amounts, state = solved("n-dodecane", 60, seed=2, T=(700.0, 5500.0))
    found = generic.newton(table, pair, *given(state, pair), amounts, first=first)
    assert not found.failed.any()
    assert pytest.approx(state.T, rel=1e-11) == found.T
    assert fractions(found.amounts) == pytest.approx(fractions(state.amounts), rel=1e-8, abs=1e-30)


@pytest.mark.parametrize("pair", ["HP", "UV", "SP", "SV", "ST"])
def test_the_bracket_finds_the_same_state(pair):
    table, amounts, state = solved("n-dodecane", 40, seed=3)
    found = generic.between(table, pair, *given(state, pair), amounts)
    assert not found.failed.any()
    assert pytest.approx(state.T, rel=1e-12) == found.T
    assert fractions(found.amounts) == pytest.approx(fractions(state.amounts), rel=1e-9, abs=1e-30)


@pytest.mark.parametrize("pair", ["HP", "UV", "SP", "SV", "ST"])
def test_where_newton_fails_the_bracket_answers_and_only_there(pair, monkeypatch):
    table, amounts, state = solved("methanol", 6, seed=4)
    x, y = given(state, pair)
    direct, sound = generic.newton, equilibrate(table, pair, x, y, amounts)

    def lame(table, pair, x, y, amounts, **more):
        found = direct(table, pair, x, y, amounts, **more)
        if pair not in ("TP", "TV"):
            found.failed[1::2] = True
            found.T[1::2] = np.nan
        return found

    monkeypatch.setattr(generic, "newton", lame)
    found = equilibrate(table, pair, x, y, amounts)
    assert not found.failed.any()
    assert np.array_equal(found.amounts[::2], sound.amounts[::2])
    assert pytest.approx(sound.T, rel=1e-12) == found.T
    assert (found.iterations[1::2] > 5 * sound.iterations[1::2]).all()


@pytest.mark.parametrize(("pair", "absurd"), [("HP", 1e12), ("UV", -1e12), ("SP", 1e8), ("SV", -1e8), ("ST", 1e8)])
def test_what_no_gas_can_be_fails_and_keeps_its_amounts(pair, absurd):
    table, amounts, state = solved("methanol", 1, seed=4)
    _, y = given(state, pair)
    found = equilibrate(table, pair, np.array([absurd]), y, amounts)
    assert found.failed.all()
    assert np.isnan(found.T).all()
    assert np.array_equal(found.amounts, amounts)


def test_traces_at_exact_stoichiometry_obey_mass_action_and_the_balance_of_oxygen():
    """Amounts whose oxygen excess is zero in every digit; `gibbs.py` and Cantera are off by 1e6 at 400 K, 4e2 at 500 K."""
    table = build(fuels.load("methane").vapour)
    T = np.array([250.0, 300.0, 400.0, 500.0, 600.0, 700.0, 850.0, 1000.0])
    amounts, at = np.zeros((len(T), len(table))), table.index
    for name, value in (("fuel", 0.0031), ("O2", 0.0062), ("N2", 0.0233)):
        amounts[:, at(name)] = value
    found = equilibrate(table, "TP", T, np.full(len(T), 20e5), amounts)
    assert not found.failed.any()
    n = found.amounts
    mu = gibbs(table, T) + np.log(np.maximum(fractions(n), 1e-300) * 20e5 / table.reference_pressure)
    for reaction in (
        {"CO2": 2, "CO": -2, "O2": -1},
        {"H2O": 2, "H2": -2, "O2": -1},
        {"NO": 2, "N2": -1, "O2": -1},
        {"OH": 4, "H2O": -2, "O2": -1},
    ):
        assert np.abs(sum(v * mu[:, at(k)] for k, v in reaction.items())).max() < 1e-11
    excess = {"O2": 2.0, "O": 1.0, "OH": 0.5, "NO": 1.0, "NO2": 2.0, "HO2": 1.5, "N2O": 1.0, "H2O2": 1.0}
    lack = {"CO": 1.0, "H2": 1.0, "H": 0.5, "CH4": 4.0, "NH3": 1.5, "HCN": 2.5}
    free = sum(v * n[:, at(k)] for k, v in excess.items())
    assert sum(v * n[:, at(k)] for k, v in lack.items()) == pytest.approx(free, rel=1e-11)
    assert fractions(n)[0, at("O2")] < 1e-32
    assert fractions(n)[-1, at("O2")] > 1e-9


def test_gas_without_some_of_the_elements():
    table, at = build(fuels.load("methane").vapour), None
    at = table.index
    mixtures = (
        {"N2": 0.79, "O2": 0.21, "Ar": 0.01},
        {"N2": 1.0, "Ar": 0.1},
        {"Ar": 1.0},
        {"O2": 1.0},
        {"CO2": 1.0},
        {"CO": 1.0, "O2": 0.7},
        {"H2O": 1.0},
        {"H2": 1.0, "N2": 1.0},
        {"unburned-fuel": 1.0, "O2": 1.0},
    )
    amounts = np.array([table.amounts(m) for m in mixtures])
    for T in (300.0, 1200.0, 4000.0):
        for pair in PAIRS:
            whole = np.full(len(mixtures), T), np.full(len(mixtures), 10e5)
            base = equilibrate(table, "TP", *whole, amounts)
            assert not base.failed.any()
            found = equilibrate(table, pair, *given(frozen_state(table, "TP", *whole, base.amounts), pair), amounts)
            assert not found.failed.any(), (T, pair)
            assert pytest.approx(whole[0], rel=1e-10) == found.T
            assert np.array_equal(found.amounts[2], amounts[2])
            assert np.array_equal(found.amounts[8, at("unburned-fuel")], amounts[8, at("unburned-fuel")])
    want = weighted(amounts, table.atoms)
    assert (np.abs(weighted(base.amounts, table.atoms) - want) <= 1e-15 * want.max(axis=1, keepdims=True)).all()
    carbon = equilibrate(table, "TP", np.array([2000.0]), np.array([1e5]), table.amounts({"CH4": 1.0})[None])
    assert carbon.failed.all()  # carbon without oxygen is no gas of these species


def test_a_table_of_more_species():
    table = build(fuels.load("methane").vapour, extra=("C2H2,acetylene", "CH3", "HCHO,formaldehy", "NH2", "CN"))
    amounts = same.mixtures(table, (0.6, 1.0, 1.9))
    T, p = np.array([2400.0, 1500.0, 900.0]), np.array([20e5, 50e5, 200e5])
    own = equilibrate(table, "TP", T, p, amounts)
    other = array_code.equilibrate(table, "TP", T, p, amounts, np.tile(table.forms, (3, 1)))
    assert not own.failed.any()
    a, b = fractions(own.amounts), fractions(other.amounts)
    assert a[b > 1e-12] == pytest.approx(b[b > 1e-12], rel=1e-7)
    assert (a[:, table.index("CH3")] > 0.0).all()


def test_two_threads_give_the_bits_of_one():
    table, amounts, state = solved("n-dodecane", 400, seed=5)
    whole = equilibrate(table, "SV", state.s, state.v, amounts)
    halves = [slice(0, 200), slice(200, 400)]
    with ThreadPoolExecutor(2) as pool:
        parts = list(pool.map(lambda k: equilibrate(table, "SV", state.s[k], state.v[k], amounts[k]), halves * 4))
    for k, part in zip(halves * 4, parts, strict=True):
        assert np.array_equal(part.amounts, whole.amounts[k])
        assert np.array_equal(part.T, whole.T[k])
    assert generic.run.targetoptions["nogil"]
    assert real_fixed.states.targetoptions["nogil"]


STEPS = {"TP": 4.2, "TV": 4.2, "HP": 6.0, "UV": 6.0, "SP": 5.9, "SV": 5.9, "ST": 5.6}


@pytest.mark.parametrize("pair", PAIRS)
def test_newton_takes_few_steps(pair):
    table, amounts, state = solved("n-dodecane", 3000, seed=6, T=(1000.0, 3200.0), p=(1e5, 300e5), phi=(0.2, 1.6))
    steps = equilibrate(table, pair, *given(state, pair), amounts).iterations
    assert steps.mean() < STEPS[pair]
    assert steps.max() < 30


@pytest.mark.parametrize("counted", [False, True])
def test_inner_functions_keep_no_reference_counts(counted):
    """They would cost as much as the arithmetic, and come back without a word."""
    options = {k: newton.damping.targetoptions[k] for k in ("nogil", "error_model", "fastmath", "_nrt")}
    assert options["_nrt"] is False
    fresh = numba.njit(**options | {"_nrt": counted})(newton.damping.py_func)
    fresh(newton.Work(np.ones((12, 4)), np.ones((5, 6)), np.eye(6)), 0.0, 0.1, 0.1)
    (text,) = fresh.inspect_llvm().values()
    assert ("NRT_decref" in text) is counted


def test_machine_code_is_kept_where_it_can_be_written(tmp_path, monkeypatch):
    file = tmp_path / "file"
    file.write_text("no folder can be made below this")
    chosen = jit.cache_folder.__wrapped__
    monkeypatch.setattr(jit, "_parents", lambda: [file, tmp_path / "own"])
    assert chosen().parent == tmp_path / "own"
    monkeypatch.setattr(jit, "_parents", lambda: [file])
    assert chosen() is None


@pytest.mark.skipif(sys.platform == "win32", reason="another variable there")
def test_an_empty_variable_does_not_mean_the_current_folder(tmp_path, monkeypatch):
    monkeypatch.setenv("HOME", str(tmp_path))
    monkeypatch.setenv("XDG_CACHE_HOME", "")
    monkeypatch.delenv("NUMBA_CACHE_DIR", raising=False)
    assert jit._parents()[-1] == tmp_path / ".cache" / "fuelair"
    assert all(parent.is_absolute() for parent in jit._parents())


def test_without_a_folder_functions_still_compile(monkeypatch):
    monkeypatch.setattr(jit, "cache_folder", lambda: None)
    assert jit.compiled(lambda x: 2.0 * x)(3.0) == 6.0


if __name__ == "__main__":
    size, seed = int(sys.argv[1]) // (len(FUELS) * len(PAIRS)) + 1, int((*sys.argv[2:], "1")[0])
    for fuel in FUELS:
        for letters in PAIRS:
            apart, shares, open_balance = compare(fuel, letters, size, seed)
            line = f"{fuel:16s} {letters}  T {apart:.1e}  x {np.nanmax(shares):.1e}  elements {open_balance:.1e}"
            sys.stdout.write(line + "\n")
