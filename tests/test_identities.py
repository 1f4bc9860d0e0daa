"""The identities of thermodynamics, for frozen and for equilibrium gas, over the states of ``identities.toml``."""

from __future__ import annotations

import tomllib
from pathlib import Path

import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.gas.engine import Status, total
from fuelair.gas.mixture import gibbs
from fuelair.gas.polynomials import R
from fuelair.gas.species import build

BOOK = tomllib.loads(Path(__file__).with_name("identities.toml").read_text(encoding="utf-8"))
TOLERANCE = BOOK["tolerances"]
STATES = {s["name"]: s for s in BOOK["state"]}
EQUILIBRIUM = [name for name, s in STATES.items() if s.get("equilibrium")]
TABLE = build(fuels.load("iso-octane").vapour)
STEP = 1e-3
OFFSETS, WEIGHTS = np.array([-2.0, -1.0, 1.0, 2.0]), np.array([1.0, -8.0, 8.0, -1.0]) / 12.0


def at(gas, name, pair, x, y, chemistry):
    n = np.tile(TABLE.amounts(STATES[name]["amounts"]), (len(x), 1))
    state = gas.state(TABLE, pair, x, y, n, chemistry)
    assert (state.status == Status.OK).all()
    return state


def around(gas, name, pair, x, y, chemistry, vary):
    """Five states about one: itself, then four along the varied member of the pair; and the step."""
    first, second = np.full(5, x), np.full(5, y)
    (first if vary == 0 else second)[1:] *= 1.0 + STEP * OFFSETS
    return at(gas, name, pair, first, second, chemistry), STEP * (x if vary == 0 else y)


def slope(values, step):
    return float(np.sum(WEIGHTS * (values[1:] - values[0]))) / step


@pytest.fixture(params=STATES)
def named(request):
    s = STATES[request.param]
    chemistries = ["frozen", "equilibrium"] if s.get("equilibrium") else ["frozen"]
    return request.param, s["temperature"], s["pressure"], chemistries


def close(value, expected, key):
    assert value == pytest.approx(expected, rel=TOLERANCE[key], abs=0.0), key


def test_definitions(gas, named):
    name, T, p, chemistries = named
    for chemistry in chemistries:
        s = at(gas, name, "TP", np.array([T]), np.array([p]), chemistry)
        scale = R * total(s.amounts)[0] * T
        assert abs(s.h[0] - s.u[0] - s.p[0] * s.v[0]) <= TOLERANCE["enthalpy"] * max(scale, abs(s.h[0]))
        close(s.p[0] * s.v[0], scale, "ideal")
        assert s.u[0] + s.p[0] * s.v[0] == pytest.approx(s.h[0], abs=1e-13 * scale + 1e-15 * abs(s.h[0]))


def test_gibbs_energy_is_the_sum_over_species(gas, named):
    name, T, p, chemistries = named
    for chemistry in chemistries:
        s = at(gas, name, "TP", np.array([T]), np.array([p]), chemistry)
        n = s.amounts[0]
        present = n > 0.0
        mu = gibbs(TABLE, s.T)[0][present] + np.log(s.mole_fractions()[0][present] * p / TABLE.reference_pressure)
        close(s.h[0] - T * s.s[0], R * T * float(np.sum(n[present] * mu)), "gibbs")


def test_heat_capacities_and_entropy(gas, named):
    name, T, p, _ = named
    line, step = around(gas, name, "TP", T, p, "frozen", 0)
    close(slope(line.h, step), line.cp[0], "heat_capacity_p")
    close(T * slope(line.s, step), line.cp[0], "entropy_p")
    v = float(line.v[0])
    line, step = around(gas, name, "TV", T, v, "frozen", 0)
    cv = line.cp[0] - R * total(line.amounts)[0]
    close(slope(line.u, step), cv, "heat_capacity_v")
    close(T * slope(line.s, step), cv, "entropy_v")


def test_maxwell(gas, named):
    name, T, p, chemistries = named
    for chemistry in chemistries:
        # an equilibrium derivative carries the solver's tolerance, divided by the step
        worse = 1.0 if chemistry == "frozen" else 1e3
        along_p, step_p = around(gas, name, "TP", T, p, chemistry, 1)
        along_t, step_t = around(gas, name, "TP", T, p, chemistry, 0)
        expected = -slope(along_t.v, step_t)
        assert slope(along_p.s, step_p) == pytest.approx(expected, rel=worse * TOLERANCE["entropy_pressure"]), chemistry
        v = float(along_p.v[0])
        along_v, step_v = around(gas, name, "TV", T, v, chemistry, 1)
        along_t, step_t = around(gas, name, "TV", T, v, chemistry, 0)
        expected = slope(along_t.p, step_t)
        assert slope(along_v.s, step_v) == pytest.approx(expected, rel=worse * TOLERANCE["entropy_volume"]), chemistry


def test_speed_of_sound(gas, named):
    name, T, p, _ = named
    base = at(gas, name, "TP", np.array([T]), np.array([p]), "frozen")
    line, step = around(gas, name, "SV", float(base.s[0]), float(base.v[0]), "frozen", 1)
    close(base.sound[0] ** 2, -(float(base.v[0]) ** 2) * slope(line.p, step), "sound")


@pytest.mark.parametrize("name", EQUILIBRIUM)
def test_no_chemical_work_is_left_over_in_equilibrium(gas, name):
    T, p = STATES[name]["temperature"], STATES[name]["pressure"]
    along, step = around(gas, name, "TP", T, p, "equilibrium", 0)
    close(T * slope(along.s, step), slope(along.h, step), "equilibrium_enthalpy")
    v = float(along.v[0])
    along, step = around(gas, name, "TV", T, v, "equilibrium", 0)
    close(T * slope(along.s, step), slope(along.u, step), "equilibrium_energy")
    base = along
    along, step = around(gas, name, "SV", float(base.s[0]), v, "equilibrium", 1)
    close(-slope(along.u, step), float(base.p[0]), "equilibrium_energy")
    along, step = around(gas, name, "SP", float(base.s[0]), float(base.p[0]), "equilibrium", 1)
    close(slope(along.h, step), v, "equilibrium_enthalpy")


@pytest.mark.parametrize("name", EQUILIBRIUM)
def test_equilibrium_takes_more_heat_than_frozen_gas(gas, name):
    T, p = STATES[name]["temperature"], STATES[name]["pressure"]
    along, step = around(gas, name, "TP", T, p, "equilibrium", 0)
    assert slope(along.h, step) > along.cp[0] * (1.0 + 1e-6)
