"""The case: demos, defaults, round trips, schema, and the doors through which it is built."""

from __future__ import annotations

import copy
import json
import pickle
import subprocess
import sys
import tomllib

import jsonschema
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fuelair import air, fuel, resources
from fuelair.case import Case
from fuelair.case.fields import Within, kind_of
from fuelair.case.schema import LATER_SECTIONS, SECTIONS, OwnFuel, Reference
from fuelair.case.templates import names, template
from fuelair.errors import InputError, Problem

DEMOS = ["gasoline-launch", "hydrogen-genset", "methanol-ferry", "workboat"]
PLAIN = {
    "engine": {"compression_ratio": 8},
    "fuel": {"name": "iso-octane", "admission": "premixed"},
    "charge": {"equivalence_ratio": 1.0, "pressure": "1 atm", "temperature": 350},
    "combustion": {"heat_addition": "constant-volume"},
}


def plain(**changes: object) -> Case:
    """The plain case with changes such as ``charge__pressure="2 bar"``."""
    return Case.from_dict(PLAIN).replace({key.replace("__", "."): value for key, value in changes.items()})


def demo(name: str) -> Case:
    return Case.read(resources.demos() / f"{name}.toml")


def test_the_demos_are_these() -> None:
    assert names() == DEMOS


@pytest.mark.parametrize("name", DEMOS)
def test_demos_read_and_come_back_the_same(name: str) -> None:
    case = demo(name)
    again = Case.from_toml(case.to_toml())
    assert again == case
    assert again.defaulted == case.defaulted
    assert case.to_toml() == again.to_toml()


@pytest.mark.parametrize("name", DEMOS)
def test_template_is_the_demo_with_every_other_key_as_comment(name: str) -> None:
    text = template(name)
    assert Case.from_toml(text) == demo(name)
    for section, model in SECTIONS.items():
        assert f"[{section}]" in text
        for key in model.model_fields:
            assert f"\n{key} = " in text or f"\n# {key} = " in text, f"{section}.{key}"


def test_template_comments_hold_values_that_their_keys_accept() -> None:
    section = ""
    checked = 0
    for line in template("workboat").splitlines():
        bare = line.removeprefix("# ")
        if bare.startswith("["):
            section = bare.strip("[]")
        elif line.startswith("# ") and section and " = " in bare:
            ((key, value),) = tomllib.loads(bare).items()
            kind = kind_of(SECTIONS[section].model_fields[key])
            if kind is not None:
                kind.check(value)
                checked += 1
    assert checked > 20


def test_template_of_an_unknown_demo_names_the_nearest() -> None:
    with pytest.raises(InputError) as caught:
        template("workbot")
    assert caught.value.problems[0].hint == "workboat"


def test_workboat_in_si() -> None:
    case = demo("workboat")
    assert (case.engine.bore, case.engine.stroke, case.engine.speed) == (0.16, 0.19, 30.0)
    assert case.engine.compression_ratio == 17.0
    assert (case.charge.pressure, case.charge.temperature) == (290000.0, 335.0)
    assert case.charge.residual_fraction == 0.03
    assert case.fuel.pressure == 1.6e8
    assert case.combustion.pressure_limit == 2.0e7
    assert case.engine.intake_closing == -145.0
    assert demo("gasoline-launch").charge.residual_fraction == "solve"


def test_every_default_is_visible_and_named() -> None:
    case = plain()
    assert case.resolved() == {
        "title": "",
        "engine": {
            "cylinders": 1, "compression_ratio": 8.0, "strokes_per_cycle": 4, "pin_offset": 0.0,
            "intake_closing": -180.0, "exhaust_opening": 180.0, "exhaust_closing": 360.0,
        },
        "fuel": {
            "name": "iso-octane", "admission": "premixed", "temperature": 298.15, "pressure": 101325.0,
            "evaporated_by_gas": 1.0,
        },
        "charge": {
            "equivalence_ratio": 1.0, "pressure": 101325.0, "temperature": 350.0, "exhaust_pressure": 101325.0,
            "residual_fraction": 0.0, "egr_fraction": 0.0, "ambient_pressure": 101325.0,
            "ambient_temperature": 298.15, "relative_humidity": 0.0,
        },
        "combustion": {"heat_addition": "constant-volume", "combustion_efficiency": 1.0},
        "gas": {"model": "ideal", "expansion": "equilibrium"},
        "limits": {},
    }  # fmt: skip
    written = {f"{section}.{key}" for section, keys in PLAIN.items() for key in keys}
    everything = {f"{section}.{key}" for section, keys in case.resolved().items() if isinstance(keys, dict) for key in keys}
    assert case.defaulted == (everything | {"title"}) - written


