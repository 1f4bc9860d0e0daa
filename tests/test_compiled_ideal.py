"""The compiled engine of the ideal gas: same answers as the reference, same bits in any company, vectors kept."""

from __future__ import annotations

import hashlib
import os
import platform
import re
import subprocess
import sys

import numba
import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.fuel import Vapour
from fuelair.gas.cantera_gas import CanteraGas
from fuelair.gas.compiled import balances, finish, fixed, guess, nested, rows, steps, vector_math
from fuelair.gas.compiled.batch_gas import BatchGas, constants
from fuelair.gas.complete import oxygen_excess
from fuelair.gas.engine import Status, total, weighted
from fuelair.gas.frozen import frozen_state
from fuelair.gas.species import FUEL, UNBURNED, build

PAIRS = ("TP", "TV", "HP", "UV", "SP", "SV", "ST")
AIR = {"N2": 0.78084, "O2": 0.209476, "Ar": 0.00934, "CO2": 0.0004}
NO_NITROGEN = {"O2": 0.21, "Ar": 0.79}
# a fuel without hydrogen; heating value from its enthalpy of formation, JANAF, from memory
CARBON_MONOXIDE = Vapour("carbon monoxide", (("C", 1.0), ("O", 1.0)), 28.0101, 10.103e6, (("CO", 1.0),))
TABLES = {name: build(fuels.load(name).vapour) for name in ("diesel", "hydrogen", "ammonia", "methane", "marine-residual")}
TABLES["carbon-monoxide"] = build(CARBON_MONOXIDE)


def mixture(table, phi, oxidizer=AIR, unburned=0.0):
    """Amounts of fuel in an oxidizer at equivalence ratios ``phi``, a share of the fuel unburned."""
    air, pure = table.amounts(oxidizer), np.zeros((1, len(table)))
    pure[0, table.index(FUEL)] = 1.0 / table.molar_mass[table.index(FUEL)]
    fuel = np.asarray(phi) * 2.0 * air[table.index("O2")] / -oxygen_excess(table, pure)
    out = air + (fuel * (1.0 - unburned))[:, None] * pure
    out[:, table.index(UNBURNED)] += fuel * unburned * pure[0, table.index(FUEL)]
    return out / (1.0 + fuel)[:, None]


def states(name, n, seed=0, T=(200.0, 5500.0), p=(0.1e5, 600e5), phi=(0.05, 2.5)):
    """Table, amounts, temperatures and pressures at random, a tenth of them exactly stoichiometric."""
    rng, table = np.random.default_rng([seed, len(name)]), TABLES[name]
    T = (max(T[0], table.t_min.max()), min(T[1], table.t_max.min()))  # sulfur dioxide: 300 to 5000 K
    ratio = np.where(np.arange(n) % 10 == 9, 1.0, rng.uniform(*phi, n))
    oxidizer = NO_NITROGEN if seed % 2 else AIR
    amounts = mixture(table, ratio, oxidizer, 0.02 if seed % 3 == 0 else 0.0)
    return table, amounts, *(np.exp(rng.uniform(*np.log(limits), n)) for limits in (T, p))


def given(state, pair):
    """First and second property of a pair from solved states."""
    of = {"T": state.T, "H": state.h, "U": state.u, "S": state.s, "P": state.p, "V": state.v}
    return of[pair[0]], of[pair[1]]


def bits(state):
    return {k: getattr(state, k).tobytes() for k in ("T", "p", "v", "u", "h", "s", "amounts", "status", "iterations")}


@pytest.mark.parametrize("pair", PAIRS)
@pytest.mark.parametrize("name", TABLES)
def test_equilibrium_agrees_with_the_reference(name, pair):
    table, amounts, T, p = states(name, 40, seed=PAIRS.index(pair))
    x, y = given(BatchGas().state(table, "TP", T, p, amounts, "equilibrium"), pair)
    own = BatchGas().state(table, pair, x, y, amounts, "equilibrium")
    other = CanteraGas().state(table, pair, x, y, amounts, "equilibrium")
    assert own.status.tolist() == other.status.tolist() == [0] * 40
    assert pytest.approx(other.T, rel=1e-8) == own.T
    assert own.p == pytest.approx(other.p, rel=1e-8)
    fractions, reference = own.mole_fractions(), other.mole_fractions()
    apart = np.where(reference > 1e-10, np.abs(fractions - reference), 0.0)
    # traces at exact stoichiometry: the reference's oxygen balance is open by as much as they differ
    still_open = np.abs(oxygen_excess(table, other.amounts) - oxygen_excess(table, amounts)) / total(other.amounts)
    assert (apart <= np.maximum(1e-6 * reference, 10.0 * still_open[:, None])).all()


