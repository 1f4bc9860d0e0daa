"""One immutable table of species for a case: names, elements, polynomials, limits, hash.

Source of the thermodynamic data: the file ``nasa_gas.yaml`` bundled with Cantera (NASA
seven-coefficient polynomials with a break at 1000 K, 200 to 6000 K; each entry there names its
origin); nitrogen and oxygen in the nine-coefficient form of ``airNASA9.yaml``, also bundled.
``mechanisms/phases/products.toml`` names which of them make up burned gas. The fuel's vapour arrives
as plain numbers: its heating value fixes the enthalpy, named species of the same file lend the shape
of cp(T).

The bundled polynomials jump by up to 3e-7 R T at their break; here the upper range is shifted by
that jump, so that enthalpy and entropy are continuous and every inversion has one root.
"""

from __future__ import annotations

import hashlib
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property, lru_cache
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from fuelair import resources
from fuelair.errors import DataError
from fuelair.fuel import Vapour
from fuelair.gas.polynomials import T_BREAK, R, enthalpy_at, entropy_at, limits_of, ranges_of

Array = npt.NDArray[np.float64]

T_STANDARD = 298.15
"""Reference temperature of heating values and formation enthalpies [K]."""
FUEL = "fuel"
UNBURNED = "unburned-fuel"
GRAPHITE_FILE, GRAPHITE = "nasa_condensed.yaml", "C(gr)"
_PHASES = "products.toml"


@dataclass(frozen=True, eq=False)
class SpeciesTable:
    """Species of one case.

    Attributes
    ----------
    names : S species names; ``fuel`` is the vapour that takes part, ``unburned-fuel`` the same
        molecule carried as inert.
    elements : E element symbols.
    atoms : (S, E) atoms per molecule (``unburned-fuel`` has its atoms here too).
    molar_mass : (S,) [kg/kmol].
    low, high : (S, 9) NASA coefficients below and above 1000 K, in the order of `polynomials`.
    t_min, t_max : (S,) validity limits [K].
    forms : (S,) mask of the species that equilibrium may form.
    inert : (S,) mask of species that never react.
    graphite : (2, 9) NASA coefficients of graphite, to see when solid carbon would form.
    reference_pressure : standard-state pressure of the data [Pa].
    """

    names: tuple[str, ...]
    elements: tuple[str, ...]
    atoms: Array
    molar_mass: Array
    low: Array
    high: Array
    t_min: Array
    t_max: Array
    forms: npt.NDArray[np.bool_]
    inert: npt.NDArray[np.bool_]
    graphite: Array
    reference_pressure: float

    def __len__(self) -> int:
        return len(self.names)

    def index(self, name: str) -> int:
        """Column of a species; DataError if the table has none of that name."""
        try:
            return self.names.index(name)
        except ValueError:
            raise DataError(f"species {name!r} is not in the table: {', '.join(self.names)}") from None

    def has(self, name: str) -> bool:
        """Whether the table carries a species of that name."""
        return name in self.names

    def element(self, symbol: str) -> int | None:
        """Column of an element in ``atoms``, None if no species carries it."""
        return self.elements.index(symbol) if symbol in self.elements else None

    @cached_property
    def coefficients(self) -> Array:
        """(S, 18) both ranges side by side, for mixing."""
        return np.hstack([self.low, self.high])

    @cached_property
    def reactive_atoms(self) -> Array:
        """(S, E) atoms that may react: zero for inert species."""
        return np.where(self.inert[:, None], 0.0, self.atoms)

    @cached_property
    def oxygen_excess(self) -> Array:
        """(S, 1) oxygen atoms beyond those that complete combustion of the molecule takes; zero for inert species."""
        need = {"O": 1.0, "C": -2.0, "H": -0.5, "S": -2.0}
        return np.asarray(self.reactive_atoms @ np.array([[need.get(e, 0.0)] for e in self.elements]))

    @cached_property
    def balances(self) -> Array:
        """(S, E + 1) atoms, and molar mass [kg/kmol], side by side."""
        return np.column_stack([self.atoms, self.molar_mass])

    @cached_property
    def digest(self) -> str:
        """Hash of names, composition and data; equal tables have equal digests."""
        h = hashlib.sha256("|".join(self.names + self.elements).encode())
        for part in (self.atoms, self.low, self.high, self.t_min, self.t_max, self.forms, self.inert, self.graphite):
            h.update(np.ascontiguousarray(part).tobytes())
        h.update(repr(self.reference_pressure).encode())
        return h.hexdigest()[:16]

    def amounts(self, composition: dict[str, float]) -> Array:
        """Amounts [kmol/kg] of shape (S,) of a mixture given as relative amounts of substance."""
        n = np.zeros(len(self))
        for name, value in composition.items():
            n[self.index(name)] += value
        return np.asarray(n / float(np.sum(n * self.molar_mass)))


