"""The compiled real gas: everything that holds for `RealGas`, the same states and statuses, residuals, bits, steps.

By hand over more states: ``python tests/test_compiled_real.py 10000``.
"""

from __future__ import annotations

import hashlib
import importlib.util
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.gas.compiled import generic, virial
from fuelair.gas.compiled.real_batch import RealBatchGas
from fuelair.gas.compiled.real_fixed import fixed
from fuelair.gas.complete import oxygen_excess, solid_carbon
from fuelair.gas.engine import Status, total
from fuelair.gas.polynomials import R
from fuelair.gas.real_engine import RealGas
from fuelair.gas.real_gas import density, residual, valid, virial_table
from fuelair.gas.species import build

PAIRS = ("TP", "TV", "HP", "UV", "SP", "SV", "ST")
CHEMISTRIES = ("frozen", "complete", "equilibrium")
FUELS = ("n-dodecane", "methanol", "ammonia", "hydrogen", "marine-residual")
OWN, REFERENCE = RealBatchGas(), RealGas()
COLD = {"T": (200.0, 800.0), "p": (0.1e5, 600e5), "phi": (0.05, 2.5)}
WIDE = {"T": (200.0, 5500.0), "p": (0.1e5, 600e5), "phi": (0.05, 2.5)}
ENGINE = {"T": (700.0, 3200.0), "p": (1e5, 400e5), "phi": (0.2, 1.6)}
CLAIMED = {"T": (800.0, 3500.0), "p": (1e5, 450e5), "phi": (0.1, 1.9)}


def load(name, **replaced):
    """Another file of tests, with some of its names replaced."""
    spec = importlib.util.spec_from_file_location(f"fuelair_compiled_{name}", Path(__file__).with_name(f"{name}.py"))
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    for key, value in replaced.items():
        setattr(module, key, value)
    return module


same = load("test_real_engine", ENGINE=OWN, RealGas=RealBatchGas)
globals().update({name: test for name, test in vars(same).items() if name.startswith("test_")})
globals()["solved"] = same.solved


def box(name, n, seed, T, p, phi):
    """Table, amounts, T and p at random; in air, in oxygen, in anything between; some with fuel that does not react."""
    rng, table = np.random.default_rng([seed, len(name)]), build(fuels.load(name).vapour)
    hot = rng.uniform(max(T[0], table.t_min.max()), min(T[1], table.t_max.min()), n)
    pressure, ratio = np.exp(rng.uniform(*np.log(p), n)), rng.uniform(*phi, n)
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


def away(state, T, p):
    """Whether a state is not the one at ``T`` and ``p``; True for none."""
    return ~(np.abs(state.T / T - 1.0) < 1e-9) | ~(np.abs(state.p / p - 1.0) < 1e-9)


def compare(name, pair, chemistry, n, seed, limits):
    """Both engines at states of known T and p: the largest differences where both succeed, and what statuses part them.

    Returned: largest relative difference of T; of p, v, cp and sound; of mole fractions above 1e-10; counts of states
    with equal status, found here alone, told otherwise by a reference that misses T or p, and unexplained.
    """
    table, amounts, T, p = box(name, n, seed, **limits)
    base = OWN.state(table, "TP", T, p, amounts, chemistry)
    x, y = (T, p) if pair == "TP" else given(base, pair)
    own, other = (engine.state(table, pair, x, y, amounts, chemistry) for engine in (OWN, REFERENCE))
    both = (own.status == Status.OK) & (other.status == Status.OK)
    apart = [np.abs(getattr(own, k) / getattr(other, k) - 1.0)[both] for k in ("T", "p", "v", "cp", "sound")]
    a, b = own.mole_fractions()[both], other.mole_fractions()[both]
    shares = np.abs(a[b > 1e-10] / b[b > 1e-10] - 1.0)
    differ = own.status != other.status
    here = differ & (other.status == Status.NO_SOLUTION) & ~away(own, T, p)
    lost = differ & ~here & away(other, T, p) & (own.status == Status.NO_SOLUTION)
    most = [float(np.max(k, initial=0.0)) for k in (apart[0], np.concatenate(apart[1:]), shares)]
    return *most, [int(k.sum()) for k in (~differ, here, lost, differ & ~here & ~lost)]


