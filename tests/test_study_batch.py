"""The study core: a row equals the assessment of its case, whatever rows run beside it."""

from __future__ import annotations

import pickle

import numpy as np
import pytest

import fuelair
from fuelair import outputs, resources
from fuelair.case import keys
from fuelair.cycle.result import EXCHANGE_FIGURES, FREEZE_MODEL, MODELS
from fuelair.errors import InputError
from fuelair.gas.engine import Status
from fuelair.study import figures
from fuelair.study.batch import Study
from fuelair.study.columns import heading

DEMOS = ("workboat", "hydrogen-genset", "methanol-ferry", "gasoline-launch")
EXTRA = ("indicated_power", "exhaust_O2_dry", "mixed_exhaust_temperature", "oxygen_excess_ratio", "exhaust_dew_point")


def demo(name="workboat", **changes):
    case = fuelair.Case.read(resources.demos() / f"{name}.toml")
    return case.replace({key.replace("__", "."): value for key, value in changes.items()})


def study(case, *varied, quantities=(*figures.MODEL_FIGURES, *EXTRA), engine="reference", **more):
    return Study(case, varied, engine=engine, quantities=quantities, **more)


def figures_of(a, model=None):
    """Every figure of an assessment under the names of a study."""
    found = {**a.charge_figures(), **a.engine_figures, **a.exhaust_figures, **a.figures(model)}
    found[figures.MIXED] = a.exhaust_figures["exhaust_temperature_K"]
    found[figures.FLAME] = a.flame_temperature
    return found


def agree(made, columns, *, model=None, rel=1e-12):
    rows = made.run(columns)
    assert rows.status.tolist() == [0] * len(rows)
    for i in range(len(rows)):
        case = made.case_of({key: values[i] for key, values in columns.items()})
        known = figures_of(fuelair.assess(case), model)
        for name in made.quantities:
            value = rows.figures[name][i]
            if known[name] is None:
                assert np.isnan(value), name
            else:
                assert value == pytest.approx(known[name], rel=rel, abs=1e-9 if name == "pmep_Pa" else 0.0), name
    return rows


@pytest.mark.parametrize("name", DEMOS)
def test_every_written_number_varied_at_once(name):
    case = demo(name)
    varied = {key: value for key, value in case.given().items() if "." in key and not isinstance(value, str | tuple)}
    varied = {key: value for key, value in varied.items() if not key.startswith("tolerance.") and keys.is_number(key)}
    assert len(varied) >= 15
    columns = {}
    for i, (key, value) in enumerate(varied.items()):
        share = 0.5 + 0.4 * np.sin([i, 2.0 * i])  # no two keys alike
        if key == "engine.cylinders":
            columns[key] = np.array([value, value + 1.0])
        elif value <= 1.0 and key.split(".")[1] in ("combustion_efficiency", "relative_humidity", "evaporated_by_gas"):
            columns[key] = value * (0.97 + 0.03 * share)
        else:
            columns[key] = value * (0.98 + 0.04 * share)
    agree(study(case, *columns), columns)


@pytest.mark.parametrize("model", [*MODELS[:4], "fuel-air-real-gas"])
def test_other_models_run_on_the_headlines_charge(model):
    made = study(demo("gasoline-launch"), "charge.equivalence_ratio", model=model, quantities=None)
    assert made.quantities == figures.MODEL_FIGURES
    agree(made, {"charge.equivalence_ratio": np.array([0.9, 1.0])}, model=model)


def test_real_frozen_and_freeze_below_as_headline():
    case = demo(gas__expansion=None)
    made = study(case, "gas.model", "charge.pressure")
    assert made.model is None
    agree(made, {"gas.model": ["ideal", "real"], "charge.pressure": np.array([2.5e5, 3.0e5])})
    agree(study(case, "gas.expansion"), {"gas.expansion": ["frozen", "equilibrium"]})
    made = study(case, "gas.freeze_temperature")
    assert made.model == FREEZE_MODEL
    agree(made, {"gas.freeze_temperature": np.array([1600.0, 2000.0])})


def test_names_and_numbers_that_change_the_make_up():
    columns = {
        "fuel.name": ["methanol", "diesel", "methanol", "diesel"],
        "combustion.combustion_efficiency": np.array([0.98, 0.99, 0.97, 1.0]),
        "fuel.pressure": ["600 bar", "1500 bar", "700 bar", "1600 bar"],
    }
    rows = agree(study(demo(), *columns), columns)
    assert rows.keys["fuel.name"] == columns["fuel.name"]
    assert rows.keys["fuel.pressure"].tolist() == [6e7, 1.5e8, 7e7, 1.6e8]


