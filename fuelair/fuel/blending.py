"""Blends of recorded and own fuels, by mass, volume or mole."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from fuelair.errors import InputError, Problem
from fuelair.fuel import mixture
from fuelair.fuel.mixture import Part
from fuelair.fuel.model import Fuel, Value
from fuelair.fuel.records import load, with_derived

BASES = ("mass", "volume")
SUM_TOLERANCE = 1e-3


def blend(components: Sequence[tuple[str | Fuel, float]], basis: str = "mass") -> Fuel:
    """Return the blend of fuels.

    Parameters
    ----------
    components : (name of a recorded fuel, or a Fuel, and its fraction [-]); fractions sum to 1 within 0.001 and
        are then normalised. Nitrogen and carbon dioxide by name (``nitrogen``, ``carbon-dioxide``) dilute gases.
    basis : ``"mass"``, or ``"volume"``: of the liquids at 288.15 K, or, if every component is a gas, mole
        fractions (ideal gases at one temperature and pressure). Propane, butane, DME and ammonia have liquid data:
        together they blend as liquids, beside a gas as gases.

    Returns
    -------
    Fuel of kind ``blend``. Mass, atoms and heating value add exactly; liquid volumes are taken as additive, the
    vapour pressure by Raoult's law. Liquid and gas blended by mass count as gas (a warning says so).

    Raises
    ------
    InputError : every problem at once (unknown name, fraction, sum, basis, liquid with gas by volume).
    """
    problems: list[Problem] = []
    parts: list[Part] = []
    for index, (given, share) in enumerate(components):
        key = f"fuel.blend[{index}]"
        part = _part(given, key, problems)
        if part is not None:
            parts.append(part)
        if not _is_fraction(share):
            problems.append(Problem("fraction outside its range", f"{key}.{basis}_fraction", share, "above 0, up to 1"))
    _check(components, basis, problems)
    if problems:
        raise InputError(*problems)
    total = sum(share for _, share in components)
    shares = [(part, share / total) for part, (_, share) in zip(parts, components, strict=True)]
    fuel = _mix(shares, basis)
    records = tuple((f"{basis}_fraction_{part.vapour.name}", Value(share, "-", "Given", "given")) for part, share in shares)
    title = " + ".join(f"{100.0 * share:.4g} % {part.vapour.name}" for part, share in shares) + f" by {basis}"
    names = ", ".join(part.vapour.name for part, _ in shares)
    fuel = replace(fuel, kind="blend", title=title, records=records)
    return with_derived(fuel, f"Mixture rules over the records of {names}")


def _is_fraction(share: object) -> bool:
    return isinstance(share, (int, float)) and not isinstance(share, bool) and 0.0 < share <= 1.0


def _part(given: str | Fuel, key: str, problems: list[Problem]) -> Part | None:
    if isinstance(given, Fuel):
        return Part.of(given)
    if given in mixture.INERT:
        return mixture.INERT[given]
    try:
        return Part.of(load(given))
    except InputError as error:
        problems.extend(replace(p, key=f"{key}.name") for p in error.problems)
        return None


def _check(components: Sequence[tuple[str | Fuel, float]], basis: str, problems: list[Problem]) -> None:
    if basis not in BASES:
        problems.append(Problem("no such basis", "fuel.blend", basis, ", ".join(BASES)))
    if not components:
        problems.append(Problem("a blend needs at least one component", "fuel.blend"))
        return
    names = [given.name if isinstance(given, Fuel) else given for given, _ in components]
    for name in sorted({n for n in names if names.count(n) > 1}):
        problems.append(Problem("component named twice", "fuel.blend", name, hint="add its fractions up"))
    if all(name in mixture.INERT for name in names):
        problems.append(Problem("nothing in it burns", "fuel.blend", ", ".join(map(str, names))))
    if not all(_is_fraction(share) for _, share in components):
        return
    total = sum(share for _, share in components)
    if abs(total - 1.0) > SUM_TOLERANCE:
        allowed = f"1 within {SUM_TOLERANCE}"
        problems.append(Problem("fractions do not sum to one", "fuel.blend", total, allowed))


def _mix(shares: list[tuple[Part, float]], basis: str) -> Fuel:
    liquid = [part.fuel is not None and part.fuel.latent_heat is not None for part, _ in shares]
    if all(liquid):
        return mixture.liquid_blend(shares, by_mass=basis == "mass")
    gaslike = [not is_liquid or _goes_as_gas(part) for (part, _), is_liquid in zip(shares, liquid, strict=True)]
    if basis == "volume":
        if all(gaslike):
            return mixture.gas_mixture(shares)
        names = ", ".join(part.vapour.name for part, _ in shares)
        hint = "give mass fractions"
        raise InputError(Problem("liquid and gas cannot be blended by volume", "fuel.blend", names, "", hint))
    vapour = mixture.mix_vapour([part for part, _ in shares], [w for _, w in shares], "blend")
    warnings = [w for part, _ in shares if part.fuel for w in part.fuel.warnings]
    if not all(gaslike):
        warnings.append("Liquid and gas blended: all of it counts as vapour, with the heating values of the vapours.")
    return Fuel(name="blend", title="blend", kind="blend", vapour=vapour, warnings=tuple(dict.fromkeys(warnings)))


def _goes_as_gas(part: Part) -> bool:
    """True if the component is a gas at 298.15 K and 101 325 Pa."""
    return part.fuel is None or part.fuel.phase(298.15, 101325.0) == "gas"
