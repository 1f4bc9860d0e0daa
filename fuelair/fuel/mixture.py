"""Mixture rules: mass, atoms and energy add up exactly; liquid volumes are additive, entropies get the mixing term."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from fuelair.fuel import formula
from fuelair.fuel.model import REFERENCE_TEMPERATURE, Fuel, Vapour
from fuelair.fuel.saturation import GAS_CONSTANT, ideal_solution

BLEND_TEMPERATURE = 288.15
"""K, at which liquid volumes are counted (the trade's 15 degrees Celsius)."""

INERT_STANDARD_ENTROPY = {"nitrogen": 191.609e3, "carbon-dioxide": 213.795e3}
"""J/(kmol K) at 298.15 K, 1 bar; NIST-JANAF 4th ed. (Chase 1998), package janaf 1.4.0, tables N-023 and C-095."""


@dataclass(frozen=True, slots=True)
class Part:
    """A component: its vapour and, unless it is an inert gas, its fuel."""

    vapour: Vapour
    fuel: Fuel | None = None

    @classmethod
    def of(cls, fuel: Fuel) -> Part:
        """Wrap a fuel."""
        return cls(fuel.vapour, fuel)


def _inert(name: str, text: str, species: str) -> Part:
    atoms = formula.parse(text)
    entropy = INERT_STANDARD_ENTROPY[name]
    return Part(Vapour(name, atoms, formula.molar_mass(atoms), 0.0, ((species, 1.0),), entropy))


INERT = {
    "nitrogen": _inert("nitrogen", "N2", "N2"),
    "carbon-dioxide": _inert("carbon-dioxide", "CO2", "CO2"),
}

Shares = Sequence[tuple[Part, float]]


def density_at(fuel: Fuel, temperature: float = BLEND_TEMPERATURE) -> float:
    """Return the liquid density [kg/m3] at ``temperature`` [K]; the volume is linear in temperature.

    ``expansivity`` counts on the volume at 298.15 K.
    """
    if fuel.density is None or fuel.density_temperature is None:
        raise ValueError(f"{fuel.name} has no liquid density")
    beta = fuel.expansivity or 0.0
    recorded = 1.0 + beta * (fuel.density_temperature - REFERENCE_TEMPERATURE)
    return fuel.density * recorded / (1.0 + beta * (temperature - REFERENCE_TEMPERATURE))


def mass_from_mole(shares: Shares) -> list[float]:
    """Turn mole fractions into mass fractions."""
    total = sum(x * part.vapour.molar_mass for part, x in shares)
    return [x * part.vapour.molar_mass / total for part, x in shares]


def mass_from_volume(shares: Shares) -> list[float]:
    """Turn volume fractions of the liquids at 288.15 K into mass fractions."""
    masses = [f * density_at(part.fuel) if part.fuel else math.nan for part, f in shares]
    return [m / sum(masses) for m in masses]


def mix_vapour(parts: Sequence[Part], mass_fractions: Sequence[float], name: str) -> Vapour:
    """Return the vapour of the mixture."""
    kilomoles = [w / part.vapour.molar_mass for part, w in zip(parts, mass_fractions, strict=True)]
    total = sum(kilomoles)
    moles = [n / total for n in kilomoles]
    atoms: dict[str, float] = {}
    shape: dict[str, float] = {}
    for part, x in zip(parts, moles, strict=True):
        for element, n in part.vapour.atoms:
            atoms[element] = atoms.get(element, 0.0) + x * n
        for species, n in part.vapour.shape:
            shape[species] = shape.get(species, 0.0) + x * n
    entropies = [part.vapour.entropy for part in parts]
    entropy = None
    if all(s is not None for s in entropies):
        entropy = sum(
            x * (s or 0.0) - GAS_CONSTANT * (x * math.log(x) if x > 0.0 else 0.0) for x, s in zip(moles, entropies, strict=True)
        )
    lower = sum(w * part.vapour.lower_heating_value for part, w in zip(parts, mass_fractions, strict=True))
    made = formula.ordered(atoms)
    return Vapour(name, made, formula.molar_mass(made), lower, tuple(shape.items()), entropy)


def gas_mixture(shares: Shares, name: str = "blend") -> Fuel:
    """Return the mixture of gases given by mole fractions; never liquid here."""
    vapour = mix_vapour([part for part, _ in shares], mass_from_mole(shares), name)
    warnings = tuple(dict.fromkeys(w for part, _ in shares if part.fuel for w in part.fuel.warnings))
    return Fuel(name=name, title=name, kind="gas-mixture", vapour=vapour, warnings=warnings)


def liquid_blend(shares: Shares, name: str = "blend", *, by_mass: bool = False) -> Fuel:
    """Return the blend of liquids given by volume fractions at 288.15 K, or by mass fractions."""
    parts = [part for part, _ in shares]
    mass = [w for _, w in shares] if by_mass else mass_from_volume(shares)
    return liquid_from_mass([part.fuel for part in parts if part.fuel], mass, mix_vapour(parts, mass, name), name)


def liquid_from_mass(fuels: Sequence[Fuel], mass: Sequence[float], vapour: Vapour, name: str) -> Fuel:
    """Add the liquid's properties to a mixture's vapour: mass means, additive volumes, Raoult's law."""

    def mean(values: Sequence[float | None]) -> float | None:
        return None if None in values else sum(w * (v or 0.0) for w, v in zip(mass, values, strict=True))

    volumes = [w / density_at(fuel) for w, fuel in zip(mass, fuels, strict=True)]
    reference = [w / density_at(fuel, REFERENCE_TEMPERATURE) for w, fuel in zip(mass, fuels, strict=True)]
    expansivity = sum(v * (fuel.expansivity or 0.0) for v, fuel in zip(reference, fuels, strict=True)) / sum(reference)
    parts = tuple((w / fuel.molar_mass * vapour.molar_mass, fuel.saturation) for w, fuel in zip(mass, fuels, strict=True))
    known = tuple((x, s) for x, s in parts if s is not None)
    return Fuel(
        name=name,
        title=name,
        kind="blend",
        vapour=vapour,
        latent_heat=mean([fuel.latent_heat for fuel in fuels]),
        density=1.0 / sum(volumes),
        density_temperature=BLEND_TEMPERATURE,
        liquid_cp=mean([fuel.liquid_cp for fuel in fuels]),
        expansivity=expansivity,
        saturation=ideal_solution(known) if len(known) == len(parts) else None,
        pressure_terms=_pressure_terms(fuels, mass),
        always_liquid=any(fuel.always_liquid for fuel in fuels),
        warnings=tuple(dict.fromkeys(w for fuel in fuels for w in fuel.warnings)),
    )


def _pressure_terms(fuels: Sequence[Fuel], mass: Sequence[float]) -> tuple[float, float] | None:
    """Mass means of the pressure terms if any component carries them."""
    if all(fuel.pressure_terms is None for fuel in fuels):
        return None
    linear = bend = 0.0
    for w, fuel in zip(mass, fuels, strict=True):
        volume = fuel.liquid_volume or 0.0
        a, b = fuel.pressure_terms or (volume * (1.0 - (fuel.expansivity or 0.0) * REFERENCE_TEMPERATURE), 0.0)
        linear, bend = linear + w * a, bend + w * b
    return linear, bend
