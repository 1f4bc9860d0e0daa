"""Reading and running books: damaged files, skipped rows, ranges, failures, what is shown."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from fuelair.errors import DataError
from fuelair.proof import book, registry
from fuelair.proof.reading import read_book, read_file

HEAD = """format = 1
[source]
key = "trial"
reference = "A figure made up for this test"
standing = "computed"
"""
ROW = """
[[row]]
id = "water"
compute = "water-saturation"
inputs = { T = 373.15 }
quantity = "saturation pressure"
published = { value = 101.42, unit = "kPa" }
tolerance = { absolute = 0.01, reason = "half of the last digit" }
"""


def write(folder: Path, text: str, name: str = "Trial2026_water.toml") -> Path:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def test_units_are_converted_and_digits_counted(tmp_path: Path) -> None:
    write(tmp_path, HEAD + ROW)
    (result,) = book.run(folder=tmp_path)
    assert len(book.load(tmp_path)) == 1
    assert result.passed is True
    assert result.computed == pytest.approx(101.418, abs=1e-3)
    assert result.difference == pytest.approx(result.computed - 101.42)
    assert result.digits == pytest.approx(-math.log10(abs(result.difference / 101.42)))
    assert book.tally([result]) == book.Summary(1, 1, 0, 0, result)
    assert book.tally([result]).good


def test_a_wrong_figure_fails_and_is_the_worst(tmp_path: Path) -> None:
    write(tmp_path, HEAD + ROW + ROW.replace('"water"', '"wrong"').replace("101.42", "101.62"))
    good, wrong = book.run(folder=tmp_path)
    assert (good.passed, wrong.passed) == (True, False)
    total = book.tally([good, wrong])
    assert (total.passed, total.failed, total.worst) == (1, 1, wrong)
    assert not total.good
    assert wrong.used == pytest.approx(20.2, abs=0.2)


def test_a_stated_difference_has_its_own_tolerance(tmp_path: Path) -> None:
    off = ROW.replace("101.42", "100.42")
    write(tmp_path, HEAD + off + 'expected_difference = { value = 1.0, reason = "for this test" }\n')
    assert book.run(folder=tmp_path)[0].passed is True
    write(tmp_path, HEAD + off + 'expected_difference = { value = 0.9, reason = "for this test" }\n')
    assert book.run(folder=tmp_path)[0].passed is False
    write(tmp_path, HEAD + off + 'expected_difference = { relative = 0.00994, reason = "for this test" }\n')
    assert book.run(folder=tmp_path)[0].passed is True


def test_a_range_holds_inside_and_fails_outside(tmp_path: Path) -> None:
    for span, passes in (("[101, 102]", True), ("[101.43, 102]", False), ("[99, 101.409]", True)):
        tolerance = ROW.replace("value = 101.42", f"range = {span}")
        write(tmp_path, HEAD + tolerance)
        assert book.run(folder=tmp_path)[0].passed is passes, span


def test_a_table_is_many_rows_and_blank_cells_are_none(tmp_path: Path) -> None:
    write(
        tmp_path,
        HEAD
        + """