@dataclass(frozen=True, slots=True)
class _Phases:
    """Names of the species of burned gas, and the bundled data files that they come from."""

    products: tuple[str, ...]
    sulfur: tuple[str, ...]
    file: str
    nine_file: str
    nine: tuple[str, ...]


@lru_cache(maxsize=1)
def _phases() -> _Phases:
    """Species sets and their data files, read from ``mechanisms/phases``."""
    path = resources.folder("mechanisms/phases") / _PHASES
    try:
        data = tomllib.loads(path.read_text(encoding="utf-8"))
        nine = data["nine_coefficients"]
        return _Phases(tuple(data["products"]), tuple(data["sulfur"]), data["data"], nine["file"], tuple(nine["species"]))
    except (OSError, KeyError, tomllib.TOMLDecodeError) as error:
        raise DataError(f"species sets cannot be read from {path}: {error}") from None


@lru_cache(maxsize=4)
def _entries(file: str) -> dict[str, str]:
    """Text of every species entry of a data file that Cantera bundles, by name.

    Read here and handed on as text: Cantera itself would look into the current folder first, and loses
    letters beyond ASCII from the path of its own data folder.
    """
    import cantera as ct

    path = Path(ct.__file__).resolve().parent / "data" / file
    try:
        text = path.read_text(encoding="utf-8")
    except OSError as error:
        raise DataError(f"data file {file} of Cantera cannot be read: {error}") from None
    blocks = text.partition("\nspecies:\n")[2].split("- name: ")[1:]
    return {block.partition("\n")[0].strip().strip("\"'"): "- name: " + block for block in blocks}


@lru_cache(maxsize=64)
def _species(names: tuple[str, ...], file: str | None = None) -> dict[str, Any]:
    """Species by name from a bundled data file; by default each from the file that ``mechanisms/phases`` names."""
    import cantera as ct

    places = {n: file or _file_of(n) for n in names}
    missing = {n: place for n, place in places.items() if n not in _entries(place)}
    if missing:
        raise DataError(f"species not in {' or '.join(sorted(set(missing.values())))}: {', '.join(missing)}")
    made = ct.Species.list_from_yaml("".join(_entries(place)[n].rstrip() + "\n" for n, place in places.items()))
    return dict(zip(places, made, strict=True))


def _file_of(name: str) -> str:
    phases = _phases()
    return phases.nine_file if name in phases.nine else phases.file


def data_versions() -> dict[str, str]:
    """Version of Cantera, whose bundled species data are used."""
    import cantera as ct

    phases = _phases()
    return {
        "cantera": str(ct.__version__),
        "species_data": f"{phases.file}, {' and '.join(phases.nine)} of {phases.nine_file}, of Cantera {ct.__version__}",
    }


def cantera_thermo(table: SpeciesTable, j: int) -> dict[str, Any]:
    """Thermodynamic entry of species ``j`` for a Cantera phase definition, from the table's own numbers."""
    rows = [[float(c) for c in row] for row in (table.low[j], table.high[j])]
    nine = any(row[7] or row[8] for row in rows)
    return {
        "model": "NASA9" if nine else "NASA7",
        "reference-pressure": table.reference_pressure,
        "temperature-ranges": [float(table.t_min[j]), T_BREAK, float(table.t_max[j])],
        "data": [[*row[7:], *row[:7]] if nine else row[:7] for row in rows],
    }