def test_residual_solved_and_given_in_one_column():
    columns = {"charge.residual_fraction": ["solve", 0.05, "3 %", "solve"], "charge.equivalence_ratio": [0.4, 0.4, 0.45, 0.45]}
    made = study(demo("hydrogen-genset"), *columns)
    rows = agree(made, columns)
    assert rows.keys["charge.residual_fraction"] == ["solve", "0.05", "0.03", "solve"]
    assert rows.figures["residual_fraction"][1:3] == pytest.approx([0.05, 0.03], rel=1e-12)


def test_blends_and_own_fuels():
    parts = [{"name": "diesel", "mass_fraction": 0.9}, {"name": "fame", "mass_fraction": 0.1}]
    columns = {"fuel.blend[0].mass_fraction": [0.5, 0.8], "fuel.blend[1].mass_fraction": [0.5, 0.2]}
    agree(study(demo(fuel__name=None, fuel__blend=parts), *columns), columns)
    own = {"formula": "C12H26", "lower_heating_value": 44e6, "density": 750.0}
    columns = {"fuel.own.lower_heating_value": [43e6, 44e6], "engine.compression_ratio": [15.0, 16.0]}
    agree(study(demo(fuel__name=None, fuel__own=own), *columns), columns)


def test_defaults_follow_their_column():
    base = demo("gasoline-launch", charge__exhaust_pressure=None, charge__residual_fraction=None)
    columns = {
        "charge.intake_pressure": np.array([0.5e5, 0.9e5]),
        "charge.intake_temperature": np.array([380.0, 400.0]),
        "charge.egr_fraction": np.array([0.0, 0.1]),
        "charge.water_fuel_ratio": np.array([0.0, 0.2]),
    }
    rows = agree(study(base, *columns), columns)
    assert rows.figures["pmep_Pa"] == pytest.approx([0.0, 0.0], abs=1e-9)
    high = demo(charge__ambient_pressure=None, charge__ambient_temperature=None)
    agree(study(high, "charge.altitude"), {"charge.altitude": np.array([0.0, 2000.0])})


def test_two_stroke_with_scavenge_air():
    base = demo(engine__strokes_per_cycle=2, charge__residual_fraction=None, charge__scavenging_efficiency=0.9)
    columns = {"charge.scavenging_efficiency": [0.9, 0.95, 0.92], "charge.scavenge_ratio": [1.2, 1.3, 0.92]}
    rows = agree(study(base, *columns), columns, rel=1e-10)
    # what is delivered is what is trapped: no air passes, to the bit
    assert rows.figures[figures.MIXED][2] == rows.figures["exhaust_temperature_K"][2]
    assert (rows.figures[figures.MIXED] < rows.figures["exhaust_temperature_K"]).tolist() == [True, True, False]
    strokes = {"engine.strokes_per_cycle": [4, 2], "charge.equivalence_ratio": [0.5, 0.5]}
    agree(study(demo(), *strokes), strokes)


@pytest.mark.parametrize("amount", ["excess_air_ratio", "air_fuel_ratio", "fuel_mass"])
def test_other_ways_to_give_the_fuel(amount):
    values = {"excess_air_ratio": [1.5, 2.0], "air_fuel_ratio": [25.0, 30.0], "fuel_mass": [180e-6, 220e-6]}[amount]
    key = f"charge.{amount}"
    agree(study(demo(charge__equivalence_ratio=None, **{f"charge__{amount}": values[0]}), key), {key: np.array(values)}, rel=1e-9)


def test_cutoff_ratio_and_polytropic_exponent():
    changes = {"combustion__heat_addition": "constant-pressure", "combustion__pressure_limit": None}
    case = demo(charge__equivalence_ratio=None, combustion__cutoff_ratio=1.8, **changes)
    columns = {"combustion.cutoff_ratio": np.array([1.6, 2.0]), "gas.compression_exponent": np.array([1.34, 1.36])}
    agree(study(case, *columns), columns, rel=1e-9)


@pytest.mark.parametrize("engine", ["reference", "compiled"])
def test_bits_do_not_depend_on_order_or_on_the_rows_beside(engine):
    rng = np.random.default_rng(5)
    n = 24
    columns = {
        "charge.equivalence_ratio": rng.uniform(0.3, 1.3, n),
        "engine.rod_length": rng.uniform(0.3, 0.4, n),
        "engine.intake_closing": rng.uniform(-170.0, -130.0, n),
        "engine.compression_ratio": rng.uniform(12.0, 20.0, n),
        "charge.egr_fraction": np.where(rng.random(n) < 0.5, 0.0, 0.1),
        "fuel.name": rng.choice(["diesel", "methanol"], n),
        "charge.residual_fraction": rng.choice([0.0, 0.02, 0.05], n),
    }
    made = study(demo(), *columns, engine=engine)
    whole = made.run(columns)
    order = rng.permutation(n)
    mixed = made.run({key: values[order] for key, values in columns.items()})
    assert np.array_equal(whole.status[order], mixed.status)
    for name in made.quantities:
        assert np.array_equal(whole.figures[name][order], mixed.figures[name], equal_nan=True), name
    for i in (0, 7, 23):
        alone = made.run({key: values[i : i + 1] for key, values in columns.items()})
        for name in made.quantities:
            assert np.array_equal(whole.figures[name][i], alone.figures[name][0], equal_nan=True), name