[[table]]
id = "steam"
compute = "water-saturation"
quantity = "saturation pressure"
keys = ["T"]
rows = [[373.15, 101418], [273.16, ""], [298.15, 3169.7]]
tolerance = { relative = 0.001, reason = "rounded" }
[[table.column]]
name = "p"
unit = "Pa"
""",
    )
    rows = read_book(tmp_path)
    assert [r.id for r in rows] == ["steam-373.15-p", "steam-298.15-p"]
    assert rows[1].inputs == {"T": 298.15}
    assert all(r.passed for r in book.run(folder=tmp_path))


def test_a_missing_package_skips_with_the_reason(tmp_path: Path) -> None:
    write(tmp_path, HEAD + ROW + 'needs = "no_such_package_here"\n')
    (result,) = book.run(folder=tmp_path)
    assert result.passed is None
    assert "no_such_package_here" in result.skipped
    assert "pip install" in result.skipped
    assert result.used == 0.0
    total = book.tally([result])
    assert (total.skipped, total.worst, total.good) == (1, None, False)
    assert book.rows_for_print([result])[0].rows[0][-1].startswith("skipped: needs")


def test_an_error_in_the_computation_fails_the_row_and_is_kept(tmp_path: Path) -> None:
    write(tmp_path, HEAD + ROW.replace("T = 373.15", 'temperature = "hot"'))
    (result,) = book.run(folder=tmp_path)
    assert result.passed is False
    assert "temperature" in result.error
    assert result.used == math.inf
    assert "FAILED" in book.rows_for_print([result])[0].rows[0][-1]


def test_not_a_number_fails(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(registry.COMPUTATIONS, "water-saturation", lambda *, T: math.nan)
    write(tmp_path, HEAD + ROW)
    assert book.run(folder=tmp_path)[0].passed is False


def test_pattern_takes_id_file_or_source(tmp_path: Path) -> None:
    write(tmp_path, HEAD + ROW + ROW.replace('"water"', '"steam"'))
    assert [r.id for r in book.run("ste*", folder=tmp_path)] == ["steam"]
    assert len(book.run("trial", folder=tmp_path)) == 2
    assert len(book.run("Trial2026*", folder=tmp_path)) == 2
    assert book.run("ice", folder=tmp_path) == []


def test_the_summary_is_one_line_of_counts(tmp_path: Path) -> None:
    assert book.summary([]) == "0 rows: 0 passed, 0 failed, 0 skipped"
    write(tmp_path, HEAD + ROW.replace("101.42", "101.62"))
    line = book.summary(book.run(folder=tmp_path))
    assert line.startswith("1 rows: 0 passed, 1 failed, 0 skipped; closest to its tolerance: water (2020 %")
    write(tmp_path, HEAD + ROW.replace("T = 373.15", "t = 1"))
    assert book.summary(book.run(folder=tmp_path)).endswith("not computed: water")


def test_what_is_shown_has_a_cell_per_head(tmp_path: Path) -> None:
    write(tmp_path, HEAD + ROW)
    (sheet,) = book.rows_for_print(book.run(folder=tmp_path))
    assert sheet.title == "Trial2026_water.toml (trial)"
    assert len(sheet.heads) == len(sheet.rows[0])
    assert sheet.rows[0][0] == "water"
    assert sheet.rows[0][-1] == "ok"


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("format = 2\n" + HEAD[11:] + ROW, "format must be 1"),
        (HEAD, "holds no row"),
        (HEAD.replace("standing", "stand"), "unknown key stand"),
        (HEAD.replace('"computed"', '"heard"') + ROW, "row 'water': standing 'heard'"),
        (HEAD + ROW.replace("kPa", "psi"), "row 'water': unit 'psi'"),
        (HEAD + ROW.replace('"half of the last digit"', '" "'), "row 'water': tolerance: reason"),
        (HEAD + ROW.replace("absolute = 0.01, ", ""), "row 'water': tolerance needs one of"),
        (HEAD + ROW.replace("absolute = 0.01", "absolute = 0"), "row 'water': tolerance needs one of"),
        (HEAD + ROW.replace("absolute = 0.01", "absolute = true"), "row 'water': absolute must be a number"),
        (HEAD + ROW.replace("value = 101.42", "range = [2, 1]"), "row 'water': range must be"),
        (HEAD + ROW.replace("value = 101.42, ", ""), "row 'water': published needs one of"),
        (HEAD + ROW.replace('quantity = "saturation pressure"', ""), "row 'water': quantity must be"),
        (HEAD + ROW + "colour = 3\n", "row 'water': unknown key colour"),
        (HEAD + ROW + "format", r"Trial2026_water\.toml: "),
    ],
)
def test_damaged_files_name_file_and_row(tmp_path: Path, text: str, message: str) -> None:
    path = write(tmp_path, text)
    with pytest.raises(DataError, match=message) as error:
        read_file(path)
    assert path.name in str(error.value)


def test_unknown_computation_and_repeated_id_are_refused(tmp_path: Path) -> None:
    write(tmp_path, HEAD + ROW.replace("water-saturation", "ice-saturation"))
    with pytest.raises(DataError, match="row 'water': 'ice-saturation' is none of"):
        book.run(folder=tmp_path)
    write(tmp_path, HEAD + ROW)
    write(tmp_path, HEAD + ROW, "Trial2026_again.toml")
    with pytest.raises(DataError, match=r"row 'water': the id is taken by Trial2026_again\.toml"):
        read_book(tmp_path)


def test_an_empty_folder_is_an_error(tmp_path: Path) -> None:
    with pytest.raises(DataError, match="no file of the validation book"):
        read_book(tmp_path)


def test_a_name_is_registered_once() -> None:
    with pytest.raises(ValueError, match="registered twice"):
        registry.computation("cycle")(lambda: 0.0)
