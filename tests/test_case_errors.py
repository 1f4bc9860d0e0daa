"""Wrong input: one clear error, every mistake at once, the right line, our words."""

from __future__ import annotations

import copy
import traceback
from pathlib import Path
from typing import Any

import pytest
import tomli_w
from hypothesis import given, settings
from hypothesis import strategies as st

from fuelair.case import Case
from fuelair.case.toml_text import LARGEST_FILE, key_lines, load
from fuelair.errors import InputError, Problem

GOOD = """\
title = "launch"
[engine]
bore = "84 mm"
stroke = "90 mm"
rod_length = "146 mm"
compression_ratio = "10.5:1"
[fuel]
name = "gasoline"
admission = "port-liquid"
[charge]
equivalence_ratio = 1.0
pressure = "0.9 bar"
temperature = "340 K"
[combustion]
heat_addition = "constant-volume"
"""


def problems_of(text: str, name: str = "case.toml") -> list[Problem]:
    with pytest.raises(InputError) as caught:
        Case.from_toml(text, name)
    found = list(caught.value.problems)
    for problem in found:
        assert problem.file == name
        assert "pydantic" not in str(problem)
        assert "Input should" not in str(problem)
        if problem.line:
            assert problem.quoted == text.splitlines()[problem.line - 1].strip()
    return found


def change(line: str, instead: str) -> str:
    assert line in GOOD
    return GOOD.replace(line, instead)


def one(text: str) -> Problem:
    (problem,) = problems_of(text)
    return problem


def test_the_good_case_is_good() -> None:
    assert Case.from_toml(GOOD).charge.pressure == 90000.0


