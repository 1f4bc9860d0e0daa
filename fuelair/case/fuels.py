"""Makes the fuel that a case names, blends or describes."""

from __future__ import annotations

from collections.abc import Sequence

from fuelair import fuel
from fuelair.case.schema import BlendPart, FuelSection, OwnFuel

_ELEMENTS = ("carbon", "hydrogen", "oxygen", "nitrogen", "sulfur")


def record(section: FuelSection) -> fuel.Fuel:
    """Return the fuel of a checked ``[fuel]`` section.

    Raises
    ------
    InputError : unknown name, or figures that cannot be a fuel.
    """
    if section.blend is not None:
        return blend(section.blend)
    if section.own is not None:
        return own(section.own)
    return fuel.load(section.name or "")


def blend(parts: Sequence[BlendPart]) -> fuel.Fuel:
    """Return a blend; the parts carry either all mass or all volume fractions."""
    by_mass = all(part.mass_fraction is not None for part in parts)
    shares = [(part.mass_fraction if by_mass else part.volume_fraction) or 0.0 for part in parts]
    names = [part.name for part in parts]
    return fuel.blend(list(zip(names, shares, strict=True)), "mass" if by_mass else "volume")


def own(given: OwnFuel) -> fuel.Fuel:
    """Return a fuel from the user's own figures."""
    fractions = {name: share for name in _ELEMENTS if (share := getattr(given, name)) is not None}
    return fuel.own(
        formula=given.formula,
        mass_fractions=fractions or None,
        lower_heating_value=given.lower_heating_value,
        phase=given.phase,
        density=given.density,
        molar_mass=given.molar_mass,
        latent_heat=given.latent_heat,
        liquid_cp=given.liquid_cp,
        expansivity=given.expansivity,
    )
