"""Virial coefficients of fluids and pairs as a case needs them: read, chosen, mapped to its species.

The file ``mechanisms/virial/virial.toml`` carries the fits, their errors and sources;
``validation/fits/virial.py`` made it. Species without data of their own are stood for by a fluid of
that file, as its table ``mapping`` says; a fuel vapour by its own fluid if the caller names it, else by
the nearest (see `nearest_fuel`).
"""

from __future__ import annotations

import math
import tomllib
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np

from fuelair import resources
from fuelair.errors import DataError
from fuelair.gas.engine import Array
from fuelair.gas.species import FUEL, UNBURNED, SpeciesTable

VOLUME = 1e-3
"""cm3/mol to m3/kmol."""
CUBE_ROOT_VOLUME = 1e-2
"""The same for the cube root of C, which is a volume to the power 2/3."""
T_MIN, T_MAX = 200.0, 6000.0
"""Temperatures between which the fits stay tame [K]; they are fitted from 250 to 3500 K."""


@dataclass(frozen=True, eq=False)
class VirialTable:
    """Virial coefficients for the species of one table.

    Attributes
    ----------
    fluids : names of the F fluids that stand for the species.
    mapping : (S, F) share of each fluid in each species; every row adds up to 1.
    b : (F, F, K) coefficients of B of every pair of fluids [m3/kmol].
    c : (F, K) coefficients of the cube root of C [(m3/kmol)^(2/3)].
    exponents : (K,) of the basis (reference_temperature/T)**e.
    reference_temperature : of the basis [K].
    closing : constant of the term that stands for all coefficients above the third [-].
    sources : one key a fluid, its reference equation of state.
    t_min, t_max : limits of the fits [K].
    """

    fluids: tuple[str, ...]
    mapping: Array
    b: Array
    c: Array
    exponents: Array
    reference_temperature: float
    closing: float
    sources: tuple[str, ...]
    t_min: float
    t_max: float


@lru_cache(maxsize=64)
def virial_table(table: SpeciesTable, fuel_fluid: str | None = None) -> VirialTable:
    """Coefficients for a species table; made once a table.

    Parameters
    ----------
    table : species of the case.
    fuel_fluid : fluid that stands for the fuel vapour (a name of `fluids`); None takes the nearest.

    Raises
    ------
    DataError : the data file has no fluid of that name.
    """
    data = _data()
    records = {str(f["name"]): f for f in data["fluid"]}
    shares = [_shares(table, i, fuel_fluid, data, records) for i in range(len(table))]
    used = {name for share in shares for name in share}
    fluids = tuple(name for name in records if name in used)
    mapping = np.array([[share.get(name, 0.0) for name in fluids] for share in shares])
    pairs = {frozenset(p["of"]): p["b"] for p in data["pair"]}
    b = [[records[f]["b"] if f == g else pairs[frozenset((f, g))] for g in fluids] for f in fluids]
    return VirialTable(
        fluids=fluids,
        mapping=_fixed(mapping),
        b=_fixed(np.array(b) * VOLUME),
        c=_fixed(np.array([records[f]["c"] for f in fluids]) * CUBE_ROOT_VOLUME),
        exponents=_fixed(np.array(data["exponents"])),
        reference_temperature=float(data["T0"]),
        closing=float(data["lambda"]),
        sources=tuple(str(records[f]["source"]) for f in fluids),
        t_min=T_MIN,
        t_max=T_MAX,
    )


def fluids() -> tuple[str, ...]:
    """Names of all fluids of the data file."""
    return tuple(str(f["name"]) for f in _data()["fluid"])


def nearest_fuel(molar_mass: float, atoms: dict[str, float]) -> str:
    """Fluid that stands for a fuel vapour without data of its own.

    Without carbon: ammonia if it has nitrogen, else hydrogen. With carbon: the fuel fluid of the
    smallest |ln(ratio of molar masses)| + |difference of oxygen atoms per carbon atom|; the first of
    the file if two are equal (ethanol before dimethyl ether: name the fluid for the latter).
    """
    carbon = atoms.get("C", 0.0)
    if carbon <= 0.0:
        return "NH3" if atoms.get("N", 0.0) > 0.0 else "H2"

    def distance(record: dict[str, Any]) -> float:
        own: dict[str, float] = record["atoms"]
        oxygen = abs(atoms.get("O", 0.0) / carbon - own.get("O", 0.0) / own["C"])
        return abs(math.log(molar_mass / float(record["molar_mass"]))) + oxygen

    candidates = [f for f in _data()["fluid"] if f["fuel"] or f["name"] == "CH4"]
    return str(min(candidates, key=distance)["name"])


def _shares(
    table: SpeciesTable, i: int, fuel_fluid: str | None, data: dict[str, Any], records: dict[str, Any]
) -> dict[str, float]:
    name = table.names[i]
    mass = float(table.molar_mass[i])
    if name in (FUEL, UNBURNED):
        if fuel_fluid is not None and fuel_fluid not in records:
            raise DataError(f"no virial coefficients for {fuel_fluid!r}; known fluids: {', '.join(records)}")
        atoms = {e: float(a) for e, a in zip(table.elements, table.atoms[i], strict=True)}
        return {fuel_fluid or nearest_fuel(mass, atoms): 1.0}
    if name in records:
        return {name: 1.0}
    if name in data["mapping"]:
        halves = str(data["mapping"][name]).split()
        return {half: 1.0 / len(halves) for half in halves}
    return {min((f for f in records if not records[f]["fuel"]), key=lambda f: abs(records[f]["molar_mass"] - mass)): 1.0}


@lru_cache(maxsize=1)
def _data() -> dict[str, Any]:
    path = resources.folder("mechanisms/virial") / "virial.toml"
    with path.open("rb") as stream:
        data = tomllib.load(stream)
    if data.get("format") != 1:
        raise DataError(f"{path}: unknown format {data.get('format')!r}, expected 1")
    return data


def _fixed(array: Array) -> Array:
    array.setflags(write=False)
    return array
