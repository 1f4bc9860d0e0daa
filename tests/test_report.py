"""Tables and files: the same numbers as the result, in shown units, whole or not there."""

from __future__ import annotations

import os
from pathlib import Path

import jsonschema
import pytest

import fuelair
from fuelair import resources
from fuelair.report import files, schema, tables


@pytest.fixture(scope="module")
def boat() -> fuelair.Assessment:
    return fuelair.assess(fuelair.Case.read(resources.demos() / "workboat.toml"))


@pytest.mark.parametrize("demo", sorted(p.stem for p in resources.demos().glob("*.toml")))
def test_json_fits_the_published_schema(demo: str) -> None:
    a = fuelair.assess(fuelair.Case.read(resources.demos() / f"{demo}.toml"))
    jsonschema.Draft202012Validator.check_schema(schema.assessment_schema())
    jsonschema.validate(a.to_dict(), schema.assessment_schema())


def test_schema_refuses_a_missing_figure(boat: fuelair.Assessment) -> None:
    data = boat.to_dict()
    del data["models"]["air-cold"]["peak_pressure_Pa"]
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(data, schema.assessment_schema())


def test_models_table_shows_the_figures_in_bar_and_kelvin(boat: fuelair.Assessment) -> None:
    table = tables.models(boat)
    row = next(r for r in table.rows if r[0] == "Peak pressure [bar]")
    assert row[1:] == ("200.00",) * 6
    row = next(r for r in table.rows if r[0].startswith("Peak gas temperature"))
    for cell, model in zip(row[1:], boat.results, strict=True):
        assert float(cell) == pytest.approx(boat.figures(model)["peak_temperature_K"], abs=0.5)
    assert table.stressed == 5


def test_cost_rows_add_up_to_the_last(boat: fuelair.Assessment) -> None:
    *steps, last = (r for r in tables.costs(boat).rows if r[0] != "up to the headline")
    for column in range(2, len(last)):
        assert float(last[column]) == pytest.approx(sum(float(r[column]) for r in steps), abs=0.51 * len(steps))


def test_every_row_has_as_many_cells_as_the_head(boat: fuelair.Assessment) -> None:
    for table in tables.tables(boat):
        assert table.rows
        for row in table.rows:
            assert len(row) == len(table.columns)
            assert all(isinstance(cell, str) and "nan" not in cell for cell in row)


def test_caution_stands_in_the_log(boat: fuelair.Assessment) -> None:
    assert tables.CAUTION in files.log(boat)


def test_folder_that_cannot_be_made_leaves_nothing(boat: fuelair.Assessment, tmp_path: Path) -> None:
    blocker = tmp_path / "file"
    blocker.write_text("x")
    with pytest.raises(fuelair.InputError):
        files.write_folder(boat, blocker / "below")
    assert sorted(p.name for p in tmp_path.iterdir()) == ["file"]


def test_a_failed_write_leaves_no_temporary_file(
    boat: fuelair.Assessment, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "replace", full)
    with pytest.raises(fuelair.InputError, match="No space left"):
        files.write_text(tmp_path / "a.json", "x")
    with pytest.raises(fuelair.InputError, match="No space left"):
        files.write_folder(boat, tmp_path / "out")
    assert [p for p in tmp_path.rglob("*") if p.is_file()] == []