def test_defaults_that_follow_from_other_keys() -> None:
    pair = {"charge__pressure": None, "charge__temperature": None}
    intake = plain(**pair, charge__intake_pressure="1.5 bar", charge__intake_temperature="320 K")
    assert intake.charge.exhaust_pressure == 150000.0
    two = plain(engine__strokes_per_cycle=2, charge__scavenging_efficiency="92 %")
    assert two.engine.exhaust_closing == -180.0
    assert two.charge.residual_fraction == pytest.approx(0.08, abs=1e-15)
    cooled = plain(charge__egr_fraction="10 %")
    assert cooled.charge.egr_temperature == 350.0
    assert plain().charge.egr_temperature is None
    assert "charge.exhaust_pressure" in intake.defaulted
    assert "charge.intake_pressure" not in intake.defaulted


def test_reference_conditions_and_altitude_fill_the_ambient_keys() -> None:
    marine = plain(charge__reference="iacs-m28").charge
    outside = air.REFERENCE["iacs-m28"]
    assert (marine.ambient_pressure, marine.ambient_temperature) == (outside.pressure, outside.temperature)
    assert marine.relative_humidity == outside.relative_humidity
    own = plain(charge__reference="iacs-m28", charge__relative_humidity="20 %").charge
    assert own.relative_humidity == 0.2
    assert own.ambient_pressure == outside.pressure
    high = plain(charge__altitude="2000 m").charge
    # 79 501 Pa and 275.15 K: ISO 2533 table at 2000 m, from memory; the law itself is tested with air.py
    assert high.ambient_pressure == pytest.approx(79501.0, abs=1.0)
    assert high.ambient_temperature == pytest.approx(275.15, abs=0.01)


def test_gauge_pressures_count_from_the_ambient_pressure() -> None:
    assert plain(charge__pressure="1 bar(g)").charge.pressure == 201325.0
    assert plain(charge__pressure="1 bar(g)", charge__ambient_pressure="950 mbar").charge.pressure == 195000.0
    assert plain(charge__pressure="1 bar(g)", charge__reference="iso-3046").charge.pressure == 200000.0
    high = plain(charge__pressure="1 bar(g)", charge__altitude="2000 m").charge
    assert high.ambient_pressure is not None
    assert high.pressure == pytest.approx(1e5 + high.ambient_pressure)
    limited = plain(combustion__heat_addition="pressure-limited", combustion__pressure_limit="99 bar(g)")
    assert limited.combustion.pressure_limit == 99e5 + 101325.0


def test_choices_agree_with_the_rooms_below() -> None:
    assert set(Reference.__args__) == set(air.REFERENCE)
    lowest, highest = air.ALTITUDE_RANGE
    kind = kind_of(SECTIONS["charge"].model_fields["altitude"])
    assert isinstance(kind, Within)
    assert (kind.low, kind.high) == (lowest, highest)
    for key, (low, high, _) in fuel.users.RANGES.items():
        own = kind_of(OwnFuel.model_fields[key])
        assert isinstance(own, Within)
        assert (own.low, own.high) == (low, high), key


def test_replace_checks_again() -> None:
    case = plain()
    assert case.replace({"charge.equivalence_ratio": 0.5}).charge.equivalence_ratio == 0.5
    swapped = case.replace({"charge.equivalence_ratio": None, "charge.air_fuel_ratio": "15:1"})
    assert swapped.charge.air_fuel_ratio == 15.0
    assert swapped.charge.equivalence_ratio is None
    assert case.charge.equivalence_ratio == 1.0
    for wrong in ({"charge.equivalence_ratio": -1}, {"engine.speed.x": 1}, {"engine.speed": 25.0, "nonsense": 3}):
        with pytest.raises(InputError):
            case.replace(wrong)


def test_case_is_frozen_and_travels() -> None:
    case = demo("workboat")
    with pytest.raises(ValueError, match="frozen"):
        case.title = "other"
    with pytest.raises(ValueError, match="frozen"):
        case.charge.pressure = 1.0
    for twin in (copy.deepcopy(case), pickle.loads(pickle.dumps(case))):
        assert twin == case
        assert hash(twin) == hash(case)
        assert twin.defaulted == case.defaulted
    assert case != demo("methanol-ferry")
    assert Case.from_toml(case.to_toml().replace("title = ", "# c\ntitle =")) == case


def test_sections_may_be_given_as_sections() -> None:
    case = demo("workboat")
    parts = {name: getattr(case, name) for name in ("engine", "fuel", "charge", "combustion", "limits")}
    assert Case(title=case.title, **parts) == case


