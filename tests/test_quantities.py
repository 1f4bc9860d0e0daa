"""Units and the quantity table: exact numbers, round trips, and one clear error for everything else."""

from __future__ import annotations

import math
from fractions import Fraction

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from fuelair.errors import InputError
from fuelair.quantities import (
    QUANTITIES,
    UNITS,
    header,
    in_unit,
    is_gauge,
    parse,
    shown,
    shown_value,
    stored_unit,
)

EVERY_UNIT = [(dimension, name) for dimension, units in UNITS.items() for name in units]


@pytest.mark.parametrize(
    ("text", "dimension", "expected"),
    [
        ("86 mm", "length", 0.086),
        ("2.9 bar", "pressure", 290000.0),
        ("1.1bar", "pressure", 110000.0),
        ("  200   bar ", "pressure", 2.0e7),
        ("1013 mbar", "pressure", 101300.0),
        ("1 atm", "pressure", 101325.0),
        ("0 bar(g)", "pressure", 101325.0),
        ("1.5 bar(g)", "pressure", 251325.0),
        ("47 degC", "temperature", 320.15),
        ("47 °C", "temperature", 320.15),
        ("-40 degF", "temperature", 233.15),
        ("335 K", "temperature", 335.0),
        ("35 %", "ratio", 0.35),
        ("35%", "ratio", 0.35),
        ("0.6", "ratio", 0.6),
        ("17:1", "ratio", 17.0),
        ("14.7 : 1", "ratio", 14.7),
        ("420 ppm", "ratio", 420e-6),
        ("3 \u2030", "ratio", 0.003),
        ("1800 rpm", "speed", 30.0),
        ("1500 1/min", "speed", 25.0),
        ("\u2212120 deg", "angle", -120.0),
        ("820 kg/m³", "density", 820.0),
        ("0.82 g/cm3", "density", 820.0),
        ("44 MJ/kg", "specific energy", 44e6),
        ("7 µm", "length", 7e-6),
        ("2.1 kJ/(kg K)", "specific heat capacity", 2100.0),
        ("2.1 kJ/(kg\u00b7K)", "specific heat capacity", 2100.0),
        ("32.04 g/mol", "molar mass", 32.04),
        ("120 mg", "mass", 1.2e-4),
        ("1.5e2 kW", "power", 150e3),
    ],
)
def test_text_gives_the_exact_number(text: str, dimension: str, expected: float) -> None:
    assert parse(text, dimension) == expected


def test_definitions_of_derived_units() -> None:
    # 1 lbf/in2 from the exact pound (0.45359237 kg), g_n = 9.80665 m/s2 and inch (25.4 mm): international definitions
    assert parse("1 psi", "pressure") == pytest.approx(0.45359237 * 9.80665 / 0.0254**2, rel=1e-15)
    # one horsepower is 550 ft lbf/s
    assert parse("1 hp", "power") == pytest.approx(550 * 0.3048 * 0.45359237 * 9.80665, rel=1e-15)
    assert parse(f"{math.tau!r} rad/s", "speed") == pytest.approx(1.0, rel=1e-15)
    assert parse(f"{math.pi!r} rad", "angle") == pytest.approx(180.0, rel=1e-15)
    assert parse("1 g/kWh", "mass per energy") == pytest.approx(1e-3 / 3.6e6, rel=1e-15)
    assert parse("1 kWh", "energy") == 3.6e6


def test_plain_numbers_are_stored_units() -> None:
    assert parse(290000, "pressure") == 290000.0
    assert isinstance(parse(6, "ratio"), float)
    assert parse(-120.0, "angle") == -120.0


def test_gauge_counts_from_ambient() -> None:
    assert parse("2 bar(g)", "pressure", ambient_pressure=95000.0) == 295000.0
    assert parse("2 bar", "pressure", ambient_pressure=95000.0) == 200000.0
    assert is_gauge("2 bar(g)")
    assert not is_gauge("2 bar")
    assert not is_gauge(2e5)


@pytest.mark.parametrize(
    ("value", "dimension", "message", "hint"),
    [
        ("bar", "pressure", "without a number", "bar"),
        ("2.9", "pressure", "without a unit", '"2.9 bar"'),
        ("5 bar*5", "pressure", "unknown unit", "5 bar"),
        ("14.7:1 bar", "pressure", "proportion", ""),
        ("17:1 %", "ratio", "proportion", '"17:1"'),
        ("2,9 bar", "pressure", "comma", '"2.9 bar"'),
        ("1,000 rpm", "speed", "comma", '"1000 rpm"'),
        ("nan bar", "pressure", "finite", ""),
        ("inf", "ratio", "finite", ""),
        ("1e999 bar", "pressure", "finite", ""),
        ("-1e308 bar", "pressure", "too large", ""),
        ("1e308:1e-300", "ratio", "too large", ""),
        (math.nan, "ratio", "finite", ""),
        (math.inf, "pressure", "finite", ""),
        (10**400, "pressure", "finite", ""),
        (True, "ratio", "neither", ""),
        (None, "ratio", "neither", ""),
        ([1.0], "ratio", "neither", ""),
        ("3 mm", "pressure", "unit of length", "3 bar"),
        ("1 Bar", "pressure", "unknown unit", '"1 bar"'),
        ("47 C", "temperature", "unknown unit", '"47 degC"'),
        ("2 barg", "pressure", "unknown unit", '"2 bar(g)"'),
        ("1500 RPM", "speed", "unknown unit", '"1500 rpm"'),
        ("10 percent", "ratio", "unknown unit", '"10 %"'),
        ("", "pressure", "not a number", ""),
        ("1 2 bar", "pressure", "unknown unit", ""),
        ("5² bar", "pressure", "unknown unit", ""),
        ("9" * 5000 + " bar", "pressure", "too long", ""),
        ("1:0", "ratio", "positive", ""),
    ],
)
def test_everything_else_is_one_clear_error(value: object, dimension: str, message: str, hint: str) -> None:
    with pytest.raises(InputError) as caught:
        parse(value, dimension)
    (problem,) = caught.value.problems
    assert message in problem.message
    assert hint in problem.hint
    assert stored_unit(dimension) in problem.allowed


