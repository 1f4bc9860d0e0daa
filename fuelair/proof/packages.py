"""Figures that packages carry: JANAF tables, chemicals' data files, CoolProp. Imported only when asked."""

from __future__ import annotations

from functools import lru_cache

from fuelair.proof.registry import lookup

JANAF_FILES = {
    "CO2": "C-095",
    "CO": "C-093",
    "H2O": "H-064",
    "H2": "H-050",
    "H": "H-001",
    "O": "O-001",
    "O2": "O-029",
    "N": "N-002",
    "N2": "N-023",
    "OH": "H-038",
    "NO": "N-005",
    "CH4": "C-067",
    "NH3": "H-083",
}
"""Species -> table of the NIST-JANAF collection (4th edition, 1998)."""


@lru_cache(maxsize=32)
def _janaf(species: str) -> dict[str, list[float]]:
    import janaf

    frame = janaf.Table(JANAF_FILES[species]).df
    return {name: list(frame[name]) for name in frame.columns if name != "Note"}


def janaf_value(species: str, column: str, T: float) -> float:
    """A printed figure of a species' JANAF table at one of its temperatures; LookupError if it has none there."""
    table = _janaf(species)
    if T not in table["T(K)"]:
        raise LookupError(f"JANAF table of {species} has no row at {T} K")
    return float(table[column][table["T(K)"].index(T)])


def janaf_neighbours(species: str, T: float) -> tuple[float, float]:
    """The printed temperatures at or around ``T`` [K]."""
    printed = _janaf(species)["T(K)"]
    return max(t for t in printed if t <= T), min(t for t in printed if t >= T)


def formation_enthalpy(cas: str, method: str, phase: str) -> float:
    """Enthalpy of formation [J/mol] of a compound from the data files of the package chemicals."""
    import chemicals

    value = {"gas": chemicals.Hfg, "liquid": chemicals.Hfl}[phase](cas, method=method)
    if value is None:
        raise LookupError(f"{method} has no {phase} enthalpy of formation for {cas}")
    return float(value)


@lookup("coolprop-water-saturation")
def water_saturation(*, T: float) -> float:
    """Saturation pressure of water [Pa], IAPWS-95 as CoolProp has it."""
    from CoolProp.CoolProp import PropsSI

    return float(PropsSI("P", "T", T, "Q", 0.0, "HEOS::Water"))
