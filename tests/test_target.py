"""The inverse question at the case: targets met, the input found again, reasons where nothing is found, the verb."""

from __future__ import annotations

import importlib.util
import json
import sys
from pathlib import Path
from types import ModuleType

import jsonschema
import pytest
from typer.testing import CliRunner

import fuelair
from fuelair import InputError, resources
from fuelair.cli.app import app
from fuelair.report import studies
from fuelair.report.study_schema import find_schema
from fuelair.study import asked
from fuelair.study.batch import Study
from fuelair.study.crossings import MET

ROOT = Path(__file__).resolve().parents[1]
SMALL = """\
title = "small"
[engine]
compression_ratio = 10
[fuel]
name = "methane"
admission = "premixed"
[charge]
equivalence_ratio = 0.8
pressure = "1 bar"
temperature = "330 K"
[combustion]
heat_addition = "constant-volume"
"""
CASE = fuelair.Case.from_toml(SMALL)
BOAT = fuelair.Case.read(resources.demos() / "workboat.toml")


@pytest.fixture(scope="module")
def campaign() -> ModuleType:
    place = ROOT / "validation" / "campaigns" / "inverse.py"
    spec = importlib.util.spec_from_file_location("fuelair_tests_inverse", place)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    return module


def test_random_cases_of_all_three_modes_there_and_back(campaign: ModuleType) -> None:
    """The small version of the campaign, which is run by hand with 10 000 cases."""
    tally = campaign.run(30, seed=11, points=65, wide=False)
    assert tally.misses == []
    assert tally.met >= 24
    assert tally.met + tally.flat + tally.unsolved == 30
    assert tally.worst_target <= MET
    assert tally.worst_input <= 1e-9


def test_both_mixtures_that_give_one_temperature() -> None:
    found = fuelair.find(CASE, "charge.equivalence_ratio", "peak_temperature", "2650 K", low=0.4, high=1.8)
    assert found.outcome == "met"
    lean, rich = found.roots
    assert lean.value < 1.0 < rich.value
    assert lean.slope > 0.0 > rich.slope
    for root in found.roots:
        a = fuelair.assess(CASE.replace({"charge.equivalence_ratio": root.value})).figures()
        assert a["peak_temperature_K"] == pytest.approx(2650.0, rel=1e-8)  # another engine: the compiled one agrees to 1e-8
        assert root.figures["peak_temperature_K"] == pytest.approx(2650.0, rel=MET)
        assert root.figures["imep_gross_Pa"] == pytest.approx(a["imep_gross_Pa"], rel=1e-7)
        assert not root.touching


def test_slope_and_condition_agree_with_differences_of_their_own() -> None:
    found = fuelair.find(CASE, "engine.compression_ratio", "peak_pressure", "70 bar", low=6, high=14, points=33)
    (root,) = found.roots
    step = 1e-3
    pair = Study(CASE, ["engine.compression_ratio"], quantities=["peak_pressure"]).run(
        {"engine.compression_ratio": [root.value - step, root.value + step]}
    )
    slope = (pair.figures["peak_pressure_Pa"][1] - pair.figures["peak_pressure_Pa"][0]) / (2.0 * step)
    assert root.slope == pytest.approx(slope, rel=1e-5)
    assert root.condition == pytest.approx(70e5 / (slope * root.value), rel=1e-5)


def test_two_roots_close_to_the_turning_point() -> None:
    """Peak temperature has its top between two points of the scan; a target just below it has two roots there."""
    scan = {"low": 0.9, "high": 1.3, "points": 9}
    top = fuelair.find(CASE, "charge.equivalence_ratio", "peak_temperature", 5000.0, **scan)
    assert top.outcome == "none"
    fine = fuelair.find(CASE, "charge.equivalence_ratio", "peak_temperature", 5000.0, low=0.9, high=1.3, points=513)
    assert fine.search.highest is not None
    found = fuelair.find(CASE, "charge.equivalence_ratio", "peak_temperature", fine.search.highest[1] - 1e-3, **scan)
    assert len(found.roots) == 2
    assert found.roots[1].value - found.roots[0].value < 0.05
    assert all(root.condition > 100.0 for root in found.roots)


