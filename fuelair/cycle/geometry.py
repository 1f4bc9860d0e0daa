"""Cylinder volumes of a cycle as parts of the swept volume."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fuelair.gas.engine import Array, Index, taken


@dataclass(frozen=True, slots=True)
class Volumes:
    """Volumes over the swept volume V_d (N,), dimensionless.

    Attributes
    ----------
    clearance : V_c / V_d = 1 / (r - 1).
    intake_closing, exhaust_opening, exhaust_closing : cylinder volume at those events over V_d.
    """

    clearance: Array
    intake_closing: Array
    exhaust_opening: Array
    exhaust_closing: Array

    @classmethod
    def dead_centres(cls, compression_ratio: Array) -> Volumes:
        """All events at dead centres for a geometric ``compression_ratio`` (N,) above 1."""
        clearance = 1.0 / (np.asarray(compression_ratio, float) - 1.0)
        whole = clearance + 1.0
        return cls(clearance, whole, whole, clearance)

    def rows(self, index: Index | slice) -> Volumes:
        """The volumes of some rows only."""
        return Volumes(*(taken(getattr(self, name), index) for name in self.__slots__))

    @property
    def largest(self) -> Array:
        """Volume at the outer dead centre over V_d."""
        return self.clearance + 1.0

    @property
    def effective_compression(self) -> Array:
        """V(intake closing) / V_c."""
        return self.intake_closing / self.clearance

    @property
    def effective_expansion(self) -> Array:
        """V(exhaust opening) / V_c."""
        return self.exhaust_opening / self.clearance
