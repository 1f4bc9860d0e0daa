"""Random numbers of the studies: scrambled Sobol nets, and from them values of spreading keys."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fuelair.case.spreads import Marginal
from fuelair.gas.engine import Array

BITS = 30
"""Of a coordinate of a net; each is moved to the middle of its cell, so that none is 0 or 1."""


def nets(dimensions: int, rows: int, seed: int, count: int) -> Array:
    """Independently scrambled Sobol nets (count, rows, dimensions) of numbers between 0 and 1, ends excluded.

    Parameters
    ----------
    rows : of one net, a power of two.

    Source: A. B. Owen, J. Complexity 14 (1998) 466 (scrambling; from memory), through scipy.
    """
    from scipy.stats import qmc

    power = rows.bit_length() - 1
    made = [
        qmc.Sobol(dimensions, scramble=True, bits=BITS, seed=np.random.default_rng(one)).random_base2(power)
        for one in np.random.SeedSequence(seed).spawn(count)
    ]
    return np.asarray(np.array(made) + 0.5 ** (BITS + 1))


def values(spreads: Sequence[Marginal], u: Array, root: Sequence[Sequence[float]] | None = None) -> Array:
    """Values (N, D) of spreading keys from numbers (N, D) between 0 and 1.

    Parameters
    ----------
    root : lower triangular root (D, D) of the correlation matrix of a Gaussian copula; None: independent.
    """
    from scipy.special import ndtr, ndtri

    if root is not None:
        z = ndtri(u)
        u = np.stack([ndtr(sum(root[i][j] * z[:, j] for j in range(i + 1))) for i in range(len(spreads))], axis=1)
    return np.stack([quantile(spread, u[:, i]) for i, spread in enumerate(spreads)], axis=1)


def quantile(spread: Marginal, u: Array) -> Array:
    """Values below which the shares ``u`` (N,) of a spread lie.

    >>> half = Marginal("x", "triangular", 1.0, float("nan"), 0.0, 2.0)
    >>> quantile(half, np.array([0.125, 0.5, 0.875]))
    array([0.5, 1. , 1.5])
    """
    from scipy.special import ndtr, ndtri

    low, high, centre = spread.low, spread.high, spread.centre
    if spread.distribution == "normal":
        first, last = ndtr((low - centre) / spread.deviation), ndtr((high - centre) / spread.deviation)
        drawn = centre + spread.deviation * ndtri(first + u * (last - first))
    elif spread.distribution == "uniform":
        drawn = low + u * (high - low)
    else:
        width, below = high - low, (centre - low) / (high - low)
        rising = low + np.sqrt(u * width * (centre - low))
        drawn = np.where(u <= below, rising, high - np.sqrt((1.0 - u) * width * (high - centre)))
    return np.clip(drawn, low, high)