def test_out_of_reach_says_between_what_it_stays() -> None:
    found = fuelair.find(CASE, "engine.compression_ratio", "peak_pressure", "700 bar", low=8, high=12, points=9)
    assert (found.outcome, found.roots) == ("none", ())
    assert found.reason.startswith("none, because peak pressure stays between ")
    assert "from 8 to 12" in found.reason


def test_a_held_pressure_is_not_determined_by_the_fuel_and_met_by_a_stretch_of_it() -> None:
    above = fuelair.find(BOAT, "charge.equivalence_ratio", "peak_pressure", "210 bar", low=0.3, high=0.9, points=9)
    assert above.outcome == "not-determined"
    assert "not determined by this input: peak pressure is 200.00 bar" in above.reason
    on = fuelair.find(BOAT, "charge.equivalence_ratio", "peak_pressure", "200 bar", low=0.05, high=0.9, points=33)
    assert on.outcome == "met"
    ((low, high),) = on.search.levels
    assert high == 0.9
    assert 0.1 < low < 0.3
    assert "anything from" in on.verdict
    below = fuelair.find(BOAT, "charge.equivalence_ratio", "peak_pressure", "199.9 bar", low=0.05, high=0.9, points=33)
    assert below.roots[0].value == pytest.approx(low, rel=1e-2)
    assert below.roots[0].value < low


def test_failed_stretches_are_told_with_their_reason() -> None:
    found = fuelair.find(BOAT, "charge.equivalence_ratio", "exhaust_temperature", "900 K", points=17)
    assert (found.varied.low, found.varied.high, found.spacing) == (0.01, 5.0, "logarithmic")
    assert [gap.status.label for gap in found.search.gaps] == ["carbon-over-oxygen"]
    assert found.search.gaps[0].high == 5.0
    assert any("carbon-over-oxygen" in note for note in found.notes())
    assert len(found.roots) == 2


def test_rows_that_contradict_the_case_are_a_gap() -> None:
    found = fuelair.find(BOAT, "combustion.pressure_limit", "peak_pressure", "150 bar", points=33)
    assert [gap.status.label for gap in found.search.gaps] == ["limit-below-compression"]
    (root,) = found.roots
    assert root.value == pytest.approx(150e5, rel=1e-12)
    timing = asked.varied(BOAT, "engine.exhaust_closing")
    assert (timing.low, timing.high) == (300.0, 430.0)


def test_any_model_and_quantity_of_the_headline() -> None:
    cold = fuelair.find(CASE, "engine.compression_ratio", "indicated_efficiency", "60 %", model="air-cold", points=17)
    (root,) = cold.roots
    assert root.value == pytest.approx(0.4 ** (-1.0 / 0.4), rel=1e-9)  # 1 - r^(1 - k) = 0.6 with k = 1.4
    dry = fuelair.find(CASE, "charge.equivalence_ratio", "exhaust_O2_dry", "3 %", low=0.5, high=1.2, points=17)
    assert dry.roots[0].figures["exhaust_O2_dry"] == pytest.approx(0.03, rel=MET)


def test_the_answer_does_not_depend_on_the_words_it_is_asked_in() -> None:
    plain = fuelair.find(CASE, "charge.pressure", "peak_pressure_Pa", 8e6, low=0.8e5, high=2e5, points=9)
    words = fuelair.find(CASE, "charge.pressure", "peak_pressure", "80 bar", low="0.8 bar", high="2 bar", points=9)
    assert plain.to_dict() == words.to_dict()


