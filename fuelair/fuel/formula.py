"""Elements, formulas and the stoichiometry that follows from them."""

from __future__ import annotations

import re
from collections.abc import Mapping

ELEMENTS = ("C", "H", "O", "N", "S")
ELEMENT_NAMES = {"C": "carbon", "H": "hydrogen", "O": "oxygen", "N": "nitrogen", "S": "sulfur"}

ATOMIC_WEIGHT = {"C": 12.011, "H": 1.008, "O": 15.999, "N": 14.007, "S": 32.06}
"""kg/kmol, IUPAC abridged standard atomic weights; the gas data of Cantera 3.2.0 carry the same, so mass closes."""

OXYGEN_MOLAR_MASS = 2.0 * ATOMIC_WEIGHT["O"]

FORMATION_CARBON_DIOXIDE = -393.51e6
FORMATION_WATER_VAPOUR = -241.826e6
FORMATION_WATER_LIQUID = -285.830e6
"""J/kmol at 298.15 K: CRC Handbook (chemicals 1.5.2) to its digits; water vapour as NIST-JANAF prints it."""

_TOKEN = re.compile(r"([A-Z][a-z]?)(\d+(?:\.\d*)?|\.\d+)?")

Atoms = tuple[tuple[str, float], ...]


def ordered(atoms: Mapping[str, float]) -> Atoms:
    """Return the nonzero atoms in the order C H O N S."""
    return tuple((e, float(atoms[e])) for e in ELEMENTS if atoms.get(e, 0.0) != 0.0)


def parse(formula: str) -> Atoms:
    """Read a formula such as ``C12H26`` or ``C7.5H13.4O0.1`` (atoms per molecule, decimals allowed).

    Raises
    ------
    ValueError : not a formula of C, H, O, N and S; the message says where it stops making sense.
    """
    text = "".join(formula.split())
    atoms: dict[str, float] = {}
    place = 0
    while place < len(text):
        token = _TOKEN.match(text, place)
        if token is None:
            raise ValueError(f"cannot read {text[place:]!r}")
        element, count = token.group(1), token.group(2)
        if element not in ELEMENTS:
            raise ValueError(f"element {element!r} is none of {' '.join(ELEMENTS)}")
        atoms[element] = atoms.get(element, 0.0) + (float(count) if count else 1.0)
        place = token.end()
    result = ordered(atoms)
    if not result:
        raise ValueError("it names no atoms")
    return result


def molar_mass(atoms: Atoms) -> float:
    """Return the molar mass [kg/kmol] of the atoms."""
    return sum(n * ATOMIC_WEIGHT[e] for e, n in atoms)


def from_mass_fractions(fractions: Mapping[str, float], mass: float) -> Atoms:
    """Return atoms per molecule of molar mass ``mass`` [kg/kmol] from element mass fractions [kg/kg]."""
    return ordered({e: w * mass / ATOMIC_WEIGHT[e] for e, w in fractions.items()})


def mass_fractions(atoms: Atoms) -> dict[str, float]:
    """Return the element mass fractions [kg/kg] of the atoms."""
    mass = molar_mass(atoms)
    return {e: n * ATOMIC_WEIGHT[e] / mass for e, n in atoms}


def oxygen_per_molecule(atoms: Atoms) -> float:
    """Return kmol O2 per kmol of fuel for CO2, H2O, SO2 and N2."""
    n = dict(atoms)
    return n.get("C", 0.0) + n.get("H", 0.0) / 4.0 + n.get("S", 0.0) - n.get("O", 0.0) / 2.0


def heat_of_combustion(atoms: Atoms, formation: float, *, water: float = FORMATION_WATER_VAPOUR) -> float:
    """Return the heat [J/kmol] that one kmol frees at 298.15 K, from its enthalpy of formation [J/kmol].

    Only for fuels without sulfur: the records of pure substances carry none.
    """
    n = dict(atoms)
    if n.get("S", 0.0):
        raise ValueError("heat of combustion from formation enthalpies is not offered for fuels with sulfur")
    return formation - n.get("C", 0.0) * FORMATION_CARBON_DIOXIDE - n.get("H", 0.0) / 2.0 * water


def water_heat(atoms: Atoms) -> float:
    """Return the heat [J/kg fuel] that its combustion water frees on condensing at 298.15 K."""
    hydrogen = dict(atoms).get("H", 0.0)
    return hydrogen / 2.0 * (FORMATION_WATER_VAPOUR - FORMATION_WATER_LIQUID) / molar_mass(atoms)


def boie(atoms: Atoms) -> float:
    """Return the lower heating value [J/kg] that the element mass fractions suggest.

    ``34.8 C + 93.9 H + 10.5 S + 6.3 N - 10.8 O`` MJ/kg (Boie 1953, from memory). Against the records it is
    within 3 %, but for DME (6 % low: ethers burn hotter than alcohols of the same analysis). It only serves to
    question a user's figure. No claim without carbon.
    """
    w = mass_fractions(atoms)
    weights = {"C": 34.8, "H": 93.9, "S": 10.5, "N": 6.3, "O": -10.8}
    return 1e6 * sum(weights[e] * w.get(e, 0.0) for e in ELEMENTS)
