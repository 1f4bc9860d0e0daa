"""Everything the validation book may call: importing this fills the two registers."""

from __future__ import annotations

from fuelair.proof import cycles, equilibria, flames, packages, realgas, substances
from fuelair.proof.registry import COMPUTATIONS, LOOKUPS

__all__ = ["COMPUTATIONS", "LOOKUPS", "cycles", "equilibria", "flames", "packages", "realgas", "substances"]
