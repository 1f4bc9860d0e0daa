"""The whole cycle on a real gas: ledgers, exergy twice, the ladder, compression against Lemmon 2000, refusals."""

from __future__ import annotations

import numpy as np
import pytest

import fuelair
from fuelair import resources
from fuelair.cycle import exergy
from fuelair.cycle.ladder import QUANTITIES
from fuelair.cycle.result import MODELS, REAL_MODEL, REFERENCE_MODEL
from fuelair.cycle.stages import compress
from fuelair.errors import InputError
from fuelair.gas.engine import Status, total
from fuelair.gas.polynomials import R
from fuelair.gas.real_engine import RealGas
from fuelair.gas.species import build

REAL = RealGas()
DEMOS = ("workboat", "hydrogen-genset", "methanol-ferry", "gasoline-launch")
PHI = (0.1, 0.4, 0.8, 1.0, 1.2, 1.6, 2.0)
AIR = {"N2": 0.7812, "O2": 0.2096, "Ar": 0.0092}  # Lemmon et al. 2000, from memory
MODES = {
    "boosted": (
        ("n-dodecane", "direct", "pressure-limited"),
        {"pressure_limit": 250e5, "pressure": 3e5, "temperature": 330.0, "r": 16.0, "residual": None, "exhaust_pressure": 2.5e5},
    ),
    "to 520 bar": (
        ("n-dodecane", "direct", "constant-volume"),
        {"pressure": 3e5, "temperature": 330.0, "r": 16.0, "residual": 0.03},
    ),
    "intake": (
        ("methane", "premixed", "constant-volume"),
        {"pressure": 2e5, "temperature": 330.0, "r": 11.0, "residual": None, "from_intake": True, "combustion_efficiency": 0.98},
    ),
    "constant pressure": (
        ("n-dodecane", "direct", "constant-pressure"),
        {"pressure": 6e5, "temperature": 340.0, "r": 14.0, "residual": 0.02, "egr_fraction": 0.1, "egr_temperature": 350.0},
    ),
}


def case(name):
    return fuelair.Case.read(resources.demos() / f"{name}.toml")


@pytest.fixture(scope="module", params=DEMOS)
def both(request):
    """A demo by its ideal and by its real headline."""
    ideal = case(request.param)
    return fuelair.assess(ideal), fuelair.assess(ideal.replace({"gas.model": "real"}))


@pytest.fixture(scope="module", params=MODES)
def swept(request, make, solve):
    """One mode over phi 0.1 to 2 as a batch."""
    names, given = MODES[request.param]
    return request.param, solve(REAL, *make(*names, equivalence_ratio=np.array(PHI), **given), REAL_MODEL)


# --- the demos ----------------------------------------------------------------------------------------------------


def test_a_demo_closes_in_every_model(both):
    for found in both:
        assert list(found.results)[: len(MODELS)] == list(MODELS)
        for model, result in found.results.items():
            assert result.status[0] == Status.OK, model
            for name, residual in result.ledger.items():
                assert abs(residual[0]) < 1e-9, (model, name)
    assert both[0].headline == REFERENCE_MODEL
    assert both[1].headline == REAL_MODEL


def test_exergy_destroyed_computed_twice_agrees(both):
    for found in both:
        e = found.exergy
        assert abs(e.destroyed_by_entropy - e.destroyed_by_balance)[0] < 1e-9 * e.fuel[0]
        assert 0.1 * e.fuel[0] < e.destroyed_by_entropy[0] < 0.35 * e.fuel[0]
        assert e.destroyed_blowdown[0] > 0.0


def test_the_ladder_adds_up_with_the_real_gas_as_its_last_step(both):
    for found in both:
        last = found.ladder[-1]
        assert (last.lower, last.upper) == (REFERENCE_MODEL, REAL_MODEL)
        assert "real gas" in last.assumption
        first, end = found.results[MODELS[0]].figures, found.results[REAL_MODEL].figures
        for key in QUANTITIES:
            whole = sum(step.change[key] for step in found.ladder)
            assert whole == pytest.approx(float(end[key][0] - first[key][0]), abs=1e-9 * abs(float(end[key][0])))
        assert last.change["compression_pressure_Pa"] > 0.003 * end["compression_pressure_Pa"][0]