@pytest.mark.parametrize("name", TABLES)
def test_every_state_closes_its_elements_and_meets_its_pair(name):
    table, amounts, T, p = states(name, 3000, seed=4)
    base = BatchGas().state(table, "TP", T, p, amounts, "equilibrium")
    assert (base.status == Status.OK).all()
    for pair in PAIRS:
        x, y = given(base, pair)
        state = BatchGas().state(table, pair, x, y, amounts, "equilibrium")
        assert (state.status == Status.OK).all()
        want = weighted(amounts, table.atoms)
        assert np.abs(weighted(state.amounts, table.atoms) - want).max() < 1e-14 * want.max()
        assert pytest.approx(T, rel=1e-9) == state.T
        first, second = given(state, pair)
        assert second == pytest.approx(y, rel=1e-15 if pair != "ST" else 1e-14)
        assert first == pytest.approx(x, rel=1e-12, abs=1e-12 * np.abs(x).max())


def test_traces_keep_their_balance_at_exact_stoichiometry():
    """Carbon monoxide and oxygen from carbon dioxide alone stand two to one, however few they are."""
    table = TABLES["carbon-monoxide"]
    amounts = np.tile(table.amounts({"CO2": 1.0, "Ar": 3.0}), (5, 1))
    T = np.array([500.0, 700.0, 900.0, 1200.0, 1600.0])
    x = BatchGas().state(table, "TP", T, np.full(5, 10e5), amounts, "equilibrium").mole_fractions()
    co, o2, o = (x[:, table.index(k)] for k in ("CO", "O2", "O"))
    assert co == pytest.approx(2.0 * o2 + o, rel=1e-9)
    assert (co < 1e-3).all()
    assert co[0] < 1e-15


@pytest.mark.parametrize("pair", PAIRS)
def test_frozen_states_agree_with_the_array_code(pair):
    table, amounts, T, p = states("diesel", 500, seed=2, T=(210.0, 4000.0))
    x, y = given(frozen_state(table, "TP", T, p, amounts), pair)
    own, other = BatchGas().state(table, pair, x, y, amounts), frozen_state(table, pair, x, y, amounts)
    assert own.status.tolist() == other.status.tolist()
    for key in ("T", "p", "v", "u", "h", "s", "cp", "sound"):
        a, b = getattr(own, key), getattr(other, key)
        assert a == pytest.approx(b, rel=3e-12, abs=1e-11 * np.nanmax(np.abs(b)))


@pytest.mark.parametrize("chemistry", ["frozen", "equilibrium"])
def test_what_cannot_be_is_told_as_the_reference_tells_it(chemistry):
    table = TABLES["diesel"]
    amounts = mixture(table, np.array([0.5, 0.5, 0.5, 0.5, 3.5, 0.5]))
    x = np.array([np.nan, 2000.0, 7000.0, -5.0, 2000.0, 2000.0])
    y = np.array([1e5, -1e5, 1e5, 1e5, 1e5, 700e5])
    own, other = (engine.state(table, "TP", x, y, amounts, chemistry) for engine in (BatchGas(), CanteraGas()))
    assert [Status(s) for s in own.status] == [Status(s) for s in other.status]
    assert np.isnan(own.T).tolist() == np.isnan(other.T).tolist()
    empty = BatchGas().state(table, "TP", x[:0], y[:0], amounts[:0], chemistry)
    assert len(empty.T) == 0


