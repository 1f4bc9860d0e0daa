"""The main job end to end on the demo cases and on cases written for one question."""

from __future__ import annotations

import json
import math
import pickle

import jsonschema
import numpy as np
import pytest

import fuelair
from fuelair import resources
from fuelair.cycle.ladder import QUANTITIES
from fuelair.cycle.result import MODELS

DEMOS = sorted(resources.demos().glob("*.toml"))


@pytest.fixture(scope="module")
def demos() -> dict[str, fuelair.Assessment]:
    return {p.stem: fuelair.assess(fuelair.Case.read(p)) for p in DEMOS}


def small(**changes: object) -> fuelair.Case:
    case = fuelair.Case.from_dict(
        {
            "engine": {"compression_ratio": 10.0},
            "fuel": {"name": "methane", "admission": "premixed"},
            "charge": {"equivalence_ratio": 0.9, "pressure": 1e5, "temperature": 330.0},
            "combustion": {"heat_addition": "constant-volume"},
        }
    )
    return case.replace({k.replace("__", "."): v for k, v in changes.items()}) if changes else case


def test_four_demos_of_the_four_kinds(demos: dict[str, fuelair.Assessment]) -> None:
    assert len(demos) == 4
    assert {a.case.fuel.admission for a in demos.values()} >= {"direct", "premixed", "port-liquid"}
    assert any(a.case.charge.residual_fraction == "solve" for a in demos.values())
    assert any(a.case.combustion.heat_addition == "pressure-limited" for a in demos.values())


@pytest.mark.parametrize("name", [p.stem for p in DEMOS])
def test_every_model_solves_and_its_ledger_closes(demos: dict[str, fuelair.Assessment], name: str) -> None:
    a = demos[name]
    assert tuple(a.results) == MODELS
    for model, result in a.results.items():
        assert a.status(model).label == "ok"
        for balance, residual in result.ledger.items():
            assert abs(residual[0]) < 1e-9, (model, balance)


@pytest.mark.parametrize("name", [p.stem for p in DEMOS])
def test_ladder_adds_up_and_overprediction_matches_the_table(demos: dict[str, fuelair.Assessment], name: str) -> None:
    a = demos[name]
    table = a.table()
    for key in QUANTITIES:
        whole = sum(s.change[key] for s in a.ladder)
        assert whole == pytest.approx(table.loc[MODELS[-1], key] - table.loc[MODELS[0], key], rel=1e-12, abs=1e-9)
    cold = a.overprediction["air-cold"]["peak_temperature_K"]
    assert cold["absolute"] == pytest.approx(
        table.loc["air-cold", "peak_temperature_K"] - table.loc["fuel-air-equilibrium", "peak_temperature_K"]
    )
    assert cold["absolute"] > 300.0


@pytest.mark.parametrize("name", [p.stem for p in DEMOS])
def test_json_is_strict_complete_and_repeatable(demos: dict[str, fuelair.Assessment], name: str) -> None:
    a = demos[name]
    text = json.dumps(a.to_dict(), allow_nan=False)
    data = json.loads(text)
    for key in (
        "format",
        "versions",
        "engine",
        "case",
        "charge",
        "models",
        "states",
        "ladder",
        "overprediction",
        "ledger",
        "warnings",
        "sources",
    ):
        assert key in data
    assert data["format"] == 1
    assert data["engine"] == "reference"
    assert [s["state"] for s in data["states"]["fuel-air-equilibrium"]][:2] == ["trapped", "compressed"]
    again = fuelair.assess(fuelair.Case.read(resources.demos() / f"{name}.toml"))
    assert json.dumps(again.to_dict(), allow_nan=False) == text
    assert {s["standing"] for s in data["sources"]} <= {"read", "computed", "from memory", "common practice"}


def test_results_do_not_depend_on_what_ran_before(demos: dict[str, fuelair.Assessment]) -> None:
    for path in reversed(DEMOS):
        again = fuelair.assess(fuelair.Case.read(path)).to_dict()
        assert again == demos[path.stem].to_dict()