@pytest.mark.parametrize("pair", PAIRS)
@pytest.mark.parametrize("chemistry", CHEMISTRIES)
@pytest.mark.parametrize("name", FUELS)
def test_where_the_model_holds_both_engines_give_the_same_states(name, chemistry, pair):
    T, rest, shares, counts = compare(name, pair, chemistry, 24, PAIRS.index(pair), CLAIMED)
    assert T < 1e-10
    assert rest < 1e-9
    assert shares < 1e-7
    assert counts[0] >= 15
    assert counts[1:] == [0, 0, 0]


@pytest.mark.parametrize("chemistry", CHEMISTRIES)
@pytest.mark.parametrize("name", ["ammonia", "methanol"])
def test_near_condensing_a_different_status_has_its_reason(name, chemistry):
    """Cold and dense, where the reference finds no state that is there, or one at another pressure than that given."""
    T, rest, shares, counts = compare(name, "TP", chemistry, 300, 1, COLD)
    assert T < 1e-10
    assert rest < 1e-9
    assert shares < 1e-6
    assert counts[3] == 0
    assert counts[0] > 200
    T, rest, shares, counts = compare(name, "SP", chemistry, 300, 1, COLD)
    assert T < 1e-10
    assert rest < 1e-9
    assert shares < 1e-6
    assert counts[1] > 0  # here the bracket answers


@pytest.mark.parametrize("chemistry", CHEMISTRIES)
def test_a_state_that_is_claimed_has_the_pressure_that_was_given(chemistry):
    for name in FUELS:
        table, amounts, T, p = box(name, 300, 5, **COLD)
        state = OWN.state(table, "TP", T, p, amounts, chemistry)
        good = np.isin(state.status, (Status.OK, Status.OUTSIDE_DATA))
        assert good.sum() > 150
        assert np.abs(state.p / p - 1.0)[good].max() < 1e-13
        assert np.isnan(state.p[~good]).all()


# --- residual functions -------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def mixtures():
    """Virial data of both kinds of code, burned mixtures, T and density; cold, dense and odd ones among them."""
    table, amounts, T, p = box("methanol", 60, 2, **WIDE)
    found = generic.equilibrate(table, "TP", np.maximum(T, 900.0), p, amounts)
    rho = p / (R * T) * np.random.default_rng(0).uniform(0.5, 1.3, len(T))
    return virial_table(table), found.amounts, T, rho


def at(vt, n, T, rho):
    """Coefficients, residuals, and potentials with slopes of the fluids, one state."""
    f, blend = virial.fluids_of(vt), virial.blend_for(virial.fluids_of(vt))
    virial.contract(f, n, float(total(n[None])[0]), blend)
    k = virial.at_temperature(f, T, blend)
    r = virial.state(f, k, rho)
    virial.potentials(f, k, r, rho, blend)
    return f, k, r, blend.fluids[virial.MU :].copy()


def test_residual_functions_are_those_of_the_array_code(mixtures):
    vt, amounts, T, rho = mixtures
    x = amounts / total(amounts)[:, None]
    other, pressures = residual(vt, T, rho, x), 10.0 ** np.random.default_rng(1).uniform(4.0, 7.7, len(T))
    roots, claimed = density(vt, T, pressures, x), valid(vt, T, rho, x)
    for i in range(len(T)):
        f, k, r, potentials = at(vt, amounts[i], T[i], rho[i])
        for name in ("Z", "dZ_drho_rho", "dZ_dT_T", "u", "s", "cv"):
            assert getattr(r, name) == pytest.approx(getattr(other, name)[i], rel=1e-12, abs=1e-13), name
        mu = (vt.mapping * potentials[0]).sum(axis=1)
        assert mu == pytest.approx(other.mu[i], rel=1e-12, abs=1e-13)
        assert virial.valid(f, k, T[i], rho[i]) == claimed[i]
        root = virial.density(f, k, T[i], pressures[i])
        if np.isfinite(root):
            assert root == pytest.approx(roots[i], rel=1e-13)
            assert root * R * T[i] * virial.state(f, k, root).Z == pytest.approx(pressures[i], rel=1e-13)


