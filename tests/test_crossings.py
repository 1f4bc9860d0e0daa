"""Crossings of known functions: roots, turning points, gaps, jumps, level stretches; and the line searches behind them."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fuelair.gas.engine import Status
from fuelair.study.brackets import borders, last, lowest, runs
from fuelair.study.crossings import MET, POINTS, crossings, spaced


def batch(function, failed=None, status=Status.NO_SOLUTION):
    """A function as the search takes it; it fails where ``failed`` is true."""

    def evaluate(x):
        bad = np.zeros(len(x), bool) if failed is None else failed(x)
        return np.where(bad, np.nan, function(x)), np.where(bad, status, 0).astype(np.int8)

    return evaluate


def test_scans_are_linear_up_to_a_hundredfold_and_logarithmic_beyond() -> None:
    linear, log = spaced(1.5, 60.0), spaced(0.01, 5.0)
    assert len(linear) == len(log) == POINTS == 257
    assert np.allclose(np.diff(linear, 2), 0.0, atol=1e-12)
    assert np.allclose(np.diff(np.log(log), 2), 0.0, atol=1e-12)
    assert (linear[0], linear[-1], log[0], log[-1]) == (1.5, 60.0, 0.01, 5.0)
    assert np.allclose(np.diff(spaced(-300.0, -30.0), 2), 0.0, atol=1e-9)


def test_two_roots_of_a_parabola_with_their_slopes() -> None:
    found = crossings(batch(lambda x: x**2), -3.0, 3.3, 4.0)
    assert found.roots == pytest.approx([-2.0, 2.0], rel=1e-14)
    assert found.slopes == pytest.approx([-4.0, 4.0], rel=1e-9)
    assert not found.touching.any()
    assert found.highest == (3.3, 3.3**2)
    assert not found.constant


@pytest.mark.parametrize("half", [1e-2, 1e-3, 1e-4])
def test_a_double_root_between_two_scan_points_is_found(half: float) -> None:
    """1 - (x - a)^2 meets 1 - half^2 at a - half and a + half; the scan's step is 0.0039."""
    a = 0.12345
    found = crossings(batch(lambda x: 1.0 - (x - a) ** 2), 0.0, 1.0, 1.0 - half**2)
    assert len(found.roots) == 2
    assert found.roots == pytest.approx([a - half, a + half], abs=1e-15 / half)
    assert found.slopes == pytest.approx([2 * half, -2 * half], rel=1e-6)


def test_a_target_that_is_just_touched_is_one_root_that_turns_back() -> None:
    found = crossings(batch(lambda x: 1.0 - (x - 0.12345) ** 2), 0.0, 1.0, 1.0)
    assert found.roots == pytest.approx([0.12345], abs=1e-5)
    assert found.touching.tolist() == [True]
    assert abs(1.0 - (found.roots[0] - 0.12345) ** 2 - 1.0) <= MET
    on_the_scan = crossings(batch(lambda x: (x - 0.5) ** 2), 0.0, 1.0, 0.0)
    assert on_the_scan.roots.tolist() == [0.5]
    assert on_the_scan.touching.tolist() == [True]


def test_just_missed_is_no_root() -> None:
    found = crossings(batch(lambda x: 1.0 - (x - 0.12345) ** 2), 0.0, 1.0, 1.0 + 1e-8)
    assert len(found.roots) == 0
    assert found.highest is not None
    assert found.highest[1] == pytest.approx(1.0, abs=1e-12)


def test_an_extremum_beside_the_end_of_the_range_is_found() -> None:
    """The turning point lies between the first and the second point of the scan."""
    found = crossings(batch(lambda x: (x - 0.001) ** 2), 0.0, 1.0, 2.5e-7)
    assert found.roots == pytest.approx([0.0005, 0.0015], rel=1e-8)


def test_scan_points_exactly_on_the_target_count_once() -> None:
    found = crossings(batch(lambda x: x), 0.0, 1.0, 0.5)
    assert found.roots.tolist() == [0.5]
    assert not found.touching.any()
    ends = crossings(batch(lambda x: x), 0.0, 1.0, 1.0)
    assert ends.roots.tolist() == [1.0]


def test_a_level_stretch_on_the_target_is_an_interval() -> None:
    found = crossings(batch(lambda x: np.minimum(x, 2.0)), 0.0, 5.0, 2.0)
    assert len(found.roots) == 0
    ((low, high),) = found.levels
    assert (low, high) == (pytest.approx(2.0, abs=3e-9), 5.0)
    both = crossings(batch(lambda x: np.clip(x**2, 1.0, 4.0)), -3.0, 3.0, 1.0)
    assert both.levels == ((pytest.approx(-1.0, abs=1e-8), pytest.approx(1.0, abs=1e-8)),)


def test_a_level_stretch_with_rounding_noise_is_still_level() -> None:
    noise = batch(lambda x: 200e5 * (1.0 + 1e-15 * np.sin(1e7 * x)))
    assert crossings(noise, 0.0, 1.0, 201e5).constant
    on = crossings(noise, 0.0, 1.0, 200e5)
    assert on.constant
    assert on.levels == ((0.0, 1.0),)
    assert len(on.roots) == 0


def test_a_root_beside_a_level_stretch_is_a_root() -> None:
    found = crossings(batch(lambda x: np.minimum(x, 2.0)), 0.0, 5.0, 1.999999)
    assert found.roots == pytest.approx([1.999999], rel=1e-12)
    assert found.levels == ()