@pytest.mark.parametrize("chemistry", ["frozen", "equilibrium"])
@pytest.mark.parametrize("pair", PAIRS)
def test_no_bit_depends_on_company_or_order(pair, chemistry):
    table, amounts, T, p = states("methane", 403, seed=3)
    x, y = given(BatchGas().state(table, "TP", T, p, amounts, "equilibrium"), pair)
    whole = BatchGas().state(table, pair, x, y, amounts, chemistry)
    order = np.random.default_rng(1).permutation(403)
    mixed = BatchGas().state(table, pair, x[order], y[order], amounts[order], chemistry)
    for key in ("T", "p", "v", "u", "h", "s", "amounts", "status", "iterations"):
        assert getattr(mixed, key).tobytes() == getattr(whole, key)[order].tobytes(), key
    for i in (0, 17, 128, 402):
        alone = BatchGas().state(table, pair, x[i : i + 1], y[i : i + 1], amounts[i : i + 1], chemistry)
        assert alone.T.tobytes() == whole.T[i : i + 1].tobytes()
        assert alone.amounts.tobytes() == whole.amounts[i : i + 1].tobytes()


FRESH = """
import hashlib, sys
sys.path.insert(0, {folder!r})
import numpy as np
import test_compiled_ideal as t
gas = t.BatchGas()
table, amounts, T, p = t.states("diesel", 200, seed=6)
x, y = t.given(gas.state(table, "TP", T, p, amounts, "equilibrium"), "SV")
s = gas.state(table, "SV", x, y, amounts, "equilibrium")
print(hashlib.sha256(b"".join(t.bits(s).values())).hexdigest())
"""


def test_code_compiled_now_and_code_from_disk_give_the_same_bits(tmp_path):
    run = [sys.executable, "-c", FRESH.format(folder=os.path.dirname(__file__))]
    environment = os.environ | {"NUMBA_CACHE_DIR": str(tmp_path)}
    first, second = (subprocess.run(run, env=environment, capture_output=True, text=True, check=True).stdout for _ in range(2))
    assert len(first.strip()) == 64
    assert first == second
    assert any(tmp_path.rglob("*.nbc")), "nothing was kept on disk"
    table, amounts, T, p = states("diesel", 200, seed=6)
    x, y = given(BatchGas().state(table, "TP", T, p, amounts, "equilibrium"), "SV")
    here = bits(BatchGas().state(table, "SV", x, y, amounts, "equilibrium"))
    assert hashlib.sha256(b"".join(here.values())).hexdigest() == first.strip()


ENGINE_BOX = {"T": (1000.0, 3200.0), "p": (1e5, 300e5), "phi": (0.2, 1.6)}
STEPS = {"TP": 3.3, "TV": 3.3, "HP": 3.9, "UV": 3.9, "SP": 4.1, "SV": 4.1, "ST": 5.5}


@pytest.mark.parametrize("pair", PAIRS)
def test_newton_takes_few_steps(pair):
    """A guard against a slip that costs no digit but time: mean and largest count of steps in the engine's range."""
    table, amounts, T, p = states("diesel", 4000, seed=2, **ENGINE_BOX)
    base = BatchGas().state(table, "TP", T, p, amounts, "equilibrium")
    wide = base.amounts[:, table.index("CH4")] > 1e-3 * total(base.amounts)
    x, y = given(base, pair)
    steps_taken = BatchGas().state(table, pair, x, y, amounts, "equilibrium").iterations[~wide]
    assert steps_taken.mean() < STEPS[pair]
    assert steps_taken.max() < 30