def test_slopes_of_the_potentials_are_their_differences(mixtures):
    """A wrong slope would only slow the Newton down, which no other test would see."""
    vt, amounts, T, rho = mixtures
    step = 1e-5
    for i in range(len(T)):
        _, _, _, here = at(vt, amounts[i], T[i], rho[i])
        for row, hotter, denser in ((1, step, 0.0), (2, 0.0, step)):
            up, down = (at(vt, amounts[i], T[i] * np.exp(q * hotter), rho[i] * np.exp(q * denser))[3][0] for q in (1, -1))
            scale = 1.0 + np.abs(here[row]).max()
            assert (up - down) / (2.0 * step) == pytest.approx(here[row], abs=1e-8 * scale)


# --- bits, steps, brackets ----------------------------------------------------------------------------------------


@pytest.mark.parametrize("pair", ["HP", "UV", "SP", "SV", "ST"])
def test_the_bracket_finds_the_state_of_the_newton(pair):
    table, amounts, T, p = box("n-dodecane", 40, 3, **CLAIMED)
    vt = virial_table(table)
    found = generic.equilibrate(table, "TP", T, p, amounts, departure=vt)
    x, y = given(fixed(table, vt, "TP", T, p, found.amounts), pair)
    other = generic.between(table, pair, x, y, amounts, departure=vt)
    assert not other.failed.any()
    assert pytest.approx(T, rel=1e-12) == other.T
    a, b = (k.amounts / total(k.amounts)[:, None] for k in (other, found))
    assert a == pytest.approx(b, rel=1e-8, abs=1e-20)


STEPS = {"TP": 4.8, "TV": 4.8, "HP": 6.5, "UV": 6.5, "SP": 6.4, "SV": 6.4, "ST": 6.3}


@pytest.mark.parametrize("pair", PAIRS)
def test_newton_takes_few_steps(pair):
    table, amounts, T, p = box("n-dodecane", 2000, 6, **ENGINE)
    base = OWN.state(table, "TP", T, p, amounts, "equilibrium")
    state = OWN.state(table, pair, *given(base, pair), amounts, "equilibrium")
    steps = state.iterations[base.status == Status.OK]
    assert len(steps) > 1800
    assert steps.mean() < STEPS[pair]
    assert steps.max() < 40


FRESH = """
import hashlib, sys
sys.path.insert(0, {folder!r})
import test_compiled_real as t
print(t.digest())
"""


def digest():
    """Hash of states of all chemistries."""
    table, amounts, T, p = box("n-dodecane", 100, 7, **ENGINE)
    h = hashlib.sha256()
    for chemistry in CHEMISTRIES:
        state = OWN.state(table, "TP", T, p, amounts, chemistry)
        again = OWN.state(table, "SV", state.s, state.v, amounts, chemistry)
        for one in (state, again):
            h.update(b"".join(getattr(one, k).tobytes() for k in ("T", "p", "u", "s", "cp", "amounts", "status", "iterations")))
    return h.hexdigest()


def test_code_compiled_now_and_code_from_disk_give_the_same_bits(tmp_path):
    run = [sys.executable, "-c", FRESH.format(folder=os.path.dirname(__file__))]
    environment = os.environ | {"NUMBA_CACHE_DIR": str(tmp_path)}
    first, second = (subprocess.run(run, env=environment, capture_output=True, text=True, check=True).stdout for _ in range(2))
    assert first == second
    assert first.strip() == digest()


if __name__ == "__main__":
    size, seed = int(sys.argv[1]), int((*sys.argv[2:], "1")[0])
    for limits in (ENGINE, WIDE, COLD):
        for chemistry in CHEMISTRIES:
            for letters in PAIRS:
                parts = [compare(fuel, letters, chemistry, size // len(FUELS), seed, limits) for fuel in FUELS]
                worst = [max(part[k] for part in parts) for k in range(3)]
                counts = np.sum([part[3] for part in parts], axis=0)
                line = "{:11s} {}  T {:.1e}  p v cp sound {:.1e}  x {:.1e}  status equal {} here {} lost there {} odd {}"
                sys.stdout.write(line.format(chemistry, letters, *worst, *counts) + "\n")