def test_blends_and_own_fuels() -> None:
    blend = [{"name": "diesel", "mass_fraction": "93 %"}, {"name": "fame", "mass_fraction": 0.07}]
    mixed = plain(fuel__name=None, fuel__admission="direct", fuel__blend=blend)
    assert mixed.fuel.blend is not None
    assert [part.mass_fraction for part in mixed.fuel.blend] == [0.93, 0.07]
    assert Case.from_toml(mixed.to_toml()) == mixed
    figures = {"formula": "C12H26", "lower_heating_value": "44.1 MJ/kg", "density": "0.75 kg/L"}
    own = plain(fuel__name=None, fuel__admission="direct", fuel__own=figures)
    assert own.fuel.own is not None
    assert own.fuel.own.density == 750.0
    assert Case.from_toml(own.to_toml()) == own


SCHEMA = Case.json_schema()


@pytest.mark.parametrize("name", DEMOS)
def test_json_schema_accepts_the_raw_demos(name: str) -> None:
    jsonschema.Draft202012Validator.check_schema(SCHEMA)
    raw = tomllib.loads((resources.demos() / f"{name}.toml").read_text(encoding="utf-8"))
    jsonschema.validate(raw, SCHEMA)
    jsonschema.validate(tomllib.loads(demo(name).to_toml()), SCHEMA)


@pytest.mark.parametrize(
    ("section", "key", "value"),
    [
        ("charge", "equivalence_ratio", -1),
        ("charge", "pressure", "bar"),
        ("charge", "pressure", [1]),
        ("charge", "residual_fraction", "solv"),
        ("engine", "compression_ratio", 1),
        ("engine", "strokes_per_cycle", 3),
        ("engine", "no_such_key", 1),
        ("fuel", "admission", "port"),
        ("gas", "model", "reel"),
        ("burn", "duration", 40),
    ],
)
def test_json_schema_refuses_what_the_case_refuses(section: str, key: str, value: object) -> None:
    raw = copy.deepcopy(PLAIN)
    raw.setdefault(section, {})[key] = value
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(raw, SCHEMA)
    with pytest.raises(InputError):
        Case.from_dict(raw)


def test_json_schema_describes_every_key() -> None:
    definitions = SCHEMA["$defs"]
    for model in SECTIONS.values():
        for key, entry in definitions[model.__name__]["properties"].items():
            assert entry["description"], key
            kind = kind_of(model.model_fields[key])
            if isinstance(kind, Within):
                assert entry["x-dimension"] == kind.dimension
                assert kind.unit in entry["x-units"]
                assert (entry["minimum"], entry["maximum"]) == (kind.low, kind.high)
    text = json.dumps(SCHEMA)
    assert '"null"' not in text
    assert '"default": null' not in text
    assert not set(LATER_SECTIONS) & set(SCHEMA["properties"])


def test_every_default_and_example_passes_its_own_check() -> None:
    for model in (*SECTIONS.values(), OwnFuel):
        for key, field in model.model_fields.items():
            kind = kind_of(field)
            for value in [
                *(field.examples or []),
                *([] if field.is_required() or field.default is None else [field.default]),
            ]:
                assert kind is not None
                assert kind.check(value) is not None, key


NUMBERS = {
    "charge.equivalence_ratio": (0.01, 5.0), "charge.pressure": (5000.0, 5e6), "charge.temperature": (200.0, 800.0),
    "engine.compression_ratio": (1.5, 60.0), "charge.relative_humidity": (0.0, 1.0), "engine.speed": (0.2, 500.0),
    "combustion.combustion_efficiency": (0.5, 1.0), "fuel.temperature": (100.0, 600.0),
}  # fmt: skip


@settings(max_examples=50, deadline=None)
@given(st.fixed_dictionaries({key: st.floats(low, high) for key, (low, high) in NUMBERS.items()}))
def test_any_numbers_in_range_come_back_bit_for_bit(numbers: dict[str, float]) -> None:
    case = Case.from_dict(PLAIN).replace(numbers)
    again = Case.from_toml(case.to_toml())
    assert again == case
    for key, value in numbers.items():
        section, name = key.split(".")
        assert getattr(getattr(again, section), name) == value


def test_reading_a_case_loads_no_heavy_library() -> None:
    code = (
        "import sys; from fuelair.case.templates import template; from fuelair.case import Case; "
        "Case.from_toml(template('hydrogen-genset')); "
        "print([m for m in ('cantera', 'pandas', 'scipy', 'numba', 'jsonschema') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_a_problem_found_later_is_placed_in_the_text() -> None:
    case = demo("workboat")
    assert case.written("combustion.pressure_limit") == "200 bar"
    assert case.written("charge.egr_fraction") is None
    placed = case.place(Problem("too low", "combustion.pressure_limit"))
    assert placed.file.endswith("workboat.toml")
    assert placed.quoted.startswith('pressure_limit = "200 bar"')
    bare = Problem("too low", "combustion.heat_addition")
    assert plain().place(bare) == bare
