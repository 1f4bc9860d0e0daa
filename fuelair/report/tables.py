"""An assessment as plain tables of text: one row model behind every face.

Pure functions of the result. Pressures in bar, temperatures in K, energies in kJ/kg; every column
carries its unit.
"""

from __future__ import annotations

from fuelair.assessment import Assessment
from fuelair.report.comparison import companions, costs, models, over, states
from fuelair.report.context import charge, defaults, engine, exergy, exhaust, ledger
from fuelair.report.table import CAUTION, Table

__all__ = [
    "CAUTION",
    "Table",
    "charge",
    "companions",
    "costs",
    "defaults",
    "engine",
    "exergy",
    "exhaust",
    "ledger",
    "models",
    "over",
    "states",
    "tables",
]


def tables(a: Assessment) -> list[Table]:
    """Every table of an assessment in reading order."""
    return [charge(a), models(a), costs(a), over(a), *companions(a), states(a), engine(a), exhaust(a), exergy(a)]