# line to replace, replacement, key, part of message, part of allowed, part of hint
SINGLE = [
    ('name = "gasoline"', 'name = "gasolin"', "fuel.name", "no such fuel", "gasoline", '"gasoline"'),
    ('pressure = "0.9 bar"', 'pressure = "bar"', "charge.pressure", "without a number", "0.05 bar to 50 bar", "bar"),
    ('pressure = "0.9 bar"', 'pressure = "0.9"', "charge.pressure", "without a unit", "0.05 bar to 50 bar", '"0.9 bar"'),
    ('pressure = "0.9 bar"', 'pressure = "0,9 bar"', "charge.pressure", "comma", "0.05 bar to 50 bar", '"0.9 bar"'),
    ('pressure = "0.9 bar"', 'pressure = "0.9 barr"', "charge.pressure", "unknown unit", "bar", '"0.9 bar"'),
    ('pressure = "0.9 bar"', "pressure = 0.9", "charge.pressure", "plain number is in Pa", "0.05 bar", '"0.9 bar"'),
    ('pressure = "0.9 bar"', "pressure = true", "charge.pressure", "neither a number", "bar", ""),
    ('pressure = "0.9 bar"', "pressure = nan", "charge.pressure", "finite", "bar", ""),
    ('pressure = "0.9 bar"', "pressure = 2024-01-01", "charge.pressure", "neither a number", "bar", ""),
    ('"10.5:1"', "1", "engine.compression_ratio", "outside its range", "1.5 to 60", ""),
    ("= 1.0", "= -1", "charge.equivalence_ratio", "outside its range", "0.01 to 5", ""),
    ("= 1.0", "= 1.0\negr_fraction = 1.2", "charge.egr_fraction", "outside its range", "0 % to 90 %", ""),
    ("= 1.0", '= 1.0\nrelative_humidity = "140 %"', "charge.relative_humidity", "outside its range", "0 % to 100 %", ""),
    ("= 1.0", "= 1.0\nair_fuel_ratio = 15", "charge.air_fuel_ratio", "charge.equivalence_ratio", "exactly one", ""),
    ("equivalence_ratio = 1.0", "", "charge", "not given", "charge.equivalence_ratio", ""),
    ("= 1.0", "= 1.0\npresure = 3", "charge.presure", "no such key", "pressure", "pressure"),
    ("= 1.0", '= 1.0\npressure_limit = "90 bar"', "charge.pressure_limit", "no such key", "", "[combustion]"),
    ("[fuel]", "[fuell]\n[fuel]", "fuell", "no such section", "[engine]", "[fuel]"),
    ("[fuel]", "[burn]\nduration = 3\n[fuel]", "burn", "this release has no [burn] section", "", "remove"),
    ("[fuel]", "[walls]\n[fuel]", "walls", "this release has no [walls] section", "", "remove"),
    ("[fuel]", '[gas]\nmodel = "reel"\n[fuel]', "gas.model", "no such choice", '"ideal"', '"real"'),
    ("[fuel]", '[gas]\nmodel = "real"\nexpansion = "frozen"\n[fuel]', "gas.expansion", "ideal", "", "remove"),
    ("[fuel]", '[gas]\nmodel = "real"\nfreeze_temperature = 1800\n[fuel]', "gas.freeze_temperature", "ideal", "", "remove"),
    ("[fuel]", '[gas]\nexpansion = "equilibrum"\n[fuel]', "gas.expansion", "no such choice", '"frozen"', '"equilibrium"'),
    ('"port-liquid"', '"port-liqid"', "fuel.admission", "no such choice", '"premixed"', '"port-liquid"'),
    ('admission = "port-liquid"', "", "fuel.admission", "is missing", '"premixed"', ""),
    ('compression_ratio = "10.5:1"', "", "engine.compression_ratio", "is missing", "1.5 to 60", ""),
    ("[engine]", "[engine]\ncylinders = 2.5", "engine.cylinders", "whole number", "1 to 32", ""),
    ("[engine]", "[engine]\ncylinders = 0", "engine.cylinders", "outside", "1 to 32", ""),
    ("[engine]", "[engine]\nstrokes_per_cycle = 3", "engine.strokes_per_cycle", "outside", "2 or 4", ""),
    ("[engine]", "[engine]\nspeed = 1800", "engine.speed", "rev/s", "rpm", '"1800 rpm"'),
    ("[engine]", "[engine]\nintake_closing = 580", "engine.intake_closing", "outside", "-300 deg", '"-140 deg"'),
    ("[engine]", "[engine]\nexhaust_closing = 10", "engine.exhaust_closing", "strokes_per_cycle = 4", "300 deg", '"370 deg"'),
    ('"146 mm"', '"44 mm"', "engine.rod_length", "too short", "45 mm", ""),
    ('bore = "84 mm"', "", "engine.stroke", "needs engine.bore", "", ""),
    ('temperature = "340 K"', "", "charge.pressure", "needs charge.temperature", "together", ""),
    ('title = "launch"', "title = 3", "title", "not text", "", ""),
    ('title = "launch"', 'title = "a\\nb"', "title", "more than one line", "", ""),
    ('"constant-volume"', '"pressure-limited"', "combustion.heat_addition", "needs combustion.pressure_limit", "", "bar"),
    ('"constant-volume"', '"constant-volume"\npressure_limit = "90 bar"', "combustion.pressure_limit", "no meaning", "", ""),
    ("[combustion]", "[combustion]\ncombustion_efficiency = 1.1", "combustion.combustion_efficiency", "outside", "50 %", ""),
    ("= 1.0", "= 1.0\nscavenging_efficiency = 0.9", "charge.scavenging_efficiency", "two-stroke", "", "strokes_per_cycle = 2"),
    ("[engine]", "[engine]\nstrokes_per_cycle = 2", "charge", "scavenging_efficiency", "", "92 %"),
    ("= 1.0", '= 1.0\nresidual_fraction = "solve"', "charge.residual_fraction", "charge.intake_pressure", "", "intake pair"),
    ("= 1.0", '= 1.0\nresidual_fraction = "solved"', "charge.residual_fraction", "not a number", '"solve"', '"solve"'),
    ("= 1.0", "= 1.0\naltitude = 500\nambient_pressure = 1e5", "charge.altitude", "charge.ambient_pressure", "", "remove"),
    ("= 1.0", '= 1.0\naltitude = "500 m"\nreference = "iacs-m28"', "charge.altitude", "iacs-m28", "", ""),
    ("= 1.0", '= 1.0\nambient_pressure = "0.1 bar(g)"', "charge.ambient_pressure", "absolute", "0.1 bar", ""),
    ("= 1.0", '= 1.0\negr_temperature = "90 degC"', "charge.egr_temperature", "charge.egr_fraction", "", ""),
    ('"port-liquid"', '"port-liquid"\nevaporated_by_gas = 0.4', "fuel.evaporated_by_gas", "charge.temperature", "", ""),
    ('"port-liquid"', '"direct"\nevaporated_by_gas = 0.4', "fuel.evaporated_by_gas", 'admission = "direct"', "", ""),
    ('name = "gasoline"', "", "fuel", "not given", "fuel.own", "diesel"),
    ('name = "gasoline"', "blend = 3", "fuel.blend", "list of parts", "", "mass_fraction"),
    ('name = "gasoline"', "own = 3", "fuel.own", "table", "formula", ""),
    ('name = "gasoline"', 'own = {formula = "C8X", lower_heating_value = "44 MJ/kg"}', "fuel.own.formula", "X", "C H O N S", ""),
    ('name = "gasoline"', 'own = {formula = "C8H18"}', "fuel.own.lower_heating_value", "is missing", "1 MJ/kg to 150 MJ/kg", ""),
    (
        'name = "gasoline"', 'own = {carbon = 0.86, hydrogen = 0.2, lower_heating_value = "44 MJ/kg"}',
        "fuel.own", "sum", "1 within", "",
    ),
]  # fmt: skip


