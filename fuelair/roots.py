"""One bracketed root finder for batches."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]
MAX_STEPS = 80


def bracketed(
    function: Callable[[Array], Array], low: Array, high: Array, *, width: float, relative: float = 1e-15
) -> tuple[Array, npt.NDArray[np.bool_]]:
    """Roots of an element-wise function between two ends of opposite sign.

    Parameters
    ----------
    function : array (N,) -> array (N,); NaN at an element ends that element as not found.
    low, high : ends (N,).
    width : absolute width of the bracket at which an element is done.
    relative : the same relative to the root.

    Returns
    -------
    Roots (N,), and where the ends did bracket a root that was found.

    Method: Chandrupatla, Advances in Engineering Software 28 (1997) 145: inverse quadratic
    interpolation where it is safe, bisection elsewhere (from memory; tested on known roots).
    Elements do not influence each other.
    """
    a, b = np.array(high, float), np.array(low, float)
    fa, fb = function(a), function(b)
    c, fc = a.copy(), fa.copy()
    found = np.isfinite(fa) & np.isfinite(fb) & (np.sign(fa) * np.sign(fb) <= 0.0)
    active, t = found.copy(), np.full(a.shape, 0.5)
    best = np.where(np.abs(fa) < np.abs(fb), a, b)
    for _ in range(MAX_STEPS):
        with np.errstate(invalid="ignore", divide="ignore"):
            x = np.where(active, a + t * (b - a), best)
            fx = function(x)
            same = np.sign(fx) == np.sign(fa)
            c, fc = np.where(same, a, b), np.where(same, fa, fb)
            b, fb = np.where(same, b, a), np.where(same, fb, fa)
            a, fa = x, fx
            best = np.where(active, np.where(np.abs(fa) < np.abs(fb), a, b), best)
            tolerance = width + relative * np.abs(best)
            span = np.abs(b - a)
            lost = active & ~np.isfinite(fx)
            found &= ~lost
            active = active & ~lost & (span > 2.0 * tolerance) & (fa != 0.0) & (fb != 0.0)
            xi, phi = (a - b) / (c - b), (fa - fb) / (fc - fb)
            smooth = (phi**2 < xi) & ((1.0 - phi) ** 2 < 1.0 - xi)
            inverse = fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
            t = np.where(smooth & np.isfinite(inverse), inverse, 0.5)
            edge = np.where(span > 0.0, tolerance / span, 0.5)
            t = np.clip(t, np.minimum(edge, 0.5), np.maximum(1.0 - edge, 0.5))
        if not active.any():
            break
    return best, found & ~active