def test_the_headline_changes_a_model_only_through_the_trapped_state(both):
    """The charge is trapped by the headline's engine; no figure is more than five times as sensitive to it in relative terms."""
    ideal, real = (found.charge for found in both)
    moved = max(
        abs(float(real.trapped.T[0] / ideal.trapped.T[0] - 1.0)),
        abs(float(real.residual_fraction[0] - ideal.residual_fraction[0])),
        abs(float(real.fuel_mass[0] / ideal.fuel_mass[0] - 1.0)),
        float(np.max(np.abs(real.trapped.amounts - ideal.trapped.amounts)) / total(ideal.trapped.amounts)[0]),
    )
    assert moved < 1e-3
    for model in MODELS:
        a, b = (found.results[model].figures for found in both)
        for key in QUANTITIES:
            assert abs(float(b[key][0] / a[key][0] - 1.0)) <= 5.0 * moved + 1e-13, (model, key)


def test_compression_ends_higher_and_the_ideal_models_do_not_notice(both):
    ideal, real = (both[1].results[m].figures for m in (REFERENCE_MODEL, REAL_MODEL))
    assert real["compression_pressure_Pa"][0] > ideal["compression_pressure_Pa"][0]
    assert real["compression_temperature_K"][0] > ideal["compression_temperature_K"][0]
    state = both[1].results[REAL_MODEL].point("compressed").state
    Z = float(state.p[0] * state.v[0] / (R * total(state.amounts)[0] * state.T[0]))
    assert 1.0 < Z < 1.12
    other = both[1].results[REFERENCE_MODEL].point("compressed").state
    assert float(other.p[0] * other.v[0] / (R * total(other.amounts)[0] * other.T[0])) == pytest.approx(1.0, abs=1e-12)


# --- phi 0.1 to 2 -------------------------------------------------------------------------------------------------


def test_lean_to_rich_closes(swept):
    name, run = swept
    assert (run.result.status == Status.OK).all()
    for key, residual in run.result.ledger.items():
        assert np.abs(residual).max() < 1e-9, key
    e = exergy.balance(run)
    assert (np.abs(e.destroyed_by_entropy - e.destroyed_by_balance) < 1e-9 * e.fuel).all()
    assert (e.destroyed_by_entropy > 0.05 * e.fuel).all()
    assert (e.destroyed_blowdown > 0.0).all()
    if name == "to 520 bar":
        assert run.result.figures["peak_pressure_Pa"].max() > 500e5


def test_a_batch_is_its_cases(swept, make, solve):
    name, run = swept
    names, given = MODES[name]
    for i in (0, 5):
        alone = solve(REAL, *make(*names, equivalence_ratio=PHI[i], **given), REAL_MODEL)
        for key, value in alone.result.figures.items():
            assert value[0] == pytest.approx(run.result.figures[key][i], rel=1e-11), key


def test_only_some_of_a_batch_recirculate(make, solve):
    settings = {"temperature": 330.0, "residual": 0.03, "egr_temperature": 330.0}
    mixed = solve(REAL, *make("methane", "premixed", egr_fraction=np.array([0.0, 0.1]), **settings), REAL_MODEL)
    assert (mixed.result.status == Status.OK).all()
    alone = solve(REAL, *make("methane", "premixed", egr_fraction=0.1, **settings), REAL_MODEL)
    assert mixed.result.figures["peak_temperature_K"][1] == pytest.approx(
        alone.result.figures["peak_temperature_K"][0], rel=1e-12
    )