@pytest.mark.parametrize("engine", ["reference", "compiled"])
@pytest.mark.parametrize("residual", [0.0, 0.03])
def test_the_closed_part_alone_has_the_bits_of_the_whole_cycle(engine, residual):
    """Asking for less leaves out blowdown and exhaust, and changes nothing else."""
    case, ratios = demo(charge__residual_fraction=residual), [13.0, 15.0, 17.0]
    closed = [name for name in figures.MODEL_FIGURES if name not in EXCHANGE_FIGURES]
    alone = study(case, "engine.compression_ratio", quantities=closed, engine=engine)
    whole = study(case, "engine.compression_ratio", quantities=figures.MODEL_FIGURES, engine=engine)
    assert figures.Need.of(closed).closed_part_only
    assert not figures.Need.of(figures.MODEL_FIGURES).closed_part_only
    some, every = (one.run({"engine.compression_ratio": ratios}) for one in (alone, whole))
    assert some.status.tolist() == every.status.tolist() == [Status.OK] * 3
    for name in closed:
        assert some.figures[name].tobytes() == every.figures[name].tobytes(), name


def test_a_study_pickles():
    made = study(demo(), "charge.pressure", quantities=["peak_pressure"])
    columns = {"charge.pressure": np.array([2.5e5])}
    before = made.run(columns)
    other = pickle.loads(pickle.dumps(made))
    assert (other.case, other.keys, other.model, other.engine, other.quantities) == (
        made.case, made.keys, made.model, made.engine, made.quantities
    )  # fmt: skip
    assert other.run(columns).figures["peak_pressure_Pa"][0] == before.figures["peak_pressure_Pa"][0]


def test_rows_that_contradict_themselves_are_refused_alone():
    columns = {
        "engine.rod_length": np.array([0.32, 0.08, 0.32, 0.32]),
        "engine.exhaust_closing": np.array([360.0, 360.0, 100.0, 360.0]),
        "combustion.pressure_limit": np.array([2e7, 2e7, 2e7, 2.5e5]),
    }
    made = study(demo(), *columns, quantities=["peak_pressure"])
    rows = made.run(columns)
    assert [Status(s) for s in rows.status] == [Status.OK, *[Status.INPUT_REFUSED] * 3]
    assert np.isnan(rows.figures["peak_pressure_Pa"][1:]).all()
    assert made.why({key: values[0] for key, values in columns.items()}) == ""
    for i, word in ((1, "rod_length"), (2, "exhaust_closing"), (3, "pressure_limit")):
        assert word in made.why({key: values[i] for key, values in columns.items()})


def test_names_that_contradict_the_case_refuse_their_rows():
    made = study(demo(fuel__name="methane", fuel__pressure="5 bar"), "fuel.admission", "charge.egr_fraction", quantities=None)
    rows = made.run({"fuel.admission": ["premixed", "port-liquid", "direct"], "charge.egr_fraction": [0.1, 0.1, 0.1]})
    assert [Status(s) for s in rows.status] == [Status.OK, Status.INPUT_REFUSED, Status.OK]
    wet = study(demo(), "charge.ambient_pressure", "charge.ambient_temperature", "charge.relative_humidity")
    rows = wet.run(
        {
            "charge.ambient_pressure": [1e5, 0.1e5],
            "charge.ambient_temperature": [300.0, 335.0],
            "charge.relative_humidity": [0.5, 1.0],
        }
    )
    assert [Status(s) for s in rows.status] == [Status.OK, Status.INPUT_REFUSED]


def test_a_failed_row_says_so_and_leaves_the_others():
    made = study(demo(), "charge.equivalence_ratio", "combustion.pressure_limit", quantities=["imep_gross", "exhaust_O2_dry"])
    rows = made.run({"charge.equivalence_ratio": [0.5, 4.9, 0.5], "combustion.pressure_limit": [2e7, 2e7, 90e5]})
    assert rows.status.tolist() == [Status.OK, Status.CARBON_OVER_OXYGEN, Status.LIMIT_BELOW_COMPRESSION]
    assert np.isfinite(rows.figures["imep_gross_Pa"]).tolist() == [True, False, False]
    assert np.isfinite(rows.figures["exhaust_O2_dry"]).tolist() == [True, False, False]