@pytest.mark.parametrize(("line", "instead", "key", "message", "allowed", "hint"), SINGLE)
def test_one_mistake_is_one_problem(line: str, instead: str, key: str, message: str, allowed: str, hint: str) -> None:
    text = change(line, instead)
    problem = one(text)
    assert problem.key == key
    assert message in problem.message
    assert allowed in problem.allowed
    assert hint in problem.hint
    assert problem.line > 0
    last = key.split(".")[-1]
    if last in instead.replace("]", "").replace("[", "").split("=")[0] or f"{last} =" in problem.quoted:
        assert last in problem.quoted


BLEND = 'blend = [{name = "diesel", mass_fraction = 0.9}, {name = "fame", mass_fraction = 0.1}]'


@pytest.mark.parametrize(
    ("part", "instead", "key", "message"),
    [
        ('"fame"', '"famee"', "fuel.blend[1].name", "no such fuel"),
        ("= 0.1}", "= 0.2}", "fuel.blend", "sum"),
        ("mass_fraction = 0.1", "volume_fraction = 0.1", "fuel.blend", "mixed"),
        (", mass_fraction = 0.1", "", "fuel.blend[1]", "exactly one"),
        ("= 0.1}", "= 0.1, volume_fraction = 0.1}", "fuel.blend[1]", "exactly one"),
        ("mass_fraction = 0.1", "mass_fracton = 0.1", "fuel.blend[1].mass_fracton", "no such key"),
        ('"fame"', '"diesel"', "fuel.blend", "twice"),
        ("= 0.1}", '= "ten %"}', "fuel.blend[1].mass_fraction", "not a number"),
        ("= 0.1}", "= -0.1}", "fuel.blend[1].mass_fraction", "outside"),
        ('name = "fame", ', "", "fuel.blend[1].name", "missing"),
    ],
)
def test_mistakes_in_a_blend(part: str, instead: str, key: str, message: str) -> None:
    assert part in BLEND
    text = change('name = "gasoline"', BLEND.replace(part, instead)).replace('"port-liquid"', '"direct"')
    problem = one(text)
    assert problem.key == key
    assert message in problem.message
    assert problem.line == 8


def test_own_fuel_takes_formula_or_mass_fractions_and_not_both() -> None:
    own = 'own = {formula = "C8H18", carbon = 0.84, lower_heating_value = "44 MJ/kg"}'
    assert one(change('name = "gasoline"', own)).key.startswith("fuel.own")


MANY = """\
titel = "x"                       # 1 unknown
[engine]
bore = "84"                       # 3 no unit
stroke = "90 mm"
compression_ratio = 1             # 5 range
'speed' = 1800                    # 6 unit
[fuel]
"name" = "gasolin"                # 8 unknown fuel
admission = "port"                # 9 choice
[charge]
equivalence_ratio = -1            # 11 range
charge_air = 3                    # 12 unknown

air_fuel_ratio = "15:1"           # 14 twice
pressure = "bar"                  # 15 no number
temperature = "340 C"             # 16 unit
egr_fraction = 1.5                # 17 range
relative_humidity = "140 %"       # 18 range
[burn]                            # 19 later
[combustion]
heat_addition = "constant-volume"
pressure_limit = "90 bar"         # 22 cross
"""


def test_all_mistakes_at_once_each_on_its_line() -> None:
    found = problems_of(MANY)
    wrong = [number for number, line in enumerate(MANY.splitlines(), 1) if f"# {number} " in line]
    assert [problem.line for problem in found] == wrong
    keys = [
        "titel", "engine.bore", "engine.compression_ratio", "engine.speed", "fuel.name", "fuel.admission",
        "charge.equivalence_ratio", "charge.charge_air", "charge.air_fuel_ratio", "charge.pressure", "charge.temperature",
        "charge.egr_fraction", "charge.relative_humidity", "burn", "combustion.pressure_limit",
    ]  # fmt: skip
    assert [problem.key for problem in found] == keys
    text = "\n".join(map(str, found))
    for part in ("case.toml, line 11", "| equivalence_ratio = -1", "given:   -1", "allowed: 0.01 to 5"):
        assert part in text


