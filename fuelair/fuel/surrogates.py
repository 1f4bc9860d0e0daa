"""Shapes of vapour cp for fuels that are no single species: families by mass, scaled to the fuel's molar mass."""

from __future__ import annotations

from fuelair.fuel.formula import ATOMIC_WEIGHT, Atoms, mass_fractions, molar_mass, parse

SPECIES = {
    "H2": "H2",
    "CH4": "CH4",
    "C3H8": "C3H8",
    "NH3": "NH3",
    "CH3OH": "CH4O",
    "C2H5OH": "C2H6O",
    "CH3COOH": "C2H4O2",
    "C7H8": "C7H8",
    "C6H12,cyclo-": "C6H12",
    "C10H8,naphthale": "C10H8",
    "C7H16,n-heptane": "C7H16",
    "C8H18,n-octane": "C8H18",
    "C8H18,isooctane": "C8H18",
    "C8H16,1-octene": "C8H16",
}
"""Species of Cantera's bundled nasa_gas.yaml, all valid 200 to 6000 K, with their formulas."""

HEXADECANE = {"C8H18,n-octane": 9.0, "C7H16,n-heptane": -8.0}
"""n-Hexadecane by the CH2 increment, molecules per molecule."""

_HEX = "n-hexadecane"

FAMILIES: dict[str, dict[str, float]] = {
    "hydrogen": {"H2": 1.0},
    "methane": {"CH4": 1.0},
    "light-gas": {"C3H8": 1.0},
    "paraffinic": {_HEX: 1.0},
    "diesel": {_HEX: 0.62, "C6H12,cyclo-": 0.13, "C7H8": 0.25},
    "residual": {_HEX: 0.33, "C6H12,cyclo-": 0.15, "C7H8": 0.30, "C10H8,naphthale": 0.22},
    "gasoline": {"C8H18,isooctane": 0.45, "C7H16,n-heptane": 0.22, "C7H8": 0.33},
    "aromatic": {"C7H8": 1.0},
    "ester": {_HEX: 0.80, "CH3COOH": 0.20},
    "methanol": {"CH3OH": 1.0},
    "ethanol": {"C2H5OH": 1.0},
    "ammonia": {"NH3": 1.0},
}
"""Family to mass fractions of its members."""


def species_mass(species: str) -> float:
    """Return the molar mass [kg/kmol] of a shape species."""
    return molar_mass(parse(SPECIES[species]))


def shape_mass(weights: tuple[tuple[str, float], ...]) -> float:
    """Return the mass [kg/kmol] of a weighted sum of shape species."""
    return sum(n * species_mass(species) for species, n in weights)


def shape(family: str, atoms: Atoms) -> tuple[tuple[str, float], ...]:
    """Return molecules of each shape species per fuel molecule, their mass equal to the fuel's.

    ``paraffinic`` alkanes (H = 2 C + 2 within 0.5) match their atoms exactly by the CH2 increment.
    """
    counts, mass = dict(atoms), molar_mass(atoms)
    carbon, hydrogen = counts.get("C", 0.0), counts.get("H", 0.0)
    if family == "paraffinic" and set(counts) == {"C", "H"} and abs(hydrogen - 2.0 * carbon - 2.0) < 0.5:
        chains = hydrogen / 2.0 - carbon
        octane = carbon - 7.0 * chains
        return tuple((s, n) for s, n in (("C8H18,n-octane", octane), ("C7H16,n-heptane", chains - octane)) if n)
    weights: dict[str, float] = {}
    for member, w in FAMILIES[family].items():
        inside = HEXADECANE if member == _HEX else {member: 1.0}
        own_mass = shape_mass(tuple(inside.items()))
        for species, n in inside.items():
            weights[species] = weights.get(species, 0.0) + w * n * mass / own_mass
    return tuple(weights.items())


def family_of(atoms: Atoms) -> str:
    """Choose a family from the composition: element mass fractions and molar mass."""
    w, mass = mass_fractions(atoms), molar_mass(atoms)
    if "C" not in w:
        return "ammonia" if "N" in w else "hydrogen"
    ratio = w.get("H", 0.0) / ATOMIC_WEIGHT["H"] / (w["C"] / ATOMIC_WEIGHT["C"])
    if w.get("O", 0.0) > 0.42:
        return "methanol"
    if w.get("O", 0.0) > 0.20:
        return "ethanol"
    if w.get("O", 0.0) > 0.05:
        return "ester"
    if mass < 60.0:
        return "methane" if ratio > 3.2 else "light-gas"
    if ratio > 2.05:
        return "paraffinic"
    if ratio < 1.3:
        return "aromatic"
    if ratio < 1.6:
        return "residual"
    return "gasoline" if mass < 130.0 else "diesel"
