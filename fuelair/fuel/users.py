"""A fuel of the user's own, from a formula or an element analysis and a heating value."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

from fuelair.errors import InputError, Problem
from fuelair.fuel import formula, surrogates
from fuelair.fuel.formula import Atoms
from fuelair.fuel.model import Fuel, Value, Vapour
from fuelair.fuel.records import with_derived

SUM_TOLERANCE = 1e-3
BOIE_LIMIT = 0.10

RANGES: dict[str, tuple[float, float, str]] = {
    "lower_heating_value": (1e6, 150e6, "J/kg"),  # said in MJ/kg in messages
    "density": (400.0, 1300.0, "kg/m3"),
    "molar_mass": (1.5, 1500.0, "kg/kmol"),
    "latent_heat": (50e3, 2e6, "J/kg"),
    "liquid_cp": (1000.0, 6000.0, "J/(kg K)"),
    "expansivity": (0.0, 5e-3, "1/K"),
}
"""Allowed range of each number, SI."""

LIGHTEST_LIQUID = 30.0
"""kg/kmol: a liquid fuel lighter than this (methanol has 32) is taken for a formula per carbon atom."""

DEFAULT_LATENT_HEAT = 355e3
DEFAULT_LIQUID_CP = 2000.0
DEFAULT_LIQUID_MOLAR_MASS = 200.0
DEFAULT_GAS_MOLAR_MASS = 30.0
"""Common practice for what a data sheet leaves out (hydrocarbons near 298 K); the warnings say which were used."""


@dataclass(slots=True)
class _Draft:
    """What is gathered while checking."""

    problems: list[Problem] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)
    records: dict[str, Value] = field(default_factory=dict)

    def bad(self, message: str, key: str, value: object = None, allowed: str = "", hint: str = "") -> None:
        self.problems.append(Problem(message, f"fuel.own.{key}", value, allowed, hint))

    def assumed(self, key: str, number: float, unit: str, why: str) -> float:
        self.records[key] = Value(number, unit, why, "common practice")
        self.warnings.append(f"{key.replace('_', ' ')} not given: {number:.4g} {unit} assumed.")
        return number


def own(
    *,
    formula: str | None = None,
    mass_fractions: Mapping[str, float] | None = None,
    lower_heating_value: float,
    phase: str | None = None,
    density: float | None = None,
    molar_mass: float | None = None,
    latent_heat: float | None = None,
    liquid_cp: float | None = None,
    expansivity: float | None = None,
    shape: str | None = None,
    name: str = "own",
) -> Fuel:
    """Return a fuel from the user's figures.

    Parameters
    ----------
    formula : e.g. ``"C12H26"``; per-carbon formulas such as ``"CH1.9"`` scale to ``molar_mass`` if that is given.
    mass_fractions : instead of a formula: element symbol or name to kg/kg; sum 1 within 0.001, then normalised.
    lower_heating_value : J/kg at 298.15 K, 1e6 to 150e6: of the liquid if ``phase`` is ``"liquid"`` or a density is
        given, else of the vapour.
    phase : ``"liquid"`` or ``"vapour"``; default liquid if a density is given.
    density : kg/m3 of the liquid at 288.15 K, 400 to 1300; required for a liquid.
    molar_mass : kg/kmol, 1.5 to 1500; default from the formula, else an assumption with a warning.
    latent_heat : J/kg at 298.15 K, 50e3 to 2e6.
    liquid_cp : J/(kg K), 1000 to 6000.
    expansivity : 1/K, 0 to 5e-3.
    shape : family of the vapour's cp, one of ``surrogates.FAMILIES``; default chosen from the composition.
    name : name of the fuel.

    Raises
    ------
    InputError : every problem at once.
    """
    draft = _Draft()
    numbers = {
        "lower_heating_value": lower_heating_value,
        "density": density,
        "molar_mass": molar_mass,
        "latent_heat": latent_heat,
        "liquid_cp": liquid_cp,
        "expansivity": expansivity,
    }
    for key, number in numbers.items():
        _in_range(draft, key, number)
    liquid = _is_liquid(draft, phase, density, (latent_heat, liquid_cp, expansivity))
    atoms = _atoms(draft, formula, mass_fractions, molar_mass, liquid)
    if shape is not None and shape not in surrogates.FAMILIES:
        draft.bad("no such family", "shape", shape, ", ".join(surrogates.FAMILIES))
    if atoms:
        _check_burns(draft, atoms)
    if draft.problems:
        raise InputError(*draft.problems)
    return _assemble(draft, name, atoms, lower_heating_value, liquid, numbers, shape)


def _in_range(draft: _Draft, key: str, number: float | None) -> None:
    low, high, unit = RANGES[key]
    if number is None and key != "lower_heating_value":
        return
    allowed = f"{low:g} to {high:g} {unit}" if high < 1e8 else f"{low / 1e6:g} to {high / 1e6:g} MJ/kg (in {unit})"
    if isinstance(number, bool) or not isinstance(number, (int, float)) or not math.isfinite(number):
        draft.bad("is not a finite number", key, number, allowed)
    elif not low <= number <= high:
        draft.bad("outside its range", key, number, allowed)
    else:
        draft.records[key] = Value(float(number), unit, "Given by the user", "given")


def _is_liquid(draft: _Draft, phase: str | None, density: float | None, rest: tuple[float | None, ...]) -> bool:
    if phase not in (None, "liquid", "vapour"):
        draft.bad("no such phase", "phase", phase, "liquid, vapour")
    liquid = phase == "liquid" or (phase is None and density is not None)
    if liquid and density is None:
        draft.bad("a liquid fuel needs its density", "density", None, "400 to 1300 kg/m3", "at 288.15 K")
    if not liquid and any(number is not None for number in (density, *rest)):
        draft.bad("liquid properties given for a gas", "phase", phase, "liquid, vapour", "set phase to liquid")
    return liquid


def _atoms(draft: _Draft, text: str | None, fractions: Mapping[str, float] | None, mass: float | None, liquid: bool) -> Atoms:
    if (text is None) == (fractions is None):
        allowed = "exactly one of the two"
        draft.bad("formula or mass fractions", "formula", text, allowed, "C12H26, or C = 0.85, H = 0.15")
        return ()
    usable = mass if "molar_mass" in draft.records else None
    if text is not None:
        try:
            atoms = formula.parse(text)
        except ValueError as error:
            draft.bad(f"not a formula: {error}", "formula", text, "C H O N S with counts", "C12H26, C7.5H13.4O0.1")
            return ()
        if usable is None and liquid and formula.molar_mass(atoms) < LIGHTEST_LIQUID:
            draft.warnings.append("The formula reads as one per carbon atom: give molar_mass for the fuel as vapour.")
        scale = usable / formula.molar_mass(atoms) if usable is not None else 1.0
        return tuple((element, n * scale) for element, n in atoms)
    clean = _fractions(draft, fractions or {})
    if not clean:
        return ()
    if usable is None and mass is None:
        guess = DEFAULT_LIQUID_MOLAR_MASS if liquid else DEFAULT_GAS_MOLAR_MASS
        usable = draft.assumed("molar_mass", guess, "kg/kmol", "Assumed; it matters only for the fuel as vapour")
    return formula.from_mass_fractions(clean, usable if usable is not None else DEFAULT_LIQUID_MOLAR_MASS)


def _fractions(draft: _Draft, given: Mapping[str, float]) -> dict[str, float]:
    symbols = {**{e: e for e in formula.ELEMENTS}, **{name: e for e, name in formula.ELEMENT_NAMES.items()}}
    clean: dict[str, float] = {}
    before = len(draft.problems)
    for key, number in given.items():
        if key not in symbols:
            draft.bad("no such element", f"mass_fractions.{key}", number, ", ".join(formula.ELEMENTS))
        elif not isinstance(number, (int, float)) or not 0.0 <= number <= 1.0:
            draft.bad("outside its range", f"mass_fractions.{key}", number, "0 to 1 kg/kg")
        else:
            clean[symbols[key]] = clean.get(symbols[key], 0.0) + float(number)
    if len(draft.problems) > before:
        return {}
    total = sum(clean.values())
    if abs(total - 1.0) > SUM_TOLERANCE:
        draft.bad("do not sum to one", "mass_fractions", round(total, 6), f"1 within {SUM_TOLERANCE} kg/kg")
        return {}
    for element, w in clean.items():
        item = Value(w / total, "kg/kg", "Given by the user", "given")
        draft.records[f"mass_fraction_{formula.ELEMENT_NAMES[element]}"] = item
    return {element: w / total for element, w in clean.items()}


def _check_burns(draft: _Draft, atoms: Atoms) -> None:
    counts = dict(atoms)
    if formula.oxygen_per_molecule(atoms) <= 0.0:
        allowed = "oxygen demand above 0"
        draft.bad("it needs no air: more oxygen than its carbon, hydrogen and sulfur bind", "formula", None, allowed)
    if not counts.get("C", 0.0) and not counts.get("H", 0.0):
        draft.bad("neither carbon nor hydrogen", "formula", None, "C or H above 0")


def _assemble(
    draft: _Draft,
    name: str,
    atoms: Atoms,
    lower: float,
    liquid: bool,
    given: Mapping[str, float | None],
    family: str | None,
) -> Fuel:
    mass = formula.molar_mass(atoms)
    latent = cp = beta = None
    if liquid:
        why = "Assumed: hydrocarbon liquid"
        latent = given["latent_heat"] or draft.assumed("latent_heat", DEFAULT_LATENT_HEAT, "J/kg", why)
        cp = given["liquid_cp"] or draft.assumed("liquid_cp", DEFAULT_LIQUID_CP, "J/(kg K)", why)
        beta = given["expansivity"]
        if beta is None:
            rho = given["density"] or 0.0
            why = "Density class of the petroleum measurement tables (ASTM D1250), constants from memory"
            beta = draft.assumed("expansivity", (186.9696 + 0.4862 * rho) / rho**2, "1/K", why)
    suggestion = formula.boie(atoms)
    if dict(atoms).get("C", 0.0) and abs(lower / suggestion - 1.0) > BOIE_LIMIT:
        draft.warnings.append(
            f"Lower heating value {lower / 1e6:.4g} MJ/kg, but the composition suggests {suggestion / 1e6:.4g} MJ/kg "
            "(Boie's formula): check units, basis and analysis."
        )
    chosen = family or surrogates.family_of(atoms)
    vapour = Vapour(name, atoms, mass, lower + (latent or 0.0), surrogates.shape(chosen, atoms), None)
    records = dict(draft.records)
    heat = records.pop("lower_heating_value")
    records["lower_heating_value_liquid" if liquid else "lower_heating_value_vapour"] = Value(
        heat.value / 1e6, "MJ/kg", heat.source, heat.standing
    )
    fuel = Fuel(
        name=name,
        title=f"Own fuel {name!r}, vapour cp as {chosen}",
        kind="own",
        vapour=vapour,
        latent_heat=latent,
        density=given["density"] if liquid else None,
        density_temperature=288.15 if liquid else None,
        liquid_cp=cp,
        expansivity=beta,
        always_liquid=liquid,
        warnings=tuple(draft.warnings),
        records=tuple(records.items()),
    )
    return with_derived(fuel, "From the user's figures")
