"""Slider-crank volume against closed forms and against geometry laid out point by point."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fuelair.crank.kinematics import relative_volume, swept_volume

CRANK = {"stroke": 0.19, "rod_length": 0.32, "compression_ratio": 17.0}


def test_dead_centres():
    v = relative_volume(np.array([0.0, 180.0, 360.0, -180.0]), **CRANK)
    assert v == pytest.approx([1 / 16, 17 / 16, 1 / 16, 17 / 16], rel=1e-14)


def test_volume_at_ninety_degrees_by_hand():
    # piston below its top by a + l - sqrt(l^2 - a^2)
    a, rod = 0.095, 0.32
    expected = 1 / 16 + (a + rod - np.sqrt(rod**2 - a**2)) / 0.19
    assert relative_volume(90.0, **CRANK) == pytest.approx(expected, rel=1e-14)
    assert relative_volume(-90.0, **CRANK) == pytest.approx(expected, rel=1e-14)


def test_a_long_rod_gives_the_harmonic_volume():
    t = np.linspace(0.0, 360.0, 73)
    v = relative_volume(t, stroke=0.1, rod_length=1e4, compression_ratio=11.0)
    assert v == pytest.approx(0.1 + 0.5 * (1.0 - np.cos(np.deg2rad(t))), abs=1e-5)


@pytest.mark.parametrize("offset", [0.0, 0.012, -0.02])
def test_slope_against_the_velocity_formula(offset):
    """dx/dt = a sin t (1 + (cos t - e/(a ...))...): here from the angle of the rod, not from the formula under test."""
    t = np.linspace(-170.0, 170.0, 41)
    step = 1e-3
    numeric = (relative_volume(t + step, pin_offset=offset, **CRANK) - relative_volume(t - step, pin_offset=offset, **CRANK)) / (
        2 * step
    )
    # the piston moves with the crank pin's velocity along the rod: v_piston cos b = v_pin along the rod
    a, rod = 0.095, 0.32
    dead = np.arcsin(-offset / (rod + a))
    angle = np.deg2rad(t) + dead
    sine = (a * np.sin(angle) + offset) / rod
    tangent = sine / np.sqrt(1.0 - sine**2)
    downwards = a * np.sin(angle) + a * np.cos(angle) * tangent
    travel = np.sqrt((rod + a) ** 2 - offset**2) - np.sqrt((rod - a) ** 2 - offset**2)
    assert numeric == pytest.approx(downwards / travel * np.pi / 180.0, abs=1e-9)


@given(st.floats(-0.02, 0.02), st.floats(-720.0, 720.0), st.floats(2.0, 40.0), st.floats(0.13, 2.0))
def test_volume_stays_between_its_dead_centres(offset, angle, r, rod):
    v = float(relative_volume(angle, stroke=0.19, rod_length=rod, compression_ratio=r, pin_offset=offset))
    assert 1.0 / (r - 1.0) - 1e-12 <= v <= 1.0 / (r - 1.0) + 1.0 + 1e-12
    assert float(
        relative_volume(angle + 360.0, stroke=0.19, rod_length=rod, compression_ratio=r, pin_offset=offset)
    ) == pytest.approx(v, abs=1e-9)


@pytest.mark.parametrize("offset", [0.0, 0.015, -0.015])
def test_zero_is_the_smallest_volume_whatever_the_offset(offset):
    t = np.linspace(-20.0, 20.0, 4001)
    v = relative_volume(t, pin_offset=offset, **CRANK)
    assert abs(t[np.argmin(v)]) <= 0.01
    assert v.min() == pytest.approx(1 / 16, rel=1e-9)
    outer = relative_volume(np.linspace(150.0, 210.0, 60001), pin_offset=offset, **CRANK)
    assert outer.max() == pytest.approx(17 / 16, rel=1e-8)


def test_the_offset_mirrors_the_turn():
    t = np.linspace(-180.0, 180.0, 37)
    one, other = (relative_volume(s * t, pin_offset=s * 0.015, **CRANK) for s in (1.0, -1.0))
    assert one == pytest.approx(other, rel=1e-13)
    assert relative_volume(60.0, pin_offset=0.015, **CRANK) != pytest.approx(
        float(relative_volume(-60.0, pin_offset=0.015, **CRANK)), rel=1e-4
    )


def test_positive_offset_lies_on_the_thrust_side_of_expansion():
    """Laid out in the plane: the crank turns clockwise, so after the dead centre its pin moves to the right (x > 0).

    Gas presses the piston down; the rod, in compression, holds it from below right and pushes it to the LEFT wall: that
    is the thrust side of expansion. A positive offset therefore puts the cylinder axis at x = -e, and the rod leans more
    during expansion than with a negative one.
    """
    a, rod, e = 0.095, 0.32, 0.015
    dead = np.arcsin(-e / (rod + a))  # crank, rod and pin in one line, the pin at x = -e
    t = np.deg2rad(60.0) + dead
    pin = np.array([a * np.sin(t), a * np.cos(t)])
    height = pin[1] + np.sqrt(rod**2 - (pin[0] + e) ** 2)
    top = np.sqrt((rod + a) ** 2 - e**2)
    travel = top - np.sqrt((rod - a) ** 2 - e**2)
    assert relative_volume(60.0, pin_offset=e, **CRANK) == pytest.approx(1 / 16 + (top - height) / travel, rel=1e-12)


def test_swept_volume():
    assert swept_volume(bore=0.16, stroke=0.19, rod_length=0.32) == pytest.approx(0.25 * np.pi * 0.16**2 * 0.19, rel=1e-14)
    # an offset lengthens the travel: by about e^2 a / (l^2 - a^2)
    longer = swept_volume(bore=0.16, stroke=0.19, rod_length=0.32, pin_offset=0.015) / swept_volume(
        bore=0.16, stroke=0.19, rod_length=0.32
    )
    assert longer - 1.0 == pytest.approx(0.5 * 0.015**2 / (0.32**2 - 0.095**2), rel=0.01)
    assert swept_volume(bore=0.1, stroke=0.1, rod_length=0.2, pin_offset=0.01) == swept_volume(
        bore=0.1, stroke=0.1, rod_length=0.2, pin_offset=-0.01
    )


@pytest.mark.parametrize("offset", [0.005, -0.005])
def test_a_crank_that_cannot_turn_is_refused(offset):
    with pytest.raises(ValueError, match="must exceed half the stroke plus the pin offset"):
        relative_volume(0.0, stroke=0.2, rod_length=0.105, compression_ratio=10.0, pin_offset=offset)
    with pytest.raises(ValueError, match="must exceed"):
        swept_volume(bore=0.1, stroke=0.2, rod_length=0.1)