def test_missing_sections_are_said_once_each() -> None:
    found = problems_of("title = 'x'\n")
    assert [(problem.key, problem.line) for problem in found] == [(key, 0) for key in ("engine", "fuel", "charge", "combustion")]


@pytest.mark.parametrize(
    "text",
    [
        "engine = 3\n" + GOOD.replace("[engine]", "[engines]"),
        GOOD.replace("[engine]", "[[engine]]"),
        "engine.fuel.charge = 3",
        "fuel = []\ncharge = [[1]]\ngas = 1979-05-27\nlimits = ''",
        "[engine]\n[engine.bore]\nx = 1",
    ],
)
def test_tables_of_the_wrong_shape(text: str) -> None:
    assert any("table" in problem.message or "no such" in problem.message or "number" in problem.message
               for problem in problems_of(text))  # fmt: skip


@pytest.mark.parametrize(
    ("text", "line", "message"),
    [
        ("[engine]\nbore = 84 mm\n", 2, "not valid TOML"),
        ("[engine]\nbore = \n", 2, "not valid TOML"),
        ("[engine\nbore = 3\n", 1, "not valid TOML"),
        ('a = "x\n', 1, "not valid TOML"),
        ("[engine]\nbore = 1\nbore = 2\n", 3, "stands twice"),
        ("[engine]\n[fuel]\n[engine]\n", 3, "stands twice"),
        ("a = [1, 2", 1, "not valid TOML"),
        ("a = " + "[" * 100_000, 0, "nested too deeply"),
        ("a = " + "9" * 5000, 0, "not valid TOML"),
    ],
)
def test_toml_syntax(text: str, line: int, message: str) -> None:
    problem = one(text)
    assert problem.line == line
    assert message in problem.message


def read_problem(path: Path) -> Problem:
    with pytest.raises(InputError) as caught:
        Case.read(path)
    (problem,) = caught.value.problems
    assert problem.file == str(path)
    shown = "".join(traceback.format_exception(caught.value))
    assert "During handling" not in shown
    assert "direct cause" not in shown
    return problem


