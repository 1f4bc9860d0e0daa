"""fuelair: the fuel-air engine cycle beside the air-standard cycles.

The only door: everything else is internal. Importing it loads no Cantera, pandas or other heavy
library; those load when the first case is assessed.
"""

from __future__ import annotations

from fuelair.assess import assess
from fuelair.assessment import Assessment
from fuelair.case import Case
from fuelair.errors import DataError, FuelairError, InputError, MissingExtraError, Problem, UnsolvedError
from fuelair.fuel import Fuel
from fuelair.study.door import band, best, find, sweep
from fuelair.version import __version__

__all__ = [
    "Assessment",
    "Case",
    "DataError",
    "Fuel",
    "FuelairError",
    "InputError",
    "MissingExtraError",
    "Problem",
    "UnsolvedError",
    "__version__",
    "assess",
    "band",
    "best",
    "find",
    "sweep",
]
