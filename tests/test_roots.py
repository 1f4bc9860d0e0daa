"""The bracketed root finder: known roots, independence of the elements, what it says when there is none."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fuelair.roots import MAX_STEPS, bracketed

KNOWN = {
    "cosine": (lambda x: np.cos(x) - x, 0.0, 1.0, 0.7390851332151607),  # computed: the fixed point of cos
    "cubic, triple root": (lambda x: (x - 1.0) ** 3, 0.0, 2.5, 1.0),
    "square root of two": (lambda x: x * x - 2.0, 0.0, 2.0, np.sqrt(2.0)),
    "steep": (lambda x: np.expm1(50.0 * (x - 0.9)), 0.0, 1.0, 0.9),
    "falling": (lambda x: 0.3 - x, -1.0, 1.0, 0.3),
    "step": (lambda x: np.where(x < np.pi / 4.0, -1.0, 1.0), 0.0, 1.0, np.pi / 4.0),
    "pole outside": (lambda x: 1.0 / (x - 3.0) + 1.0, -10.0, 2.9, 2.0),
}


@pytest.mark.parametrize("name", KNOWN)
def test_known_roots_to_the_width_asked_for(name):
    function, low, high, root = KNOWN[name]
    found, good = bracketed(function, np.array([low]), np.array([high]), width=1e-12)
    assert good[0]
    assert found[0] == pytest.approx(root, abs=2e-12)


def test_every_known_root_at_once_has_the_bits_of_each_alone():
    functions = [f for f, *_ in KNOWN.values()]
    low, high = (np.array([case[i] for case in KNOWN.values()]) for i in (1, 2))

    def together(x):
        return np.array([float(f(np.array(value))) for f, value in zip(functions, x, strict=True)])

    batch, good = bracketed(together, low, high, width=1e-13)
    assert good.all()
    for i, function in enumerate(functions):
        alone, _ = bracketed(function, low[i : i + 1], high[i : i + 1], width=1e-13)
        assert alone[0] == batch[i], list(KNOWN)[i]


def test_ends_of_equal_sign_are_not_found_and_leave_the_others_alone():
    low, high = np.array([0.0, 2.0, 0.0]), np.array([2.0, 3.0, 1.0])
    found, good = bracketed(lambda x: x * x - 2.0, low, high, width=1e-13)
    assert good.tolist() == [True, False, False]
    assert found[0] == pytest.approx(np.sqrt(2.0), abs=1e-12)


def test_nan_ends_an_element_as_not_found_whether_at_an_end_or_inside():
    def function(x):
        y = x - 0.3
        y[1] = np.nan
        y[2] = np.nan if 0.0 < x[2] < 1.0 else y[2]
        return y

    found, good = bracketed(function, np.zeros(3), np.ones(3), width=1e-13)
    assert good.tolist() == [True, False, False]
    assert found[0] == pytest.approx(0.3, abs=1e-12)


@pytest.mark.parametrize("root", [0.0, 1.0])
def test_a_root_at_an_end_is_found(root):
    found, good = bracketed(lambda x: x - root, np.zeros(1), np.ones(1), width=1e-12)
    assert good[0]
    assert found[0] == root


def test_a_wider_width_needs_fewer_calls():
    calls = []

    def function(x):
        calls.append(x)
        return np.tanh(3.0 * (x - 0.7))

    counts = []
    for width in (1e-2, 1e-12):
        calls.clear()
        found, good = bracketed(function, np.zeros(1), np.ones(1), width=width)
        assert good[0]
        assert abs(found[0] - 0.7) <= 2.0 * width
        counts.append(len(calls))
    assert counts[0] < counts[1] < 20 < MAX_STEPS


@given(st.floats(-50.0, 50.0), st.floats(0.05, 8.0), st.floats(1e-3, 100.0), st.floats(1e-3, 100.0))
def test_any_monotone_function_is_solved(root, power, left, right):
    def function(x):
        return np.sign(x - root) * np.abs(x - root) ** power

    found, good = bracketed(function, np.array([root - left]), np.array([root + right]), width=1e-9)
    assert good[0]
    assert abs(found[0] - root) <= 3e-9
