"""Arrays that the compiled code of the generic equilibrium reads and works in, few and flat.

Every array handed to a compiled function costs time at each call, so species data and work space are packed into a
few arrays whose rows have names.
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from fuelair.gas.compiled.jit import inlined
from fuelair.gas.engine import Array
from fuelair.gas.species import SpeciesTable

PAIRS = ("TP", "TV", "HP", "UV", "SP", "SV", "ST")
TP, TV, HP, UV, SP, SV, ST = range(7)
"""Pairs as numbers, for branches at run time."""

MAJORS = ("CO2", "CO", "H2O", "H2", "O2", "N2", "Ar", "SO2")
CO2, CO, H2O, H2, O2, N2, AR, SO2 = range(8)
"""Products of complete combustion: their places in ``columns``."""
ELEMENTS = ("C", "H", "O", "N", "Ar", "S")
CARBON, HYDROGEN, OXYGEN, NITROGEN, ARGON, SULFUR = range(8, 14)
"""Elements: their places in ``columns``."""
FORMS, INERT, MAJOR = range(3)
"""Rows of ``kind``."""

AMOUNT, LOG, ENTHALPY, ENTROPY, CP, EXCESS, ENERGY, SIZE, STEP, WEIGHT, USABLE, REACTING = range(12)
"""Rows of ``species``: n and ln n; h/(RT), s/R, cp/R; mu/(RT) beyond the potentials of the elements; partial energy over RT;
derivative of mu by ln n or -ln V; step of ln n; weight in the equation of energy or entropy; 1 for what may form;
n of what may form."""
BALANCE, ABSENT, POTENTIAL, RIGHT, STATE = range(5)
"""Rows of ``elements``: b; 1 for what is absent; pi/(RT); right side and solution; ln T and ln V."""


class Species(NamedTuple):
    """A species table: S species, E elements.

    polynomials (2, 9, S) below and above 1000 K; has (E, S) atoms that may react; atoms (E, S) the same with the oxygen
    excess O - 2 C - H/2 - 2 S in the place of oxygen; kind (3, S); columns (14,) of the species of complete
    combustion and of the elements, -1 for none; reference_pressure (1,) [Pa].
    """

    polynomials: Array
    has: Array
    atoms: Array
    kind: npt.NDArray[np.bool_]
    columns: npt.NDArray[np.intp]
    reference_pressure: Array


class Work(NamedTuple):
    """Work space of one state: species (12, S), elements (5, E + 2), matrix (E + 2, E + 2)."""

    species: Array
    elements: Array
    matrix: Array


@lru_cache(maxsize=64)
def species_of(table: SpeciesTable) -> Species:
    """The arrays of a table."""
    has = table.reactive_atoms.T
    columns = [table.index(n) if n != "SO2" or table.has(n) else -1 for n in MAJORS]
    places = [table.element(e) for e in ELEMENTS]
    excess = np.array([{"C": -2.0, "H": -0.5, "O": 1.0, "S": -2.0}.get(e, 0.0) for e in table.elements])
    atoms = has.copy()
    atoms[table.elements.index("O")] = (excess[:, None] * has).sum(axis=0)
    kind = np.array([table.forms & ~table.inert, table.inert, np.isin(np.arange(len(table)), columns)])
    return Species(
        polynomials=np.ascontiguousarray(np.array([table.low.T, table.high.T])),
        has=np.ascontiguousarray(has),
        atoms=np.ascontiguousarray(atoms),
        kind=kind,
        columns=np.array(columns + [-1 if p is None else p for p in places], dtype=np.intp),
        reference_pressure=np.array([table.reference_pressure]),
    )


@inlined
def work_for(t: Species) -> Work:
    """Work space for a table."""
    e, n = t.atoms.shape
    return Work(np.zeros((12, n)), np.zeros((5, e + 2)), np.zeros((e + 2, e + 2)))