def _vapour_ranges(vapour: Vapour, mass: float) -> tuple[Array, float, float]:
    """Polynomial of a fuel vapour: shape from named species, enthalpy from the heating value."""
    species = _species(tuple(dict.fromkeys([*(n for n, _ in vapour.shape), "O2", "CO2", "H2O", "N2", "SO2"])))
    ranges = np.zeros((2, 9))
    for name, share in vapour.shape:
        ranges += share * ranges_of(species[name])
    atoms = dict(vapour.atoms)
    products = {
        "CO2": atoms.get("C", 0.0),
        "H2O": atoms.get("H", 0.0) / 2,
        "N2": atoms.get("N", 0.0) / 2,
        "SO2": atoms.get("S", 0.0),
    }
    oxygen = products["CO2"] + products["H2O"] / 2 + products["SO2"] - atoms.get("O", 0.0) / 2
    target = vapour.lower_heating_value * mass - oxygen * enthalpy_at(ranges_of(species["O2"]), T_STANDARD)
    target += sum(n * enthalpy_at(ranges_of(species[k]), T_STANDARD) for k, n in products.items())
    ranges[:, 5] += (target - enthalpy_at(ranges, T_STANDARD)) / R
    if vapour.entropy is not None:
        ranges[:, 6] += (vapour.entropy - entropy_at(ranges, T_STANDARD)) / R
    low = max(limits_of(species[n])[0] for n, _ in vapour.shape)
    high = min(limits_of(species[n])[1] for n, _ in vapour.shape)
    return ranges, low, high


def shape_is_molecule(vapour: Vapour) -> bool:
    """Whether the species that lend the shape add up to the fuel's own atoms, so that their entropy is its own."""
    if vapour.entropy is not None:
        return True
    species = _species(tuple(n for n, _ in vapour.shape))
    atoms: dict[str, float] = {}
    for name, share in vapour.shape:
        for element, count in species[name].composition.items():
            atoms[element] = atoms.get(element, 0.0) + share * count
    given = dict(vapour.atoms)
    return all(abs(atoms.get(e, 0.0) - given.get(e, 0.0)) < 1e-9 for e in {*atoms, *given})


def build(vapour: Vapour | None = None, *, extra: Sequence[str] = ()) -> SpeciesTable:
    """Build the table of a case.

    Parameters
    ----------
    vapour : the fuel vapour; None for a table of air and products alone.
    extra : further species of the bundled data to add to the equilibrium (names as there).

    Raises
    ------
    DataError : a named species is not in the bundled data.
    """
    return _build(vapour, tuple(extra))


@lru_cache(maxsize=64)
def _build(vapour: Vapour | None, extra: tuple[str, ...]) -> SpeciesTable:
    phases = _phases()
    sulfur = vapour is not None and any(e == "S" for e, _ in vapour.atoms)
    products = list(phases.products) + (list(phases.sulfur) if sulfur else [])
    products += [n for n in extra if n not in products]
    species = _species(tuple(products))
    elements = ("C", "H", "O", "N", "Ar") + (("S",) if sulfur else ())
    weight = _atomic_weights(elements)
    atoms = [[float(species[n].composition.get(e, 0.0)) for e in elements] for n in products]
    ranges = [ranges_of(species[n]) for n in products]
    t_min = [limits_of(species[n])[0] for n in products]
    t_max = [limits_of(species[n])[1] for n in products]
    reference = {float(species[n].thermo.reference_pressure) for n in products}
    names = list(products)
    forms = [True] * len(names)
    inert = [False] * len(names)
    if vapour is not None:
        given = dict(vapour.atoms)
        row = [given.get(e, 0.0) for e in elements]
        mass = float(sum(a * weight[e] for a, e in zip(row, elements, strict=True)))
        fuel, low, high = _vapour_ranges(vapour, mass)
        for name, is_inert in ((FUEL, False), (UNBURNED, True)):
            names.append(name)
            atoms.append(row)
            ranges.append(fuel)
            t_min.append(low)
            t_max.append(high)
            forms.append(False)
            inert.append(is_inert)
    if len(reference) != 1:
        raise DataError(f"species data mix reference pressures: {sorted(reference)}")
    matrix = np.array(atoms)
    return SpeciesTable(
        names=tuple(names),
        elements=elements,
        atoms=matrix,
        molar_mass=_frozen(np.array([sum(a * weight[e] for a, e in zip(row, elements, strict=True)) for row in matrix])),
        low=np.array([r[0] for r in ranges]),
        high=np.array([r[1] for r in ranges]),
        t_min=np.array(t_min),
        t_max=np.array(t_max),
        forms=np.array(forms),
        inert=np.array(inert),
        graphite=ranges_of(_species((GRAPHITE,), GRAPHITE_FILE)[GRAPHITE]),
        reference_pressure=reference.pop(),
    )


def _frozen(array: Array) -> Array:
    array.setflags(write=False)
    return array


@lru_cache(maxsize=8)
def _atomic_weights(elements: tuple[str, ...]) -> dict[str, float]:
    """Atomic weights as Cantera carries them [kg/kmol]."""
    import cantera as ct

    return {e: float(ct.Element(e).weight) for e in elements}
