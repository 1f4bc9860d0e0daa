"""Exact slider-crank kinematics."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]


def swept_volume(
    *, bore: Array | float, stroke: Array | float, rod_length: Array | float, pin_offset: Array | float = 0.0
) -> Array:
    """Swept volume of one cylinder between its true dead centres [m3]; lengths in m, numbers or arrays."""
    reach = _reach(stroke, rod_length, pin_offset)
    return np.asarray(0.25 * np.pi * bore**2 * (reach[1] - reach[0]))


def relative_volume(
    angle: Array | float,
    *,
    stroke: Array | float,
    rod_length: Array | float,
    compression_ratio: Array | float,
    pin_offset: Array | float = 0.0,
) -> Array:
    """Cylinder volume over swept volume at a crank angle.

    Parameters
    ----------
    angle : crank angle from the true firing dead centre (smallest volume) [deg], any shape
        with which the other parameters broadcast.
    stroke, rod_length : [m]; the stroke is twice the crank radius.
    compression_ratio : geometric, above 1 [-].
    pin_offset : distance of the cylinder axis from the crank axis [m], positive towards the thrust
        side of expansion.

    Returns
    -------
    V / V_d, from 1/(r-1) to 1/(r-1) + 1.
    """
    swept = travel(angle, stroke=stroke, rod_length=rod_length, pin_offset=pin_offset)
    return np.asarray(1.0 / (compression_ratio - 1.0) + swept)


def travel(angle: Array | float, *, stroke: Array | float, rod_length: Array | float, pin_offset: Array | float = 0.0) -> Array:
    """Volume swept since the firing dead centre over the swept volume, 0 to 1; parameters as in `relative_volume`.

    Source: exact geometry; piston distance from the crank centre a cos(t) + sqrt(l^2 - (a sin(t) + e)^2).
    """
    a, e = 0.5 * stroke, pin_offset
    low, high = _reach(stroke, rod_length, pin_offset)
    true_centre = np.arcsin(-e / (rod_length + a))
    t = np.deg2rad(np.asarray(angle, float)) + true_centre
    distance = a * np.cos(t) + np.sqrt(rod_length**2 - (a * np.sin(t) + e) ** 2)
    return np.asarray((high - distance) / (high - low))


def _reach(stroke: Array | float, rod_length: Array | float, pin_offset: Array | float) -> tuple[Array, Array]:
    """Least and greatest distance of the pin from the crank axis along the cylinder [m]."""
    a, e = 0.5 * stroke, np.abs(pin_offset)
    if np.any(rod_length <= a + e):
        raise ValueError(f"rod_length {rod_length} m must exceed half the stroke plus the pin offset, {a + e} m")
    return np.asarray(np.sqrt((rod_length - a) ** 2 - e**2)), np.asarray(np.sqrt((rod_length + a) ** 2 - e**2))