@pytest.mark.parametrize(
    ("key", "quantity", "target", "span", "words"),
    [
        ("charge.presure", "peak_pressure", 8e6, (None, None), ["no such key", "charge.pressure"]),
        ("charge.pressure", "peak_presure", 8e6, (None, None), ["no such quantity", "peak_pressure_Pa"]),
        ("charge.pressure", "peak_pressure", "80 K", (None, None), ["peak_pressure_Pa", "K is a unit of temperature"]),
        ("charge.pressure", "peak_pressure", "80 bar", ("4 bar", "2 bar"), ["charge.pressure", "no width"]),
        ("charge.pressure", "peak_pressure", "80 bar", ("0.01 bar", "2 bar"), ["outside its range", "0.05 bar to 50 bar"]),
        ("engine.cylinders", "peak_pressure", 8e6, (None, None), ["engine.cylinders", "not a physical number"]),
        ("fuel.name", "peak_pressure", 8e6, (None, None), ["fuel.name", "not a physical number"]),
        ("limits.peak_pressure", "peak_pressure", 8e6, (None, None), ["no effect"]),
        ("charge.excess_air_ratio", "peak_pressure", 8e6, (None, None), ["charge.equivalence_ratio", "exactly one"]),
        ("combustion.pressure_limit", "peak_pressure", 8e6, (None, None), ["has no meaning"]),
    ],
)
def test_wrong_questions_are_one_clear_error(
    key: str, quantity: str, target: object, span: tuple[object, object], words: list[str]
) -> None:
    with pytest.raises(InputError) as caught:
        fuelair.find(CASE, key, quantity, target, low=span[0], high=span[1], points=9)
    for word in words:
        assert word in str(caught.value)


def test_wrong_models_and_figures_that_the_case_cannot_give() -> None:
    with pytest.raises(InputError, match="no such model"):
        fuelair.find(CASE, "charge.pressure", "peak_pressure", 8e6, model="air-warm")
    with pytest.raises(InputError, match=r"engine\.bore"):
        fuelair.find(CASE, "charge.pressure", "indicated_power", "100 kW")


@pytest.mark.parametrize(
    ("text", "low", "high"),
    [
        ("charge.pressure=2 bar:4 bar", 2e5, 4e5),
        ("charge.pressure = 100000 : 400000", 1e5, 4e5),
        ("charge.temperature=20 degC:350 K", 293.15, 350.0),
        ("charge.equivalence_ratio=0.3:1.2", 0.3, 1.2),
        ("engine.intake_closing=-190 deg:-120 deg", -190.0, -120.0),
        ("charge.equivalence_ratio", 0.01, 5.0),
    ],
)
def test_ranges_as_people_write_them(text: str, low: float, high: float) -> None:
    found = asked.read_varied(CASE, text)
    assert (found.low, found.high) == (low, high)


@pytest.mark.parametrize(
    "text",
    [
        "charge.pressure=2 bar",
        "charge.pressure=1:2:3",
        "charge.pressure=:2 bar",
        "charge.pressure=2:4 bar",
        "charge.pressure=a:b",
    ],
)
def test_ranges_that_are_none(text: str) -> None:
    with pytest.raises(InputError):
        asked.read_varied(CASE, text)


def test_targets_and_limits_as_people_write_them() -> None:
    assert asked.read_target(CASE, "peak_pressure=200 bar") == ("peak_pressure_Pa", 2e7)
    assert asked.read_target(CASE, "isfc = 150 g/kWh") == ("isfc_kg_per_J", pytest.approx(150 / 3.6e9, rel=1e-15))
    assert asked.read_target(CASE, "indicated_efficiency=0.45") == ("indicated_efficiency", 0.45)
    assert asked.read_target(CASE, "peak_pressure=99 bar(g)") == ("peak_pressure_Pa", 99e5 + 101325.0)
    (hold,) = asked.read_holds(CASE, "exhaust_O2_dry >= 3 %")
    assert (hold.quantity, hold.upper, hold.bound) == ("exhaust_O2_dry", False, 0.03)
    assert [one.words() for one in asked.read_holds(BOAT, "limits")] == [
        "Peak pressure <= 205.00 bar",
        "Mean exhaust temperature <= 953 K (680 degC)",
    ]
    for wrong in ("peak_pressure", "peak_pressure=200 barr", "peak_pressure<=200 bar"):
        with pytest.raises(InputError):
            asked.read_target(CASE, wrong)
    for wrong in ("peak_pressure=200 bar", "limits", "peak_pressure<200 bar", "<=3"):
        with pytest.raises(InputError):
            asked.read_holds(CASE, wrong)


