"""Statistics of independently randomised nets: a figure's band, sensitivity indices, rank correlations.

Samples come as (R, N): R independent randomisations of a net of N rows, NaN where a row failed. Estimates pool all
rows; their half-widths are 95 % confidence intervals from the scatter of the R separate estimates (Student t).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from fuelair.gas.engine import Array

CONFIDENCE = 0.95
SHARES = (0.05, 0.5, 0.95, 0.99)
"""Of the rows that lie below the quantiles P5, P50, P95, P99."""
UNMOVED = 1e-9
"""Standard deviation over mean up to which a figure does not spread at all; also what counts as a tie in ranks."""


@dataclass(frozen=True, slots=True)
class Band:
    """Spread of one figure in its SI unit; NaN where no row was solved."""

    mean: float
    deviation: float
    p5: float
    p50: float
    p95: float
    p99: float
    p95_within: float
    """Half-width of the 95 % confidence interval of P95."""

    @property
    def unmoved(self) -> bool:
        """Whether the figure does not spread."""
        return not self.deviation > UNMOVED * abs(self.mean)


def band(y: Array) -> Band:
    """Band of a figure (R, N)."""
    solved = y[np.isfinite(y)]
    if len(solved) < 2:
        return Band(*[float("nan")] * 7)
    p5, p50, p95, p99 = (float(q) for q in np.quantile(solved, SHARES))
    within = half_width(y, lambda rows: np.quantile(rows[np.isfinite(rows)], 0.95))
    return Band(float(solved.mean()), float(solved.std(ddof=1)), p5, p50, p95, p99, float(within))


def half_width(samples: Array, estimate: Callable[[Array], Array | float]) -> Array:
    """Half-width of the confidence interval of an estimate from R independent samples (R, ...)."""
    from scipy.special import stdtrit

    with np.errstate(invalid="ignore", divide="ignore"):
        each = np.array([estimate(one) for one in samples])
        t = stdtrit(len(samples) - 1, 0.5 + 0.5 * CONFIDENCE)
        return np.asarray(t * each.std(axis=0, ddof=1) / np.sqrt(len(samples)))


def indices(a: Array, b: Array, mixed: Array) -> tuple[Array, Array, Array, Array]:
    """First-order and total Sobol indices of D independent inputs.

    Parameters
    ----------
    a, b : figure on two independent samples (R, N).
    mixed : figure on ``a`` with input i taken from ``b`` (R, D, N).

    Returns
    -------
    First-order, their half-widths, total, their half-widths; (D,) each.

    Sources: first order A. Saltelli et al., Comput. Phys. Commun. 181 (2010) 259, on figures less their mean;
    total M. J. W. Jansen, Comput. Phys. Commun. 117 (1999) 35 (both from memory). A row counts where all of its
    figures are solved.
    """
    whole = np.isfinite(a) & np.isfinite(b) & np.isfinite(mixed).all(axis=1)
    if not whole.any():
        nothing = np.full(mixed.shape[1], np.nan)
        return nothing, nothing, nothing, nothing
    mean = 0.5 * (a[whole].mean() + b[whole].mean())
    rows = np.concatenate([a[:, None], b[:, None], mixed], axis=1) - mean
    rows[~np.broadcast_to(whole[:, None], rows.shape)] = np.nan

    def first(sample: Array) -> Array:
        one, other, both = _parts(sample)
        return np.asarray((other * (both - one)).mean(axis=1) / _variance(one, other))

    def total(sample: Array) -> Array:
        one, other, both = _parts(sample)
        return np.asarray(0.5 * ((one - both) ** 2).mean(axis=1) / _variance(one, other))

    pooled = np.concatenate(list(rows), axis=1)
    return first(pooled), half_width(rows, first), total(pooled), half_width(rows, total)


def _parts(sample: Array) -> tuple[Array, Array, Array]:
    good = sample[:, np.isfinite(sample[0])]
    return good[0], good[1], good[2:]


def _variance(one: Array, other: Array) -> float:
    return float(np.concatenate([one, other]).var())


def rank_correlations(x: Array, y: Array) -> tuple[Array, Array]:
    """Rank correlations (C. Spearman, 1904) of inputs (R, N, D) with a figure (R, N), and their half-widths; (D,) each."""
    from scipy.stats import rankdata

    def correlation(x: Array, y: Array) -> Array:
        good = np.isfinite(y)
        scale = np.abs(y[good]).max(initial=0.0) * UNMOVED or 1.0
        ranks = [rankdata(one) for one in (*x[good].T, np.round(y[good] / scale))]
        centred = [one - one.mean() for one in ranks]
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.array(
                [(one * centred[-1]).sum() / np.sqrt((one**2).sum() * (centred[-1] ** 2).sum()) for one in centred[:-1]]
            )

    each = np.concatenate([x, y[:, :, None]], axis=2)
    within = half_width(each, lambda sample: correlation(sample[:, :-1], sample[:, -1]))
    return correlation(x.reshape(-1, x.shape[2]), y.ravel()), within
