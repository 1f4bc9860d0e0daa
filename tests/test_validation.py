"""The validation book through its own runner: every row, and proof that a wrong figure fails."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest

from fuelair.fuel import Vapour
from fuelair.gas.species import SpeciesTable, build
from fuelair.proof import book, cycles
from fuelair.proof.reading import STANDINGS, Row, read_book

ROWS = read_book()


@pytest.mark.parametrize("row", ROWS, ids=[row.id for row in ROWS])
def test_row_of_the_book_holds(row: Row) -> None:
    result = book.run_row(row)
    if result.passed is None:
        pytest.skip(result.skipped)
    assert result.passed, (
        f"{result.error or ''} computed {result.computed} published {result.published} {result.unit}, difference "
        f"{result.difference}, expected {result.expected_difference}, tolerance {result.tolerance}"
    )


def test_every_row_says_source_standing_and_why_its_tolerance() -> None:
    for row in ROWS:
        assert row.source
        assert len(row.reference) > 20, row.id
        assert row.standing in STANDINGS, row.id
        assert len(row.tolerance.reason) > 8, row.id
        assert row.expected is None or len(row.expected.reason) > 8, row.id


def test_row_ids_are_unique() -> None:
    ids = [row.id for row in ROWS]
    assert len(ids) == len(set(ids))


def test_own_computations_never_pass_as_publications() -> None:
    for row in ROWS:
        assert not row.own or row.standing == "computed", row.id
        assert row.own or not row.source.startswith("own-"), row.id


def test_a_wrong_published_value_fails_in_every_file() -> None:
    done = set()
    for row in ROWS:
        if row.file in done or row.needs or row.published.value is None:
            continue
        right = book.run_row(row)
        assert right.tolerance is not None
        off = replace(row.published, value=row.published.value * (1.0 + 1e-9) + 2.5 * right.tolerance)
        assert book.run_row(row).passed is True, row.id
        assert book.run_row(replace(row, published=off)).passed is False, row.id
        done.add(row.file)
    assert len(done) > 15


def test_without_the_stated_difference_the_row_fails() -> None:
    explained = [row for row in ROWS if row.id in ("cengel-16-3-own-k-O2", "cengel-16-2-tool", "imo-lcv-ethane")]
    assert len(explained) == 3
    for row in explained:
        assert book.run_row(replace(row, expected=None)).passed is False, row.id


def test_the_check_of_completeness_sees_a_missing_species(monkeypatch: pytest.MonkeyPatch) -> None:
    def without_hydroxyl(vapour: Vapour | None = None, *, extra: Sequence[str] = ()) -> SpeciesTable:
        whole = build(vapour, extra=extra)
        if extra:
            return whole
        mask = whole.forms & np.array([name != "OH" for name in whole.names])
        return replace(whole, forms=mask)

    monkeypatch.setattr(cycles, "build", without_hydroxyl)
    inputs = {"fuel": "iso-octane", "equivalence_ratio": 1.0, "r": 8.0, "T": 341.7, "p": 101325.0}  # no row of the book
    species = next(row.inputs["species"] for row in ROWS if row.compute == "full-set-difference")
    missed = cycles.full_set_difference(species=species, result="peak_temperature_K", **inputs)
    assert missed < -10.0