def test_files_that_cannot_be_a_case(tmp_path: Path) -> None:
    good = tmp_path / "launch.toml"
    good.write_text(GOOD, encoding="utf-8")
    assert Case.read(good) == Case.read(str(good)) == Case.from_toml(GOOD)

    missing = read_problem(tmp_path / "launhc.toml")
    assert "no such file" in missing.message
    assert missing.hint == str(good)
    assert "fuelair new" in read_problem(tmp_path / "nowhere" / "x.toml").hint
    assert "folder" in read_problem(tmp_path).message

    latin = tmp_path / "latin.toml"
    latin.write_bytes(GOOD.replace("launch", "caf\xe9").encode("latin-1"))
    assert "not UTF-8" in read_problem(latin).message
    assert read_problem(latin).line == 1
    wide = tmp_path / "wide.toml"
    wide.write_bytes(GOOD.encode("utf-16"))
    assert "not UTF-8" in read_problem(wide).message

    large = tmp_path / "large.toml"
    large.write_bytes(b"#" * 5_000_000)
    assert "too large" in read_problem(large).message
    assert str(LARGEST_FILE // 1000) in read_problem(large).allowed

    null = tmp_path / "null.toml"
    null.write_bytes(b"title = 'a\x00b'\n")
    assert "not valid TOML" in read_problem(null).message
    with pytest.raises(InputError):
        Case.read("a\x00b.toml")


def test_byte_order_mark_and_windows_line_ends_are_read(tmp_path: Path) -> None:
    path = tmp_path / "windows.toml"
    path.write_bytes(b"\xef\xbb\xbf" + GOOD.replace("\n", "\r\n").encode())
    assert Case.read(path) == Case.from_toml(GOOD)
    path.write_bytes(b"\xef\xbb\xbf" + MANY.replace("\n", "\r\n").encode())
    with pytest.raises(InputError) as caught:
        Case.read(path)
    assert [problem.line for problem in caught.value.problems] == [problem.line for problem in problems_of(MANY)]


def test_dictionaries_have_no_line() -> None:
    data = copy.deepcopy(load(GOOD, "x"))
    data["charge"]["pressure"] = "bar"
    with pytest.raises(InputError) as caught:
        Case.from_dict(data)
    (problem,) = caught.value.problems
    assert (problem.file, problem.line, problem.quoted, problem.key) == ("", 0, "", "charge.pressure")
    for wrong in ([], "text", {1: 2}, None):
        with pytest.raises(InputError):
            Case.from_dict(wrong)


def test_lines_of_every_spelling_of_a_key() -> None:
    text = '''\
# [not.a.table]
a = "# no comment, no [table]" # comment
b.c."d.e" = 1

[t] # comment
"quoted key" = """
fake = 1
[fake]
"quotes"" """
lit = \'\'\'
'fake' = 2\'\'\'
arr = [ # comment ]
  1, "]", # comment
  {x = 1, y = [2,
     3]},
]
[t.sub.deep]
k = 1e3
[[list]]
k = 1
[list.sub]
k = 2
[[list]]
k = 3
'''
    assert load(text, "x")["t"]["arr"][2] == {"x": 1, "y": [2, 3]}
    lines = key_lines(text)
    expected = {
        ("a",): 2, ("b", "c", "d.e"): 3, ("t",): 5, ("t", "quoted key"): 6, ("t", "lit"): 10, ("t", "arr"): 12,
        ("t", "arr", 0): 13, ("t", "arr", 1): 13, ("t", "arr", 2, "x"): 14, ("t", "arr", 2, "y", 1): 15,
        ("t", "sub", "deep", "k"): 18, ("list", 0, "k"): 20, ("list", 0, "sub", "k"): 22, ("list", 1, "k"): 24,
    }  # fmt: skip
    assert {key: lines.get(key) for key in expected} == expected
    assert not any("fake" in key for key in lines)


SCALARS = st.one_of(st.integers(-9, 9), st.booleans(), st.floats(allow_nan=False), st.text(max_size=8), st.dates())
TREES = st.dictionaries(
    st.text(min_size=1, max_size=5),
    st.recursive(SCALARS, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=4), inner, max_size=3)),
    max_size=5,
)


def paths(value: Any, above: tuple[str | int, ...] = ()) -> set[tuple[str | int, ...]]:
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    return {path for key, item in items for path in ({(*above, key)} | paths(item, (*above, key)))}


@settings(max_examples=200, deadline=None)
@given(TREES, st.booleans())
def test_every_key_of_any_toml_has_a_line(tree: dict[str, Any], multiline: bool) -> None:
    text = tomli_w.dumps(tree, multiline_strings=multiline)
    data = load(text, "x")
    lines = key_lines(text)
    assert paths(data) <= set(lines)
    assert all(1 <= line <= text.count("\n") + 1 for line in lines.values())


PIECES = [
    "bore",
    "=",
    '"84 mm"',
    "[engine]",
    "\n",
    "[[fuel]]",
    ".",
    "'",
    '"',
    "{",
    "}",
    "[",
    "]",
    ",",
    "1",
    "#",
    " ",
    '"""',
    "name",
]


@settings(max_examples=300, deadline=None)
@given(st.lists(st.one_of(st.sampled_from(PIECES), st.text(max_size=3)), max_size=30))
def test_any_text_is_an_input_error_and_never_a_traceback(pieces: list[str]) -> None:
    with pytest.raises(InputError) as caught:
        Case.from_toml("".join(pieces))
    assert all(str(problem) for problem in caught.value.problems)


@settings(max_examples=300, deadline=None)
@given(
    st.sampled_from(GOOD.splitlines()),
    st.one_of(SCALARS, st.lists(SCALARS, max_size=2), st.dictionaries(st.text(max_size=3), SCALARS, max_size=2)),
)
def test_any_value_at_any_key_is_taken_or_refused_with_that_key(line: str, value: object) -> None:
    if " = " not in line:
        return
    key = line.split(" = ")[0]
    text = GOOD.replace(line, f"{key} = {_inline(value)}")
    found: list[Problem] = []
    try:
        Case.from_toml(text)
    except InputError as error:
        found.extend(error.problems)
    assert not found or any(key in str(problem) for problem in found)


def _inline(value: object) -> str:
    """A value as TOML writes it on the right of an equals sign."""
    if isinstance(value, dict):
        return "{" + ", ".join(tomli_w.dumps({key: item}).strip() for key, item in value.items()) + "}"
    return tomli_w.dumps({"x": value}).partition(" = ")[2].strip()
