"""Batched searches on lines: borders by sections, lowest points by golden section. Elements do not influence each other."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from fuelair.gas.engine import Array, Mask

Indices = npt.NDArray[np.int64]

PARTS, ROUNDS = 8, 8
"""A border is sought in rounds, each of which cuts its interval into equal parts: to 6e-8 of a step of the scan."""
GOLDEN_STEPS = 36
"""Steps of the golden section: to 3e-8 of the interval, beyond which rounding hides the lowest point."""
_GOLDEN = (5.0**0.5 - 1.0) / 2.0


def runs(mask: Mask) -> list[tuple[int, int]]:
    """First and last index of every run of True.

    >>> runs(np.array([True, False, True, True]))
    [(0, 0), (2, 3)]
    """
    edge = np.flatnonzero(np.diff(np.concatenate([[0], mask.astype(np.int8), [0]])))
    return [(int(a), int(b) - 1) for a, b in zip(edge[::2], edge[1::2], strict=True)]


def borders(mask: Mask) -> tuple[Indices, Indices]:
    """Indices of neighbours of which one is True and one is not: the True ones, the others."""
    at = np.flatnonzero(mask[:-1] != mask[1:])
    first = mask[at]
    return np.where(first, at, at + 1), np.where(first, at + 1, at)


def last(holds: Callable[[Array], Mask], inside: Array, outside: Array) -> Array:
    """Last points (N,) at which ``holds`` is true on the way from ``inside``, where it is, to ``outside``, where it is not."""
    inside, outside = np.array(inside, float), np.array(outside, float)
    if not len(inside):
        return inside
    share = np.arange(PARTS + 1) / PARTS
    each = np.arange(len(inside))
    for _ in range(ROUNDS):
        x = inside[:, None] + share * (outside - inside)[:, None]
        good = holds(x[:, 1:-1].ravel()).reshape(len(inside), PARTS - 1)
        first = np.where(good.all(axis=1), PARTS, 1 + good.argmin(axis=1))  # the first part end that does not hold
        inside, outside = x[each, first - 1], x[each, first]
    return inside


def lowest(function: Callable[[Array, Indices], Array], low: Array, high: Array) -> tuple[Array, Array]:
    """Lowest points (N,) between ``low`` and ``high`` and the values there; an element ends at its first value below zero.

    Parameters
    ----------
    function : (numbers, their elements) -> values; NaN counts as high.

    Method: golden section, J. Kiefer, Proc. Amer. Math. Soc. 4 (1953) 502 (from memory).
    """
    a, b = np.array(low, float), np.array(high, float)

    def value(x: Array, k: Indices) -> Array:
        y = function(x, k)
        return np.where(np.isfinite(y), y, np.inf)

    k = np.arange(len(a))
    if not len(a):
        return a, a
    left, right = b - _GOLDEN * (b - a), a + _GOLDEN * (b - a)
    y_left, y_right = value(left, k), value(right, k)
    for _ in range(GOLDEN_STEPS):
        k = np.flatnonzero(np.minimum(y_left, y_right) >= 0.0)
        if not len(k):
            break
        down = y_left[k] <= y_right[k]
        go, back = k[down], k[~down]
        b[go], right[go], y_right[go] = right[go], left[go], y_left[go]
        a[back], left[back], y_left[back] = left[back], right[back], y_right[back]
        left[go], right[back] = b[go] - _GOLDEN * (b[go] - a[go]), a[back] + _GOLDEN * (b[back] - a[back])
        y = value(np.where(down, left[k], right[k]), k)
        y_left[go], y_right[back] = y[down], y[~down]
    down = y_left <= y_right
    return np.where(down, left, right), np.where(down, y_left, y_right)