def test_a_jump_is_no_root() -> None:
    found = crossings(batch(lambda x: np.where(x < 1.234, x, x + 2.0)), 0.0, 5.0, 2.0)
    assert len(found.roots) == 0
    (jump,) = found.jumps
    assert jump.at == pytest.approx(1.234, abs=1e-12)
    assert (jump.before, jump.after) == (pytest.approx(1.234, abs=1e-7), pytest.approx(3.234, abs=1e-7))
    poles = crossings(batch(np.tan), 0.0, 5.0, 2.0)
    assert poles.roots == pytest.approx(np.arctan(2.0) + np.array([0.0, np.pi]), rel=1e-13)
    assert [jump.at for jump in poles.jumps] == pytest.approx([np.pi / 2, 3 * np.pi / 2], rel=1e-12)


def test_gaps_are_told_with_their_borders_and_reason() -> None:
    gappy = batch(lambda x: x, lambda x: ((x > 1.1) & (x < 2.2)) | (x > 4.7), Status.OUTSIDE_DATA)
    found = crossings(gappy, 0.0, 5.0, 1.5)
    assert len(found.roots) == 0
    assert [(gap.low, gap.high) for gap in found.gaps] == [
        (pytest.approx(1.1, abs=3e-9), pytest.approx(2.2, abs=3e-9)),
        (pytest.approx(4.7, abs=3e-9), 5.0),
    ]
    assert {gap.status for gap in found.gaps} == {Status.OUTSIDE_DATA}


def test_a_root_between_the_last_solved_scan_point_and_the_border_of_a_gap_is_found() -> None:
    gappy = batch(lambda x: x, lambda x: (x > 1.1) & (x < 2.2))
    assert crossings(gappy, 0.0, 5.0, 1.09999).roots == pytest.approx([1.09999], rel=1e-14)
    assert crossings(gappy, 0.0, 5.0, 2.20001).roots == pytest.approx([2.20001], rel=1e-14)


def test_a_gap_that_hides_between_two_scan_points_is_no_root() -> None:
    found = crossings(batch(lambda x: x, lambda x: np.abs(x - 1.5) < 1e-4), 0.0, 5.0, 1.5)
    assert len(found.roots) == 0
    (gap,) = found.gaps
    assert gap.low < 1.5 < gap.high


def test_nothing_solved() -> None:
    found = crossings(batch(lambda x: x, lambda x: x > -1.0), 0.0, 5.0, 1.5)
    assert found.lowest is None
    assert [(gap.low, gap.high) for gap in found.gaps] == [(0.0, 5.0)]
    lonely = crossings(batch(lambda x: x, lambda x: np.abs(x - 2.5) > 0.01), 0.0, 5.0, 2.5)
    assert lonely.roots.tolist() == [2.5]


def test_a_target_of_zero_is_met_relative_to_the_size_of_the_function() -> None:
    found = crossings(batch(lambda x: 1e5 * np.sin(x)), 3.0, 6.5, 0.0)
    assert found.roots == pytest.approx([np.pi, 2.0 * np.pi], rel=1e-14)


@settings(max_examples=60, deadline=None)
@given(st.lists(st.floats(-0.95, 0.95), min_size=1, max_size=5, unique=True), st.floats(-2.0, 2.0))
def test_all_roots_of_random_polynomials_apart_by_more_than_a_step(places: list[float], shift: float) -> None:
    ordered = sorted(places)
    if any(b - a < 0.02 for a, b in itertools.pairwise(ordered)):
        return
    factor = np.polynomial.Polynomial.fromroots(ordered)
    found = crossings(batch(lambda x: factor(x) + 1.0 + shift), -1.0, 1.0, 1.0 + shift)
    if shift != -1.0:
        assert found.roots == pytest.approx(ordered, abs=2e-5)
    assert np.all(np.abs(factor(found.roots)) <= MET * max(abs(1.0 + shift), 1e-3) + 1e-15)


def test_the_batch_is_evaluated_element_by_element() -> None:
    """Values may not depend on their neighbours; the search asks for no more rows than it says."""
    asked = []

    def evaluate(x):
        asked.append(len(x))
        return np.cos(x), np.zeros(len(x), np.int8)

    found = crossings(evaluate, 0.0, 10.0, 0.3)
    assert found.rows == sum(asked)
    assert asked[0] == POINTS
    assert len(found.roots) == 3


def test_line_searches() -> None:
    assert runs(np.array([False, True, True, False, True])) == [(1, 2), (4, 4)]
    inside, outside = borders(np.array([True, True, False, False, True]))
    assert (inside.tolist(), outside.tolist()) == ([1, 4], [2, 3])
    edge = last(lambda x: x <= 0.3, np.array([0.0, 0.2]), np.array([1.0, 0.4]))
    assert edge == pytest.approx([0.3, 0.3], abs=1e-7)
    assert np.all(edge <= 0.3)
    x, y = lowest(lambda at, k: (at - np.array([0.3, 0.7])[k]) ** 2 + 1.0, np.zeros(2), np.ones(2))
    assert x == pytest.approx([0.3, 0.7], abs=1e-7)
    assert y == pytest.approx([1.0, 1.0], abs=1e-14)
    x, y = lowest(lambda at, k: (at - 0.3) ** 2 - 0.01, np.zeros(1), np.ones(1))
    assert y[0] < 0.0  # stops at the first value below zero
    x, y = lowest(lambda at, k: np.where(at < 0.5, np.nan, at), np.zeros(1), np.ones(1))
    assert x[0] == pytest.approx(0.5, abs=1e-6)