@given(st.sampled_from(EVERY_UNIT), st.floats(-1e12, 1e12))
def test_text_is_converted_with_one_rounding(unit: tuple[str, str], number: float) -> None:
    dimension, name = unit
    row = UNITS[dimension][name]
    exact = Fraction(repr(number)) * row.factor + row.offset + (101325 if row.gauge else 0)
    assert parse(f"{number!r} {name}", dimension) == float(exact)


@given(st.sampled_from(EVERY_UNIT), st.floats(1e-6, 1e9))
def test_there_and_back(unit: tuple[str, str], number: float) -> None:
    dimension, name = unit
    row = UNITS[dimension][name]
    there = row.to_si(number)
    # the offset (273.15 K, 1 atm) eats digits of a small number, so compare on the scale of the sum
    scale = max(number, abs(float((row.offset + (101325 if row.gauge else 0)) / row.factor)))
    assert row.from_si(there) == pytest.approx(number, rel=1e-15, abs=4e-16 * scale)


@given(st.text(max_size=70), st.sampled_from(sorted(UNITS)))
def test_any_text_gives_a_finite_number_or_an_input_error(text: str, dimension: str) -> None:
    number = None
    allowed = []
    try:
        number = parse(text, dimension)
    except InputError as error:
        allowed = [problem.allowed for problem in error.problems]
    if number is None:
        assert len(allowed) == 1
        assert allowed[0]
    else:
        assert math.isfinite(number)
        assert any(character in "0123456789" for character in text)


@given(st.sampled_from(EVERY_UNIT), st.text(min_size=1, max_size=3))
def test_no_trailing_text_is_swallowed(unit: tuple[str, str], tail: str) -> None:
    dimension, name = unit
    assume(tail.strip() and f"{name}{tail}".split() != name.split())
    try:
        number = parse(f"3 {name}{tail}", dimension)
    except InputError:
        return
    longer = " ".join(f"{name}{tail}".replace("\u00b2", "2").replace("\u00b3", "3").split())
    assert longer in UNITS[dimension]
    assert number == UNITS[dimension][longer].to_si(3.0)


def test_stored_units_have_factor_one() -> None:
    for dimension, units in UNITS.items():
        first = units[stored_unit(dimension)]
        assert (first.factor, first.offset, first.gauge) == (1, 0, False)
        assert all(unit.dimension == dimension and unit.name == name for name, unit in units.items())


def test_every_key_ends_in_its_si_unit() -> None:
    suffixes = {
        "K": "_K", "Pa": "_Pa", "J/kg": "_J_per_kg", "J/(kg K)": "_J_per_kgK", "m3/kg": "_m3_per_kg",
        "m3": "_m3", "kg": "_kg", "W": "_W", "kg/s": "_kg_per_s",
    }  # fmt: skip
    for key, row in QUANTITIES.items():
        assert row.key == key
        assert row.label
        assert row.symbol
        if row.si_unit == "kg/J":
            assert "_kg_per_J" in key
        elif row.si_unit != "1":
            assert f"_{key}".endswith(suffixes[row.si_unit])
        else:
            assert not any(f"_{key}".endswith(suffix) for suffix in suffixes.values())
    labels = [row.label for row in QUANTITIES.values()]
    assert len(set(labels)) == len(labels)


def test_shown_values() -> None:
    assert shown("peak_pressure_Pa", 2.0e7) == "200.00 bar"
    assert shown("peak_temperature_K", 2882.4) == "2882 K"
    assert shown("exhaust_temperature_K", 873.15) == "873 K (600 degC)"
    assert shown("indicated_efficiency", 0.4243) == "42.4 %"
    assert shown("isfc_kg_per_J", 0.2 / 3.6e6) == "200.0 g/kWh"
    assert shown("work_J_per_kg", 1.0e6) == "1000.0 kJ/kg"
    assert shown("cutoff_ratio", 1.8) == "1.800"
    assert shown("peak_pressure_Pa", None) == "-"
    assert shown("peak_pressure_Pa", 2.0e7, unit=False) == "200.00"
    assert shown_value("indicated_power_W", 250e3) == 250.0
    assert header("peak_pressure_Pa") == "Peak pressure [bar]"
    assert header("cutoff_ratio") == "Cut-off ratio"
    assert in_unit(290000.0, "bar", "pressure") == "2.9 bar"