@pytest.mark.parametrize(
    ("columns", "key", "allowed"),
    [
        ({"charge.pressure": [2e5, 2.0]}, "charge.pressure", "0.05 bar to 50 bar"),
        ({"charge.pressure": [2e5, np.nan]}, "charge.pressure", "0.05 bar"),
        ({"charge.pressure": [2e5, True]}, "charge.pressure", "0.05 bar"),
        ({"charge.pressure": ["2 bar", "2"]}, "charge.pressure", "0.05 bar"),
        ({"engine.cylinders": [4, 5.5]}, "engine.cylinders", "whole number"),
        ({"engine.strokes_per_cycle": [4, 3]}, "engine.strokes_per_cycle", "2 or 4"),
        ({"fuel.name": ["diesel", "diesl"]}, "fuel.name", "methanol"),
        ({"fuel.admission": ["direct", 1.0]}, "fuel.admission", "premixed"),
        ({"charge.residual_fraction": ["solve", "sove"]}, "charge.residual_fraction", "solve"),
    ],
)
def test_a_value_outside_its_own_range_is_an_error(columns, key, allowed):
    with pytest.raises(InputError) as caught:
        study(demo(), *columns).run(columns)
    problem = caught.value.problems[0]
    assert problem.key == key and "value 2" in problem.message and allowed in problem.allowed


def test_columns_must_be_those_of_the_study():
    made = study(demo(), "charge.pressure", "charge.temperature")
    for columns in (
        {"charge.pressure": [1e5]},
        {"charge.pressure": [1e5], "charge.temperature": [300.0, 310.0]},
        {"charge.pressure": [], "charge.temperature": []},
    ):
        with pytest.raises(InputError):
            made.run(columns)


@pytest.mark.parametrize(
    ("varied", "words"),
    [
        ((), "no key is varied"),
        (("charge.presure",), "charge.pressure"),
        (("pressure",), "charge.pressure"),
        (("fuel.blend",), "a table"),
        (("charge.pressure", "charge.pressure"), "twice"),
        (("charge.excess_air_ratio",), "given 2 times"),
        (("charge.intake_pressure",), "given twice"),
        (("fuel.own.density",), "given 2 times"),
        (("charge.egr_temperature",), "egr_fraction"),
        (("charge.altitude",), "one of the two"),
        (("title",), "no such key"),
    ],
)
def test_keys_that_cannot_be_varied(varied, words):
    with pytest.raises(InputError) as caught:
        study(demo(), *varied)
    assert words in str(caught.value)


def test_models_and_quantities_that_are_not_there():
    with pytest.raises(InputError, match="no such model"):
        study(demo(), "charge.pressure", model="fuel-air")
    with pytest.raises(InputError, match="no such model"):
        study(demo(), "charge.pressure", model=FREEZE_MODEL)
    with pytest.raises(InputError) as caught:
        study(demo(), "charge.pressure", quantities=["peak_presure"])
    assert caught.value.problems[0].hint == "peak_pressure_Pa"
    with pytest.raises(InputError, match="headline"):
        study(demo(), "charge.pressure", model="air-cold", quantities=["indicated_power"])
    with pytest.raises(InputError, match=r"engine\.speed"):
        study(demo(engine__speed=None), "charge.pressure", quantities=["indicated_power"])
    assert study(demo(engine__speed=None), "engine.speed", quantities=["indicated_power"]).quantities == ("indicated_power_W",)


def test_gauge_pressures_count_from_the_ambient_pressure_of_the_case():
    made = study(demo(charge__ambient_pressure="0.9 bar"), "charge.pressure", quantities=["peak_pressure"])
    assert made.run({"charge.pressure": ["1.5 bar(g)"]}).keys["charge.pressure"][0] == 2.4e5
    both = study(demo(), "charge.pressure", "charge.ambient_pressure")
    with pytest.raises(InputError, match="absolute"):
        both.run({"charge.pressure": ["1.5 bar(g)"], "charge.ambient_pressure": [1e5]})


def test_the_names_of_the_figures_are_those_that_are_computed():
    a = fuelair.assess(demo())
    assert set(figures.MODEL_FIGURES) == set(a.figures())
    assert set(figures.ENGINE_FIGURES) == set(a.engine_figures)
    extra = {"exhaust_temperature_K", "exhaust_temperature_before_scavenge_air_K"}
    assert set(figures.EXHAUST_FIGURES) == set(a.exhaust_figures) - extra | {figures.MIXED}
    assert set(figures.CHARGE_FIGURES) == set(outputs.charge_figures(a.charge)) < set(a.charge_figures())
    assert len(figures.ALL) == len(set(figures.ALL))


def test_heads_of_columns_carry_the_unit():
    named = ("charge.pressure", "engine.speed", "engine.compression_ratio", "fuel.name", "engine.cylinders")
    assert [heading(key) for key in named] == [
        "charge.pressure [Pa]",
        "engine.speed [rev/s]",
        "engine.compression_ratio",
        "fuel.name",
        "engine.cylinders",
    ]