VECTOR = {
    balances.evaluate: lambda: (_lanes(), np.zeros(18 * rows.REACTIONS)),
    balances.amounts: lambda: (_lanes(),),
    balances.balances: lambda: (_lanes(),),
    balances.heats: lambda: (_lanes(),),
    finish.close: lambda: (_lanes(), np.ones((5, rows.SPECIES))),
    finish.properties: lambda: (_lanes(), rows.SV, 8314.0, 1e5),
    steps.amount_of_gas: lambda: (_lanes(),),
    steps.heat_balance: lambda: (_lanes(), True, 0.0),
    steps.move: lambda: (_lanes(), True, True),
    steps.foresee: lambda: (_lanes(),),
    guess._size: lambda: (np.ones(rows.LOADED * rows.BLOCK), 1.0),
    guess._temperature: lambda: (np.ones(rows.LOADED * rows.BLOCK), np.zeros(36), True, 1.0, 0.0),
    guess._first_guess: lambda: (np.ones(rows.LOADED * rows.BLOCK),),
    guess._two_constants: lambda: (np.ones(rows.LOADED * rows.BLOCK), np.zeros(18 * rows.REACTIONS)),
    guess._basis: lambda: (np.ones(rows.LOADED * rows.BLOCK), np.ones((7, 18))),
    fixed._thermal: lambda: (np.ones(fixed.ROWS * vector_math.LANES),),
    fixed._newton: lambda: (np.ones(fixed.ROWS * vector_math.LANES), fixed.SV),
    fixed._mix: lambda: (
        np.ones(fixed.ROWS * vector_math.LANES), np.ones((16, 5)), 0, 16, np.ones((5, fixed.WIDTH)), np.ones((2, 5)),
    ),
}  # fmt: skip


def _lanes():
    return np.ones(rows.ROWS * vector_math.LANES)


@pytest.mark.skipif(platform.machine() not in ("x86_64", "AMD64"), reason="reads x86 assembly")
@pytest.mark.parametrize("function", VECTOR, ids=lambda f: f.__name__)
def test_loops_over_lanes_are_vector_instructions(function):
    """The compiler drops vectors without a word, at two to four times the cost: count them in fresh code."""
    fresh = numba.njit(**{k: function.targetoptions[k] for k in ("nogil", "error_model", "fastmath")})(function.py_func)
    fresh(*VECTOR[function]())
    (text,) = fresh.inspect_asm().values()
    packed = len(re.findall(r"\bv?(?:fn?m(?:add|sub)\d*|mul|add|sub|div)pd\b", text))
    scalar = len(re.findall(r"\bv?(?:fn?m(?:add|sub)\d*|mul|add|sub|div)sd\b", text))
    assert packed >= 8
    assert packed >= 0.1 * scalar  # some loops keep a scalar twin, unrolled, for arrays that overlap, which ours never do


def test_species_beyond_the_set_go_to_the_generic_solver():
    table = build(fuels.load("methane").vapour, extra=("C2H2,acetylene", "CH3"))
    assert not constants(table).whole
    amounts = mixture(table, np.array([0.6, 1.8]))
    T, p = np.array([2200.0, 1500.0]), np.array([20e5, 50e5])
    own, other = (engine.state(table, "TP", T, p, amounts, "equilibrium") for engine in (BatchGas(), CanteraGas()))
    assert own.status.tolist() == other.status.tolist() == [0, 0]
    assert own.h == pytest.approx(other.h, rel=1e-8)


def test_rich_cold_gas_is_handed_back_and_solved():
    table = TABLES["methane"]
    amounts = mixture(table, np.array([1.5, 2.0]))
    numbers, found, out = constants(table), np.empty_like(amounts), np.empty((8, 2))
    code, taken = np.zeros(2, np.int8), np.zeros(2, np.int32)
    nested.solve(
        rows.TP, np.array([2400.0, 800.0]), np.array([50e5, 50e5]), amounts, numbers.linear, numbers.base, numbers.reactions,
        numbers.atoms, numbers.columns, numbers.stays, (8314.46261815324, table.reference_pressure),
        out, found, code, taken,
    )  # fmt: skip
    assert code.tolist() == [rows.DONE, rows.WIDE]
    state = BatchGas().state(table, "TP", np.array([800.0]), np.array([50e5]), amounts[1:], "equilibrium")
    assert state.status[0] == Status.OK
    assert state.mole_fractions()[0, table.index("CH4")] > 0.02


def test_vector_functions_are_those_of_numpy():
    rng = np.random.default_rng(0)
    x = rng.uniform(-690.0, 690.0, 20000)
    assert [vector_math.exp(float(v)) for v in x] == pytest.approx(np.exp(x), rel=5e-16)
    for values in (np.exp(x), rng.uniform(0.5, 2.0, 20000)):
        want = np.log(values)
        own = np.array([vector_math.log(float(v)) for v in values])
        assert (np.abs(own - want) <= 4e-16 * np.maximum(np.abs(want), 1.0)).all()
