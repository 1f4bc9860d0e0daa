"""The section [tolerance]: units of the key, round trips, and one clear problem for each mistake."""

from __future__ import annotations

import tomllib

import jsonschema
import pytest

from fuelair.case import Case
from fuelair.case.spreads import cholesky, marginal
from fuelair.errors import InputError, Problem

GOOD = """\
[engine]
compression_ratio = "10.5:1"
[fuel]
name = "gasoline"
admission = "premixed"
[charge]
equivalence_ratio = 1.0
pressure = "0.9 bar"
temperature = "340 K"
residual_fraction = "4 %"
[combustion]
heat_addition = "constant-volume"
[tolerance]
rows = 1024
seed = 7
spread = [
    { key = "charge.temperature", distribution = "normal", standard_deviation = "3 degC", low = "60 degC" },
    { key = "engine.compression_ratio", distribution = "uniform", half_width = 0.3 },
    { key = "charge.pressure", distribution = "normal", measure = "relative", standard_deviation = "1.5 %" },
    { key = "charge.residual_fraction", distribution = "triangular", low = "2 %", high = "7 %" },
]
correlation = [{ key = "charge.pressure", other = "charge.temperature", coefficient = 0.6 }]
peak_pressure_spread = { cyclic = "3 %", cylinder_to_cylinder = "4 %" }
"""


def spreads(text: str = GOOD) -> dict[str, tuple[float, ...]]:
    case = Case.from_toml(text)
    assert case.tolerance is not None
    found = {}
    for part in case.tolerance.spread:
        section, _, name = part.key.partition(".")
        m = marginal(part, getattr(getattr(case, section), name))
        found[part.key] = (m.centre, m.deviation, m.low, m.high)
    return found


def test_spreads_in_stored_units() -> None:
    found = spreads()
    assert found["charge.temperature"] == (340.0, 3.0, 333.15, 800.0)
    assert found["charge.pressure"][:2] == (9e4, pytest.approx(1350.0, rel=1e-15))
    assert found["engine.compression_ratio"][2:] == (10.2, 10.8)
    assert found["charge.residual_fraction"][::2] == (0.04, 0.02)
    tolerance = Case.from_toml(GOOD).tolerance
    assert tolerance is not None
    assert (tolerance.rows, tolerance.seed) == (1024, 7)
    assert tolerance.peak_pressure_spread is not None
    assert tolerance.peak_pressure_spread.relative == pytest.approx(0.05, rel=1e-15)  # 3-4-5
    assert tolerance.peak_pressure_spread.coverage == 2.0


def test_a_case_without_the_section_has_none_and_shows_none() -> None:
    case = Case.from_toml(GOOD.partition("[tolerance]")[0])
    assert case.tolerance is None
    assert "tolerance" not in case.resolved()
    assert not any(key.startswith("tolerance") for key in case.defaulted)


def test_it_comes_back_the_same() -> None:
    case = Case.from_toml(GOOD)
    again = Case.from_toml(case.to_toml())
    assert again == case
    assert hash(again) == hash(case)
    changed = case.replace({"charge.pressure": "0.8 bar"})
    assert changed.tolerance == case.tolerance


def test_gauge_pressures_in_a_spread_count_from_the_ambient_pressure_and_widths_do_not() -> None:
    text = GOOD.replace('temperature = "340 K"', 'temperature = "340 K"\nambient_pressure = "0.95 bar"').replace(
        'distribution = "normal", measure = "relative", standard_deviation = "1.5 %"',
        'distribution = "normal", standard_deviation = "0.02 bar(g)", low = "-0.2 bar(g)"',
    )
    assert spreads(text)["charge.pressure"][1:3] == (2000.0, 75000.0)


def test_a_normal_spread_is_cut_at_the_range_of_its_key() -> None:
    text = GOOD.replace(
        'distribution = "triangular", low = "2 %", high = "7 %"', 'distribution = "normal", standard_deviation = 0.04'
    )
    case = Case.from_toml(text)
    assert case.tolerance is not None
    m = marginal(case.tolerance.spread[3], 0.04)
    assert (m.low, m.high) == (0.0, 0.9)
    assert m.cut == pytest.approx(0.15865525393145707, rel=1e-12)  # below one standard deviation: from memory


