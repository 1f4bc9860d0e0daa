"""Vapour pressure of a liquid fuel from a recorded correlation."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

GAS_CONSTANT = 8314.462618
FORMS = {"dippr101": 5, "clausius-clapeyron": 3}


@dataclass(frozen=True, slots=True)
class Saturation:
    """A correlation of vapour pressure.

    Attributes
    ----------
    form : ``dippr101``: ln p = C1 + C2/T + C3 ln T + C4 T^C5 (Perry, 8th ed., Table 2-8);
        ``clausius-clapeyron``: p = p1 exp(-L/R (1/T - 1/T1)), coefficients p1 [Pa], T1 [K], L [J/kmol], an estimate;
        ``ideal-solution``: mole-weighted sum over ``parts`` (Raoult), an estimate.
    coefficients : of that form; empty for ``ideal-solution``.
    valid : temperature range [K].
    parts : (mole fraction, correlation of that component) for ``ideal-solution``.
    source, standing, note : where it comes from.
    """

    form: str
    coefficients: tuple[float, ...] = ()
    valid: tuple[float, float] = (0.0, math.inf)
    parts: tuple[tuple[float, Saturation], ...] = ()
    source: str = ""
    standing: str = ""
    note: str = ""

    def pressure(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Return the vapour pressure [Pa] at ``temperature`` [K], of its shape; extrapolates outside ``valid``."""
        T = np.asarray(temperature, dtype=float)
        if self.form == "ideal-solution":
            return np.asarray(sum(x * part.pressure(T) for x, part in self.parts))
        if self.form == "dippr101":
            c1, c2, c3, c4, c5 = self.coefficients
            return np.asarray(np.exp(c1 + c2 / T + c3 * np.log(T) + c4 * T**c5))
        if self.form == "clausius-clapeyron":
            p1, t1, latent = self.coefficients
            return np.asarray(p1 * np.exp(-latent / GAS_CONSTANT * (1.0 / T - 1.0 / t1)))
        raise ValueError(f"unknown form {self.form!r}")


def ideal_solution(parts: tuple[tuple[float, Saturation], ...]) -> Saturation:
    """Return Raoult's law over (mole fraction, correlation); valid where all parts are."""
    low = max(part.valid[0] for _, part in parts)
    high = min(part.valid[1] for _, part in parts)
    return Saturation(
        "ideal-solution",
        (),
        (low, high),
        parts,
        "Raoult's law over the components",
        "computed",
        "An estimate: real solutions deviate, gasoline with alcohol upwards.",
    )
