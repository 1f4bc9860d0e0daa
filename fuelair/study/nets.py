"""Scrambled Sobol nets, seeded."""

from __future__ import annotations

import numpy as np

from fuelair.gas.engine import Array

BITS = 30
"""Of a coordinate; each is moved to the middle of its cell, so that none is 0 or 1."""


def nets(dimensions: int, rows: int, seed: int, count: int) -> Array:
    """Independently scrambled nets (count, rows, dimensions) of numbers between 0 and 1, ends excluded.

    Parameters
    ----------
    rows : of one net, a power of two.

    Source: A. B. Owen, J. Complexity 14 (1998) 466 (scrambling; from memory), through scipy.
    """
    from scipy.stats import qmc

    seeds = np.random.SeedSequence(seed).spawn(count)
    made = [
        qmc.Sobol(dimensions, scramble=True, bits=BITS, seed=np.random.default_rng(one)).random_base2(rows.bit_length() - 1)
        for one in seeds
    ]
    return np.asarray(np.array(made) + 0.5**(BITS + 1))
