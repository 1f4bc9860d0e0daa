"""A second opinion on the real gas: isentropic compression with Cantera's Peng-Robinson equation.

Of two sound models, neither fitted to hot dense air, the distance tells how far to trust either. Against
the reference equation of air Peng-Robinson ends compression 0.4 % (1 bar), 1.2 % (3 bar) and 2.8 %
(6 bar trapped, r = 16) low; it is not used for any result.
"""

from __future__ import annotations

import json
import tomllib
from functools import lru_cache
from typing import Any

import numpy as np

from fuelair import resources
from fuelair.errors import DataError
from fuelair.gas.engine import Array, GasState
from fuelair.gas.species import SpeciesTable, cantera_thermo
from fuelair.roots import bracketed

UNKNOWN_SHARE = 2e-3
"""Mole fraction of species without critical constants up to which they are left out."""
WIDTH = 1e-9
"""Width at which the end temperature is found [K]."""


def compression_pressure(table: SpeciesTable, trapped: GasState, volume_ratio: Array) -> float | None:
    """End pressure [Pa] of isentropic compression of one trapped charge (the first of the batch) by Peng-Robinson.

    None if species without critical constants make up more than `UNKNOWN_SHARE` (fuel vapour does), or where
    no end temperature is found.
    """
    constants = _constants()
    x = trapped.mole_fractions()[0]
    known = {n: float(v) for n, v in zip(table.names, x, strict=True) if v > 0.0 and n in constants}
    if sum(known.values()) < 1.0 - UNKNOWN_SHARE:
        return None
    phase = _phase(table, tuple(known))
    phase.TPX = float(trapped.T[0]), float(trapped.p[0]), known
    entropy, density = phase.entropy_mass, phase.density * float(volume_ratio[0])

    def miss(T: Array) -> Array:
        phase.TD = float(T[0]), density
        return np.array([phase.entropy_mass - entropy])

    start = trapped.T[:1]
    T, found = bracketed(miss, start, start * float(volume_ratio[0]) ** 0.7, width=WIDTH)
    phase.TD = float(T[0]), density
    return float(phase.P) if found[0] else None


@lru_cache(maxsize=1)
def _constants() -> dict[str, dict[str, float]]:
    path = resources.folder("mechanisms") / "critical.toml"
    try:
        data: dict[str, dict[str, float]] = tomllib.loads(path.read_text(encoding="utf-8"))["species"]
    except (OSError, KeyError, tomllib.TOMLDecodeError) as error:
        raise DataError(f"critical constants cannot be read from {path}: {error}") from None
    return data


def _phase(table: SpeciesTable, names: tuple[str, ...]) -> Any:
    """A Peng-Robinson phase of Cantera over the table's own polynomials."""
    import cantera as ct

    species = []
    for name in names:
        j, own = table.index(name), _constants()[name]
        atoms = {e: float(a) for e, a in zip(table.elements, table.atoms[j], strict=True) if a}
        species.append(
            {
                "name": name,
                "composition": atoms,
                "thermo": cantera_thermo(table, j),
                "critical-parameters": {
                    "critical-temperature": own["temperature"],
                    "critical-pressure": own["pressure"],
                    "acentric-factor": own["acentric_factor"],
                },
            }
        )
    elements = sorted({e for s in species for e in s["composition"]})
    phase = {"name": "gas", "thermo": "Peng-Robinson", "elements": elements, "species": list(names)}
    return ct.Solution(yaml=json.dumps({"phases": [phase], "species": species}))