def test_json_is_strict_and_follows_its_schema() -> None:
    jsonschema.Draft202012Validator.check_schema(find_schema())
    for target in (900.0, 4000.0):
        found = fuelair.find(BOAT, "charge.equivalence_ratio", "exhaust_temperature", target, low=0.3, high=1.5, points=9)
        data = json.loads(json.dumps(found.to_dict(), allow_nan=False))
        jsonschema.validate(data, find_schema())
        assert data["outcome"] == found.outcome
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(data | {"outcome": "maybe"}, find_schema())


def test_a_table_holds_every_root() -> None:
    found = fuelair.find(CASE, "charge.equivalence_ratio", "peak_temperature", "2650 K", low=0.4, high=1.8, points=17)
    table = studies.roots(found)
    assert len(table.rows) == 2
    assert all(len(row) == len(table.columns) for row in table.rows)


@pytest.fixture
def case_file(tmp_path: Path) -> Path:
    path = tmp_path / "small.toml"
    path.write_text(SMALL)
    return path


def run(*words: str) -> tuple[int, str]:
    out = CliRunner().invoke(app, list(words))
    if out.exception is not None and not isinstance(out.exception, SystemExit):
        raise out.exception
    return out.exit_code, out.stdout


def test_the_verb_with_a_target(case_file: Path, tmp_path: Path) -> None:
    ask = ("find", str(case_file), "--vary", "charge.equivalence_ratio=0.4:1.8", "--target")
    code, shown = run(*ask, "peak_temperature=2650 K")
    assert code == 0
    assert "Peak gas temperature 2650 K with charge.equivalence_ratio = " in shown
    assert "257 points, linear spacing" in " ".join(shown.split())
    code, shown = run(*ask, "peak_temperature=4000 K")
    assert code == 3
    assert "none, because peak gas temperature stays between" in " ".join(shown.split())
    code, alone = run(*ask, "peak_temperature=2650 K", "--json", "-")
    assert code == 0
    assert len(json.loads(alone)["roots"]) == 2
    code, _ = run(*ask, "peak_temperature=2650 K", "--json", str(tmp_path / "out.json"))
    assert json.loads((tmp_path / "out.json").read_text())["outcome"] == "met"
    with pytest.raises(InputError, match="the case itself"):
        run(*ask, "peak_temperature=2650 K", "--json", str(case_file))


@pytest.mark.parametrize(
    "words",
    [
        ("--vary", "charge.pressure"),
        ("--vary", "charge.pressure", "--target", "peak_pressure=80 bar", "--hold", "limits"),
        ("--vary", "charge.pressure", "--vary", "charge.temperature", "--target", "peak_pressure=80 bar"),
        ("--vary", "charge.pressure", "--most", "imep_gross", "--least", "isfc"),
        ("--vary", "charge.pressure", "--target", "peak_pressure=80 bar", "--engine", "steam"),
    ],
)
def test_the_verb_refuses_what_does_not_go_together(case_file: Path, words: tuple[str, ...]) -> None:
    with pytest.raises(InputError):
        run("find", str(case_file), *words)


def test_both_gas_engines_find_the_same_input() -> None:
    span = {"low": 7.0, "high": 12.0, "points": 5}
    two = [
        fuelair.find(CASE, "engine.compression_ratio", "peak_pressure", "70 bar", engine=e, **span)
        for e in ("reference", "compiled")
    ]
    assert [one.engine for one in two] == ["reference", "compiled"]
    assert two[0].roots[0].value == pytest.approx(two[1].roots[0].value, rel=1e-7)