def test_frames_carry_units_and_mole_fractions_sum_to_one(demos: dict[str, fuelair.Assessment]) -> None:
    a = demos["workboat"]
    frame = a.states()
    x = frame[[c for c in frame.columns if c.startswith("x_")]].fillna(0.0)
    assert np.allclose(x.sum(axis=1), 1.0, atol=1e-9)
    assert (frame["V_m3"] > 0.0).all()
    assert frame.loc["trapped", "V_m3"] > frame.loc["compressed", "V_m3"]
    assert a.table().loc["air-cold", "status"] == "ok"


def test_engine_figures_agree_with_each_other(demos: dict[str, fuelair.Assessment]) -> None:
    for a in demos.values():
        e, f = a.engine_figures, a.figures()
        assert None not in (e["indicated_power_W"], e["fuel_mass_flow_kg_per_s"], f["isfc_kg_per_J"])
        assert e["fuel_mass_flow_kg_per_s"] == pytest.approx(e["indicated_power_W"] * f["isfc_kg_per_J"], rel=1e-12)
        assert e["exhaust_mass_flow_kg_per_s"] == pytest.approx(
            e["air_mass_flow_kg_per_s"] + e["fuel_mass_flow_kg_per_s"], rel=1e-9
        )
        swept = a.swept_volume
        assert swept is not None
        assert a.case.engine.speed is not None
        rate = a.case.engine.speed * 2 / a.case.engine.strokes_per_cycle * a.case.engine.cylinders
        assert e["net_indicated_power_W"] == pytest.approx(f["imep_net_Pa"] * swept * rate, rel=1e-12)


def test_exhaust_equivalence_ratio_is_that_of_the_fresh_charge(demos: dict[str, fuelair.Assessment]) -> None:
    for a in demos.values():
        assert a.exhaust_figures["exhaust_equivalence_ratio"] == pytest.approx(a.charge_figures()["equivalence_ratio"], rel=1e-6)


def test_other_ways_to_give_the_fuel_amount_are_the_same_case() -> None:
    base = fuelair.assess(small())
    stoichiometric = base.charge_figures()["stoichiometric_air_fuel_ratio"]
    assert stoichiometric is not None
    for key, value in (("charge.excess_air_ratio", 1 / 0.9), ("charge.air_fuel_ratio", stoichiometric / 0.9)):
        other = fuelair.assess(small().replace({"charge.equivalence_ratio": None, key: value}))
        assert other.figures()["peak_temperature_K"] == pytest.approx(base.figures()["peak_temperature_K"], rel=1e-12)


def test_fuel_mass_gives_back_the_equivalence_ratio() -> None:
    geometry = {"engine.bore": 0.1, "engine.stroke": 0.12}
    base = fuelair.assess(small().replace(geometry))
    mass = base.engine_figures["fuel_mass_per_cycle_kg"]
    again = fuelair.assess(small().replace({**geometry, "charge.equivalence_ratio": None, "charge.fuel_mass": mass}))
    assert again.charge_figures()["equivalence_ratio"] == pytest.approx(0.9, rel=1e-10)


CUT_OFF = {
    "fuel.name": "diesel",
    "fuel.admission": "direct",
    "engine.compression_ratio": 18.0,
    "combustion.heat_addition": "constant-pressure",
    "charge.equivalence_ratio": None,
}
"""Instead of the amount of fuel, the cut-off ratio is given."""


def test_cutoff_ratio_gives_back_itself() -> None:
    case = small().replace(CUT_OFF | {"combustion.cutoff_ratio": 2.2})
    a = fuelair.assess(case)
    assert a.figures()["cutoff_ratio"] == pytest.approx(2.2, rel=1e-10)
    same = a.companions["same-cutoff-ratio"]["air-cold"].figures
    k = 1.4
    closed = 1 - 18 ** (1 - k) * (2.2**k - 1) / (k * (2.2 - 1))
    assert same["indicated_efficiency"][0] == pytest.approx(closed, rel=1e-9)


def test_a_cutoff_ratio_out_of_reach_is_a_named_status() -> None:
    case = small().replace(CUT_OFF | {"combustion.cutoff_ratio": 9.0})
    with pytest.raises(fuelair.UnsolvedError) as caught:
        fuelair.assess(case)
    assert caught.value.status == "cutoff-not-reached"
    assert pickle.loads(pickle.dumps(caught.value)).status == "cutoff-not-reached"