def test_json_schema_takes_the_raw_text_and_lists_the_keys() -> None:
    schema = Case.json_schema()
    jsonschema.validate(tomllib.loads(GOOD), schema)
    jsonschema.validate(tomllib.loads(Case.from_toml(GOOD).to_toml()), schema)
    keys = schema["$defs"]["Spread"]["properties"]["key"]["enum"]
    assert "charge.egr_fraction" in keys
    assert not {"engine.cylinders", "limits.peak_pressure", "tolerance.rows"} & set(keys)
    for wrong in (GOOD.replace("charge.pressure", "charge.presure"), GOOD.replace("rows = 1024", "rows = 1000")):
        with pytest.raises(jsonschema.ValidationError):
            jsonschema.validate(tomllib.loads(wrong), schema)


SPREAD = "tolerance.spread"
MISTAKES = [
    ("rows = 1024", "rows = 1000", "tolerance.rows", "outside", "1024", ""),
    ("seed = 7", "seed = -1", "tolerance.seed", "outside", "whole", ""),
    ('{ key = "charge.temperature"', '{ key = "charge.temprature"', f"{SPREAD}[0].key", "no such", "", "charge.temperature"),
    ('{ key = "charge.temperature"', '{ key = "stroke"', f"{SPREAD}[0].key", "no such", "", "engine.stroke"),
    ('{ key = "charge.temperature"', '{ key = "engine.cylinders"', f"{SPREAD}[0].key", "no such numeric", "", ""),
    ('{ key = "charge.temperature"', '{ key = "limits.peak_pressure"', f"{SPREAD}[0].key", "no such numeric", "", ""),
    ('"3 degC"', '"3 bar"', f"{SPREAD}[0].standard_deviation", "bar is a unit of pressure", "degC", ""),
    ('"3 degC"', '"-3 K"', f"{SPREAD}[0].standard_deviation", "above zero", "", ""),
    ('"3 degC"', '"3"', f"{SPREAD}[0].standard_deviation", "without a unit", "K", ""),
    ('"3 degC"', '"1 %"', f"{SPREAD}[0].standard_deviation", "leaves open", "", "relative"),
    ("half_width = 0.3", 'half_width = "2 %"', f"{SPREAD}[1].half_width", "leaves open", "", "relative"),
    ("half_width = 0.3", "half_widht = 0.3", f"{SPREAD}[1].half_widht", "no such key", "half_width", "half_width"),
    ("half_width = 0.3", "standard_deviation = 0.3", f"{SPREAD}[1].standard_deviation", "belongs to a normal", "half_width", ""),
    (", half_width = 0.3", "", f"{SPREAD}[1].half_width", "has ends", "both low and high", ""),
    ("half_width = 0.3", "half_width = 0.3, low = 9", f"{SPREAD}[1].half_width", "twice", "", ""),
    ("half_width = 0.3", "low = 12, high = 10", f"{SPREAD}[1].low", "not below", "", ""),
    ("half_width = 0.3", "low = 9, high = 11, centre = 10", f"{SPREAD}[1].centre", "halfway", "", "remove"),
    ("half_width = 0.3", "half_width = 9.5", f"{SPREAD}[1].half_width", "leaves the range", "1.5 to 60", ""),
    ("half_width = 0.3", "low = 1, high = 12", f"{SPREAD}[1].low", "outside", "1.5 to 60", ""),
    ('low = "2 %"', 'low = "5 %"', f"{SPREAD}[3].centre", "does not lie between", "", ""),
    (', standard_deviation = "1.5 %"', "", f"{SPREAD}[2].standard_deviation", "needs it", "3 K", ""),
    ('low = "60 degC"', 'low = "200 degC"', f"{SPREAD}[0].standard_deviation", "nearly the whole", "", ""),
    ('"relative"', '"relativ"', f"{SPREAD}[2].measure", "no such choice", "", "relative"),
    ('"uniform"', '"unifrom"', f"{SPREAD}[1].distribution", "no such choice", '"triangular"', "uniform"),
    ('high = "7 %"', 'high = "3 %"', f"{SPREAD}[3].centre", "does not lie between", "", ""),
    ("coefficient = 0.6", "coefficient = 1.0", "tolerance.correlation[0].coefficient", "outside", "-0.999", ""),
    ('other = "charge.temperature"', 'other = "engine.bore"', "tolerance.correlation[0].other", "does not spread", "charge", ""),
    ('other = "charge.temperature"', 'other = "charge.pressure"', "tolerance.correlation[0].other", "itself", "", ""),
    ('cyclic = "3 %"', 'cyclic = "60 %"', "tolerance.peak_pressure_spread.cyclic", "outside", "0 % to 50 %", ""),
    ("{ cyclic", "{ cylic", "tolerance.peak_pressure_spread.cylic", "no such key", "cyclic", "cyclic"),
    ("correlation = [", "correlation = 3 #", "tolerance.correlation", "list of parts", "", "coefficient"),
]  # fmt: skip


