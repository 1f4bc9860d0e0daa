"""The whole input space: every case solves with closed ledgers, or ends in a named status with a reason."""

from __future__ import annotations

import json

import numpy as np
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import fuelair
from fuelair import fuel as fuels
from fuelair.errors import InputError, UnsolvedError
from fuelair.gas.engine import Status

EXAMPLES = 60
ADMISSIONS = ("premixed", "port-liquid", "early-direct", "direct")
STATUSES = {s.label: s.reason for s in Status if s is not Status.OK}
NEVER = ("no-fresh-charge", "not-converged", "no-solution", "ledger-open")
"""Statuses that no case of this space earns: exhaust pressure is at most 2.5 times the intake's, so there is always room."""
LEDGER = 1e-8


def logarithmic(low, high):
    return st.floats(0.0, 1.0).map(lambda t: float(low * (high / low) ** t))


@st.composite
def cases(draw):
    pressure = draw(logarithmic(0.3e5, 10e5))
    trapped = draw(st.booleans())
    names = ("pressure", "temperature") if trapped else ("intake_pressure", "intake_temperature")
    charge = {
        "equivalence_ratio": draw(logarithmic(0.05, 3.0)),
        names[0]: pressure,
        names[1]: draw(st.floats(250.0, 500.0)),
        "exhaust_pressure": pressure * draw(st.sampled_from([1.0, 0.8, 1.3, 2.5])),
        "residual_fraction": draw(st.sampled_from([0.0, 0.05, 0.3] if trapped else [0.0, 0.05, "solve"])),
        "egr_fraction": draw(st.sampled_from([0.0, 0.0, 0.2, 0.5])),
        "relative_humidity": draw(st.sampled_from([0.0, 0.6])),
    }
    mode = draw(st.sampled_from(["constant-volume", "constant-pressure", "pressure-limited"]))
    combustion = {"heat_addition": mode, "combustion_efficiency": draw(st.sampled_from([1.0, 0.97]))}
    if mode == "pressure-limited":
        combustion["pressure_limit"] = max(draw(logarithmic(20e5, 400e5)), 1.01 * pressure)
    engine = {"compression_ratio": draw(st.floats(4.0, 30.0))}
    if draw(st.booleans()):
        engine |= {
            "stroke": 0.2,
            "rod_length": 0.35,
            "bore": 0.15,
            "intake_closing": draw(st.floats(-230.0, -120.0)),
            "exhaust_opening": draw(st.floats(110.0, 180.0)),
        }
    gas = draw(st.sampled_from([{}, {}, {"expansion": "frozen"}, {"freeze_temperature": 1900.0}, {"compression_exponent": 1.32}]))
    return {
        "engine": engine,
        "fuel": {"name": draw(st.sampled_from(fuels.names())), "admission": draw(st.sampled_from(ADMISSIONS))},
        "charge": charge,
        "combustion": combustion,
        "gas": gas,
    }


def judge(data):
    """Solve a case and judge the outcome; returns the label of its headline."""
    failure: UnsolvedError | InputError | None = None
    try:
        a = fuelair.assess(fuelair.Case.from_dict(data))
    except (UnsolvedError, InputError) as error:
        failure = error
    if isinstance(failure, UnsolvedError):
        assert failure.reason.startswith(STATUSES[failure.status])
        assert failure.status not in NEVER
        return failure.status
    if failure is not None:
        (problem,) = failure.problems
        if problem.key == "fuel.admission":
            assert data["fuel"]["admission"] == "port-liquid"
            assert fuels.load(data["fuel"]["name"]).phase(298.15, 101325.0) == "gas"
            return "gas in the port"
        assert problem.key == "combustion.pressure_limit"
        assert "above" in problem.allowed
        return "input"
    json.dumps(a.to_dict(), allow_nan=False)
    assert a.status() is Status.OK
    assert a.charge.status[0] == Status.OK
    for model, result in a.results.items():
        if result.status[0] != Status.OK:
            assert a.status(model).label in STATUSES
            assert set(a.figures(model).values()) == {None}
            continue
        for key, value in result.figures.items():
            assert np.isfinite(value[0]), (model, key)
        for balance, residual in result.ledger.items():
            assert abs(float(residual[0])) < LEDGER, (model, balance)
        if model == "air-cold":
            continue
        for point in result.points:
            assert np.isfinite(point.state.T[0]), (model, point.name)
            if point.name in ("trapped", "compressed", "burned", "release"):
                assert 200.0 <= point.state.T[0] <= 6000.0, (model, point.name)
                assert point.state.p[0] <= 600e5, (model, point.name)
    e = a.exergy
    scale = float(e.fuel[0])
    assert e.destroyed_by_entropy[0] > 0.0  # entropy never falls in combustion, the fuel's own counted
    assert abs(float(e.destroyed_by_entropy[0] - e.destroyed_by_balance[0])) < 1e-8 * scale
    if data["fuel"]["admission"] != "direct":
        burned = a.results[a.headline].point("burned").state
        assert burned.s[0] > a.results[a.headline].point("compressed").state.s[0]
    return "ok"


@settings(max_examples=EXAMPLES, derandomize=True, deadline=None, database=None, suppress_health_check=[HealthCheck.too_slow])
@given(cases())
def test_every_case_solves_or_says_why_not(data):
    judge(data)