def test_limit_below_the_headline_compression_is_an_input_error_with_the_line() -> None:
    text = (resources.demos() / "workboat.toml").read_text().replace('pressure_limit = "200 bar"', 'pressure_limit = "100 bar"')
    with pytest.raises(fuelair.InputError) as caught:
        fuelair.assess(fuelair.Case.from_toml(text, "boat.toml"))
    (problem,) = caught.value.problems
    assert problem.key == "combustion.pressure_limit"
    assert problem.line == 1 + text.splitlines().index('pressure_limit = "100 bar"')
    assert "129.9 bar" in problem.allowed
    assert problem.value == "100 bar"


def test_a_limit_between_the_models_fails_only_the_crude_one() -> None:
    text = (resources.demos() / "workboat.toml").read_text().replace('pressure_limit = "200 bar"', 'pressure_limit = "135 bar"')
    a = fuelair.assess(fuelair.Case.from_toml(text))
    assert a.status("air-cold").label == "limit-below-compression"
    assert a.status("fuel-air-equilibrium").label == "ok"
    assert a.figures("air-cold")["peak_temperature_K"] is None
    assert a.ladder[0].lower == "air-variable"
    assert a.to_dict()["models"]["air-cold"]["peak_temperature_K"] is None


@pytest.mark.parametrize(
    ("changes", "headline"),
    [
        ({}, "fuel-air-equilibrium"),
        ({"gas.model": "real"}, "fuel-air-real-gas"),
        ({"gas.expansion": "frozen"}, "fuel-air-frozen"),
        ({"gas.freeze_temperature": 2000.0}, "fuel-air-freeze-below"),
    ],
)
def test_the_gas_section_chooses_the_headline(changes: dict[str, object], headline: str) -> None:
    a = fuelair.assess(small().replace(changes))
    assert a.headline == headline
    assert tuple(a.results)[:6] == MODELS
    if headline == "fuel-air-freeze-below":
        t = a.table()["release_temperature_K"]
        assert t["fuel-air-frozen"] < t[headline] < t["fuel-air-equilibrium"]


def test_rich_charges_are_said_to_be_rich_and_offer_oxygen_limited_heat() -> None:
    a = fuelair.assess(small(charge__equivalence_ratio=1.25))
    assert any(w.startswith("Rich") for w in a.warnings)
    limited = a.companions["oxygen-limited-heat"]["air-cold"].figures["heat_added_J_per_kg"][0]
    assert limited == pytest.approx(a.charge_figures()["heat_added_J_per_kg"] / 1.25, rel=1e-9)
    assert a.exhaust_figures["exhaust_CO_dry"] > 0.02


def test_recirculated_exhaust_counts_its_oxygen() -> None:
    """phi 0.60 fresh with 20 % recirculated is 0.547 on all oxygen (hand arithmetic)."""
    a = fuelair.assess(
        small().replace(
            {
                "fuel.name": "n-dodecane",
                "fuel.admission": "direct",
                "charge.equivalence_ratio": 0.6,
                "charge.egr_fraction": 0.2,
                "engine.compression_ratio": 16.0,
                "combustion.heat_addition": "constant-pressure",
            }
        )
    )
    assert 1 / a.charge_figures()["oxygen_excess_ratio"] == pytest.approx(0.547, abs=5e-4)


def test_resolved_case_reads_back_to_the_same_result() -> None:
    a = fuelair.assess(small())
    again = fuelair.assess(fuelair.Case.from_toml(a.case.to_toml()))
    assert again.to_dict()["models"] == a.to_dict()["models"]


def test_schema_accepts_the_resolved_case() -> None:
    a = fuelair.assess(small())
    jsonschema.validate(a.case.resolved() | {}, fuelair.Case.json_schema())


def test_nothing_in_the_figures_is_nan(demos: dict[str, fuelair.Assessment]) -> None:
    for a in demos.values():
        for model in a.results:
            assert all(v is not None and math.isfinite(v) for v in a.figures(model).values())