def test_work_is_the_area_of_the_diagram(make, solve):
    """Compression and expansion work against the integral of the engine's own pressures."""
    names, given = MODES["to 520 bar"]
    run = solve(REAL, *make(*names, equivalence_ratio=0.6, **given), REAL_MODEL)
    at, weights = np.polynomial.legendre.leggauss(24)
    table = run.charge.recipe.table

    def area(start, end, chemistry):
        width = float(np.log(end.v[0] / start.v[0]))
        v = start.v[0] * np.exp(0.5 * width * (1.0 + at))
        n = np.repeat(start.amounts, len(at), axis=0)
        p = REAL.state(table, "SV", np.full(len(at), start.s[0]), v, n, chemistry).p
        return 0.5 * width * float(np.sum(weights * p * v))

    trapped = run.charge.trapped
    # the polynomials break at 1000 K, where cp has a kink: the rule loses some digits there
    assert -area(trapped, run.compression.state, "frozen") == pytest.approx(run.compression.work[0], rel=1e-6)
    given_up = float(run.burn.state.u[0] - run.release.u[0])
    assert area(run.burn.state, run.release, "equilibrium") == pytest.approx(given_up, rel=1e-6)


# --- compression against the reference equation -------------------------------------------------------------------


@pytest.mark.parametrize(
    ("bar", "published", "within"),
    [(3.0, 145.675 / 136.152, 0.003), (6.0, 313.73 / 272.30, 0.006)],  # computed with CoolProp 8.0.0, Lemmon et al. 2000
)
def test_the_real_gas_ends_compression_of_air_higher(gas, bar, published, within):
    table = build()
    amounts = table.amounts(AIR)[None]
    ends = []
    for engine in (REAL, gas):
        start = engine.state(table, "TP", np.array([330.0]), np.array([bar * 1e5]), amounts)
        ends.append(compress(engine, table, start, np.array([16.0])).state)
    assert float(ends[0].p[0] / ends[1].p[0]) == pytest.approx(published, rel=within)
    assert float(ends[0].T[0]) > float(ends[1].T[0])


# --- polytropic ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("exponent", [1.0, 1.28, 1.36, 1.45])
def test_polytropic_compression_books_its_heat(exponent):
    table = build()
    start = REAL.state(table, "TP", np.array([330.0, 350.0]), np.array([3e5, 6e5]), np.tile(table.amounts(AIR), (2, 1)))
    end = compress(REAL, table, start, np.full(2, 14.0), np.full(2, exponent))
    assert end.state.p == pytest.approx(start.p * 14.0**exponent, rel=1e-11)
    assert end.state.v == pytest.approx(start.v / 14.0, rel=1e-15)
    at, weights = np.polynomial.legendre.leggauss(24)
    width = np.log(14.0)
    work = sum(
        0.5 * width * w * start.p * start.v * np.exp((exponent - 1.0) * 0.5 * width * (1.0 + a))
        for a, w in zip(at, weights, strict=True)
    )
    assert end.work == pytest.approx(work, rel=1e-12)
    assert end.heat == pytest.approx(end.state.u - start.u - work, rel=1e-9)
    isentropic = compress(REAL, table, start, np.full(2, 14.0))
    assert ((end.heat > 0.0) == (end.state.s > start.s)).all()
    assert ((end.state.p > isentropic.state.p) == (end.state.s > start.s)).all()


def test_a_case_with_polytropic_compression_closes():
    given = case("workboat").replace({"gas.model": "real", "gas.compression_exponent": 1.35})
    found = fuelair.assess(given)
    result = found.results[REAL_MODEL]
    assert result.status[0] == Status.OK
    assert "entropy_compression" not in result.ledger
    assert max(abs(float(v[0])) for v in result.ledger.values()) < 1e-9
    e = found.exergy
    assert abs(e.destroyed_by_entropy - e.destroyed_by_balance)[0] < 1e-9 * e.fuel[0]
    free = fuelair.assess(case("workboat").replace({"gas.model": "real"})).results[REAL_MODEL]
    assert result.figures["compression_pressure_Pa"][0] != free.figures["compression_pressure_Pa"][0]


# --- refusals -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("key", "value"), [("gas.expansion", "frozen"), ("gas.freeze_temperature", "1800 K")])
def test_the_real_model_refuses_what_it_does_not_do(key, value):
    with pytest.raises(InputError) as caught:
        case("workboat").replace({"gas.model": "real", key: value})
    text = str(caught.value)
    assert key in text
    assert "ideal" in text


def test_the_real_model_accepts_equilibrium_written_out():
    assert case("workboat").replace({"gas.model": "real", "gas.expansion": "equilibrium"}).gas.model == "real"