def one(text: str) -> Problem:
    with pytest.raises(InputError) as caught:
        Case.from_toml(text, "case.toml")
    (problem,) = caught.value.problems
    return problem


@pytest.mark.parametrize(("old", "new", "key", "message", "allowed", "hint"), MISTAKES)
def test_one_mistake_is_one_problem(old: str, new: str, key: str, message: str, allowed: str, hint: str) -> None:
    assert old in GOOD
    text = GOOD.replace(old, new)
    problem = one(text)
    assert problem.key == key
    assert message in problem.message
    assert allowed in problem.allowed
    assert hint in problem.hint
    assert problem.line == GOOD[: GOOD.index(old)].count("\n") + 1


def test_mistakes_that_need_two_lines() -> None:
    twice = GOOD.replace('key = "engine.compression_ratio"', 'key = "charge.pressure"').replace(
        "half_width = 0.3", 'half_width = "1 kPa"'
    )
    assert "spreads twice" in one(twice).message
    solved = GOOD.replace('residual_fraction = "4 %"', 'residual_fraction = "solve"').replace(
        "pressure =", "intake_pressure =", 1
    )
    solved = solved.replace("temperature =", "intake_temperature =", 1).replace("charge.pressure", "charge.intake_pressure")
    problem = one(solved.replace("charge.temperature", "charge.intake_temperature"))
    assert "cannot spread" in problem.message
    assert problem.key == "tolerance.spread[3].key"
    absent = GOOD.replace('key = "engine.compression_ratio"', 'key = "engine.speed"').replace(
        "half_width = 0.3", 'half_width = "9 rpm"'
    )
    assert one(absent).message == "the case gives no engine.speed"
    assert one(GOOD.replace("spread = [", "spread = [] #[").split("    {")[0]).message == "nothing spreads"
    default = GOOD.replace('key = "engine.compression_ratio"', 'key = "fuel.temperature"').replace(
        "half_width = 0.3", 'half_width = "9 K"'
    )
    assert spreads(default)["fuel.temperature"] == (298.15, pytest.approx(float("nan"), nan_ok=True), 289.15, 307.15)


def test_coefficients_that_contradict_each_other() -> None:
    """a with b and b with c at 0.9, but a against c: no three numbers can do that."""
    pairs = ("charge.pressure", "charge.temperature", 0.9), ("charge.temperature", "engine.compression_ratio", 0.9)
    text = ", ".join(f'{{ key = "{a}", other = "{b}", coefficient = {c} }}' for a, b, c in pairs)
    third = ', { key = "charge.pressure", other = "engine.compression_ratio", coefficient = %s }'
    old = GOOD[GOOD.index("correlation =") : GOOD.index("peak_pressure_spread")]
    good, bad = (GOOD.replace(old, f"correlation = [{text}{third % c}]\n") for c in ("0.8", "-0.8"))
    Case.from_toml(good)
    assert "positive definite" in one(bad).message


def test_cholesky_root_multiplies_back() -> None:
    matrix = [[1.0, 0.5, 0.2], [0.5, 1.0, -0.3], [0.2, -0.3, 1.0]]
    root = cholesky(matrix)
    assert root is not None
    for i in range(3):
        for j in range(3):
            assert sum(root[i][k] * root[j][k] for k in range(3)) == pytest.approx(matrix[i][j], abs=1e-15)
    assert cholesky([[1.0, 1.0], [1.0, 1.0]]) is None
