"""Designs of a study: grids, random designs, sample files, and what they refuse."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

import fuelair
from fuelair import resources
from fuelair.errors import InputError
from fuelair.study import sampling
from fuelair.study.samples import from_frame, read_samples
from fuelair.study.sampling import METHODS, design, split

CASE = fuelair.Case.read(resources.demos() / "workboat.toml")
PHI, PRESSURE, RATIO = "charge.equivalence_ratio", "charge.pressure", "engine.compression_ratio"


def axis(text, key=PHI):
    made = design(CASE, {key: text})
    return np.asarray(made.columns(0, made.rows)[key]).tolist()


def test_ranges_have_both_ends_and_decimals_as_a_person_writes_them():
    assert axis("0.3:1.2:10") == [0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1.0, 1.1, 1.2]
    assert axis("0.3:1.2:91")[1:3] == [0.31, 0.32]
    assert axis("1.2:0.3:4") == [1.2, 0.9, 0.6, 0.3]
    assert axis("1bar:4bar:7", PRESSURE) == [1e5, 1.5e5, 2e5, 2.5e5, 3e5, 3.5e5, 4e5]
    assert axis('"1 bar":"400 kPa":4', PRESSURE) == [1e5, 2e5, 3e5, 4e5]
    assert axis("1e5:4e5:4", PRESSURE) == [1e5, 2e5, 3e5, 4e5]
    assert axis("0 degC:100 degC:3", "charge.temperature") == [273.15, 323.15, 373.15]
    assert axis("4:6:3", "engine.cylinders") == [4.0, 5.0, 6.0]
    assert axis("0.3:1.2:4:linear") == axis("0.3:1.2:4")


def test_a_long_range_keeps_its_ends():
    long = axis("0.3:1.2:20001")
    assert (len(long), long[0], long[-1]) == (20001, 0.3, 1.2)
    assert long[10000] == pytest.approx(0.75, rel=1e-15)


def test_logarithmic_ranges():
    assert axis("1bar:16bar:5:log", PRESSURE) == pytest.approx([1e5, 2e5, 4e5, 8e5, 16e5], rel=1e-15)
    assert axis("1bar:16bar:5:log", PRESSURE)[-1] == 16e5


def test_lists_of_numbers_units_and_names():
    assert axis("0.3,0.5, 1") == [0.3, 0.5, 1.0]
    assert axis("2 bar, 250 kPa, 3e5", PRESSURE) == [2e5, 2.5e5, 3e5]
    assert axis("0.5 bar(g)", PRESSURE) == [151300.0]
    assert axis("16:1,17:1", RATIO) == [16.0, 17.0]
    assert axis("17", RATIO) == [17.0]
    assert axis("diesel, methanol", "fuel.name") == ["diesel", "methanol"]
    assert axis("2,4", "engine.strokes_per_cycle") == [2.0, 4.0]
    assert axis("solve,0.05,3 %", "charge.residual_fraction") == ["solve", "0.05", "0.03"]


def test_a_grid_gives_any_of_its_rows_the_last_axis_fastest():
    made = design(CASE, {PHI: [0.3, 0.5], "fuel.name": "diesel,methanol", RATIO: "10:14:3"})
    assert (made.rows, made.keys) == (12, (PHI, "fuel.name", RATIO))
    whole = made.columns(0, 12)
    assert whole[RATIO].tolist() == [10.0, 12.0, 14.0] * 4
    assert list(whole["fuel.name"]) == (["diesel"] * 3 + ["methanol"] * 3) * 2
    assert whole[PHI].tolist() == [0.3] * 6 + [0.5] * 6
    for start, stop in ((0, 1), (5, 9), (11, 12)):
        part = made.columns(start, stop)
        assert all(list(part[key]) == list(whole[key][start:stop]) for key in made.keys)


def test_a_grid_of_a_billion_rows_is_only_counted():
    made = design(CASE, {PHI: "0.3:1.2:1000", PRESSURE: "1bar:4bar:1000", RATIO: "10:20:1000"})
    assert made.rows == 10**9
    assert made.columns(10**9 - 1, 10**9)[RATIO].tolist() == [20.0]
    with pytest.raises(InputError, match="too many rows"):
        design(CASE, {PHI: "0.3:1.2:1000", PRESSURE: "1bar:4bar:1000", RATIO: "10:20:1001"})


@pytest.mark.parametrize("method", METHODS[1:])
def test_random_designs_fill_their_ranges_and_repeat(method):
    over = {PHI: "0.3:1.2", PRESSURE: "1bar:16bar:log", "engine.cylinders": "4:6", "fuel.name": "diesel,methanol"}
    made = design(CASE, over, method=method, rows=96, seed=7)
    again = design(CASE, over, method=method, rows=96, seed=7)
    other = design(CASE, over, method=method, rows=96, seed=8)
    whole = made.columns(0, 96)
    phi, pressure = whole[PHI], whole[PRESSURE]
    assert 0.3 <= phi.min() < 0.33 and 1.17 < phi.max() <= 1.2
    # every slice of the range holds its share; equal ratios put half the points below the geometric mean
    assert np.histogram(phi, bins=8, range=(0.3, 1.2))[0] == pytest.approx(12, abs=0 if method == "latin-hypercube" else 4)
    assert np.sum(pressure < 4e5) == pytest.approx(48, abs=0 if method == "latin-hypercube" else 2)
    assert set(whole["engine.cylinders"]) == {4.0, 5.0, 6.0}
    assert 40 <= list(whole["fuel.name"]).count("diesel") <= 56
    assert all(list(again.columns(0, 96)[key]) == list(whole[key]) for key in over)
    assert list(made.columns(40, 50)[PHI]) == list(phi[40:50])
    assert made.describe() == again.describe() != other.describe()
    assert not np.array_equal(other.columns(0, 96)[PHI], phi)


def test_sobol_points_do_not_depend_on_how_many_there_are():
    short, long = (design(CASE, {PHI: "0.3:1.2"}, method="sobol", rows=n) for n in (5, 100))
    assert short.columns(0, 5)[PHI].tolist() == long.columns(0, 5)[PHI].tolist()


@pytest.mark.parametrize(
    ("key", "text", "words"),
    [
        (PHI, "0.3:1.2", "COUNT"),
        (PHI, "0.3:1.2:1", "COUNT"),
        (PHI, "0.3:1.2:ten", "COUNT"),
        (PHI, "0,3:1,2:5", "decimal point"),
        (PHI, "0.3,,0.5", "empty item"),
        (PHI, "0.3:9:5", "0.01 to 5"),
        (PHI, "many", "not a number"),
        (PRESSURE, "1:4:7", '"1 bar"'),
        (PRESSURE, "2 bar, 3 bars", "unknown unit"),
        ("charge.presure", "1bar:2bar:3", "charge.pressure"),
        ("fuel.name", "diesel,petrl", "no such fuel"),
        ("fuel.name", "a:b:3", "no such fuel"),
        ("fuel.admission", "drect", '"direct"'),
        ("engine.cylinders", "4:7:3", "whole number"),
        ("engine.pin_offset", "0:10mm:3:log", "above zero"),
        ("charge.residual_fraction", "solve:0.1:3", "list"),
    ],
)
def test_what_is_no_range_or_list_is_said(key, text, words):
    with pytest.raises(InputError) as caught:
        axis(text, key)
    assert words in str(caught.value)


def test_random_designs_need_rows_and_ranges():
    for over, more, words in (
        ({PHI: "0.3:1.2"}, {"method": "sobol"}, "number of rows"),
        ({PHI: "0.3:1.2"}, {"method": "sobol", "rows": 0}, "number of rows"),
        ({PHI: "0.3:1.2:5"}, {"method": "sobol", "rows": 5}, "--rows"),
        ({PHI: "0.3:1.2"}, {"method": "sobol", "rows": 5, "seed": -1}, "seed"),
        ({PHI: "0.3:1.2"}, {"method": "hypercube", "rows": 5}, "no such design"),
        ({PHI: "0.3:1.2:5"}, {"rows": 5}, "random design"),
        ({PHI: "0.3:1.2:5"}, {"seed": 5}, "random design"),
        ({}, {}, "nothing is varied"),
    ):
        with pytest.raises(InputError) as caught:
            design(CASE, over, **more)
        assert words in str(caught.value)


def test_split():
    assert split(" charge.pressure = 1bar:2bar:3 ") == (PRESSURE, "1bar:2bar:3")
    for text in ("charge.pressure", "=3", "charge.pressure="):
        with pytest.raises(InputError, match="KEY=VALUES"):
            split(text)


def test_samples_with_units_in_heads_and_cells(tmp_path):
    path = tmp_path / "rows ü.csv"
    path.write_text(
        "charge.pressure [bar], engine.speed ,fuel.name,charge.temperature\n"
        '2.0, 1500 rpm,diesel,335\n"3 bar",25,methanol,60 degC\n',
        encoding="utf-8",
    )
    made = read_samples(path, CASE)
    assert (made.rows, made.keys) == (2, (PRESSURE, "engine.speed", "fuel.name", "charge.temperature"))
    columns = made.columns(0, 2)
    assert columns[PRESSURE].tolist() == [2e5, 3e5]
    assert columns["engine.speed"].tolist() == [25.0, 25.0]
    assert columns["charge.temperature"].tolist() == [335.0, 333.15]
    assert list(made.columns(1, 2)["fuel.name"]) == ["methanol"]


def test_sample_numbers_are_read_exactly(tmp_path):
    numbers = np.random.default_rng(2).uniform(0.1, 1.0, 200)
    path = tmp_path / "rows.csv"
    path.write_text("\n".join([PHI, *map(repr, numbers.tolist())]) + "\n", encoding="utf-8")
    assert read_samples(path, CASE).columns(0, 200)[PHI].tolist() == numbers.tolist()
    other = tmp_path / "rows.parquet"
    pd.DataFrame({PHI: numbers, "engine.speed [rpm]": 1500, "fuel.name": "diesel"}).to_parquet(other)
    columns = read_samples(other, CASE).columns(0, 200)
    assert columns[PHI].tolist() == numbers.tolist()
    assert set(columns["engine.speed"]) == {25.0}


def test_other_samples_have_another_description(tmp_path):
    one, two = (from_frame(pd.DataFrame({PHI: [0.5, last]}), CASE) for last in (0.6, np.nextafter(0.6, 1.0)))
    assert one.describe() != two.describe()
    assert one.describe() == from_frame(pd.DataFrame({PHI: [0.5, 0.6]}), CASE).describe()


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "cannot be read"),
        ("charge.equivalence_ratio\n", "no rows"),
        ("charge.equivalence\n0.5\n", "charge.equivalence_ratio"),
        ('charge.equivalence_ratio\n0.5\n""\n', "value 2"),
        ("charge.equivalence_ratio,fuel.name\n0.5,diesel\n0.6,\n", "value 2"),
        ("charge.equivalence_ratio\n0.5\n9\n", "0.01 to 5"),
        ("charge.pressure [psig]\n1\n", "no such unit"),
        ("fuel.name [bar]\ndiesel\n", "no unit"),
        ("charge.pressure bar\n1\n", "KEY [unit]"),
        ("charge.equivalence_ratio,charge.equivalence_ratio\n0.5,0.6\n", "no such key"),
        ("a,b\n1,2,3\n1,2,3,4\n", "cannot be read"),
    ],
)
def test_what_is_wrong_with_a_sample_file_is_said(tmp_path, text, words):
    path = tmp_path / "rows.csv"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputError) as caught:
        read_samples(path, CASE)
    assert words in str(caught.value) and str(path) in str(caught.value)


def test_files_that_are_no_samples(tmp_path):
    (tmp_path / "rows.parquet").write_bytes(b"no parquet at all")
    (tmp_path / "rows.csv").write_bytes(b"\xff\xfe\xff")
    for name in ("rows.txt", "none.csv", "none.parquet", "rows.parquet", "rows.csv"):
        with pytest.raises(InputError, match="--samples"):
            read_samples(tmp_path / name, CASE)


def test_python_values_may_be_given_instead_of_text():
    made = design(CASE, {PHI: np.array([0.4, 0.5]), PRESSURE: ["2 bar", 3e5]})
    assert made.columns(0, 4)[PRESSURE].tolist() == [2e5, 3e5, 2e5, 3e5]
    assert sampling.plain("1_000") == "1_000"
