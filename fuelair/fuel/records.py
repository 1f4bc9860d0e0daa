"""Reads the fuel records of ``mechanisms/fuels``: one TOML a fuel, every value with unit, source and standing."""

from __future__ import annotations

import difflib
import tomllib
from collections.abc import Mapping
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any

from fuelair import resources
from fuelair.errors import DataError, InputError, Problem
from fuelair.fuel import formula
from fuelair.fuel.mixture import INERT, Part, gas_mixture, liquid_blend
from fuelair.fuel.model import STANDINGS, Fuel, Value, Vapour
from fuelair.fuel.saturation import FORMS, Saturation

FORMAT = 1

FROM_FORMATION = "From the enthalpy of formation of the vapour and that of the liquid or the latent heat"
FROM_HEATING_VALUE = "From the lower heating value of the liquid, the latent heat and the hydrogen"

PER_KG = {"J/kg": 1.0, "kJ/kg": 1e3, "MJ/kg": 1e6, "J/(kg K)": 1.0, "kJ/(kg K)": 1e3}
PER_KMOL = {"J/mol": 1e3, "kJ/mol": 1e6, "J/(mol K)": 1e3}
SYNONYMS = {
    "petrol": "gasoline",
    "e10": "gasoline-e10",
    "hvo": "renewable-diesel",
    "gtl": "renewable-diesel",
    "biodiesel": "fame",
    "rme": "fame",
    "cng": "natural-gas",
    "lng": "natural-gas",
    "mgo": "marine-distillate",
    "mdo": "marine-distillate",
    "hfo": "marine-residual",
    "jet-a": "kerosene",
    "jet-a1": "kerosene",
    "gas-oil": "diesel",
    "cetane": "n-hexadecane",
    "isooctane": "iso-octane",
    "dimethyl-ether": "dme",
    "lpg": "propane",
    "h2": "hydrogen",
    "ch4": "methane",
    "nh3": "ammonia",
}
"""Other words of the trade: only to offer the recorded name, never accepted in its place."""

PLAIN = {"kg/m3", "1/K", "K", "kg/kmol", "kg/kg", "J/(kg Pa)", "J/(kg Pa2)"}


def names() -> list[str]:
    """Return the names of all recorded fuels, sorted."""
    return list(_names())


@cache
def _names() -> tuple[str, ...]:
    return tuple(sorted(path.stem for path in _folder().glob("*.toml")))


def _folder() -> Path:
    return resources.folder("mechanisms/fuels")


@cache
def load(name: str) -> Fuel:
    """Return the recorded fuel of this name (read once, then shared: it is frozen).

    Raises
    ------
    InputError : no such fuel; the nearest names are offered.
    DataError : the record is damaged or incomplete.
    """
    if name not in names():
        raise InputError(Problem("no such fuel", "fuel.name", name, ", ".join(names()), _hint(str(name))))
    path = _folder() / f"{name}.toml"
    try:
        data = tomllib.loads(path.read_text(encoding="utf-8"))
        if data["format"] != FORMAT or data["name"] != name:
            raise ValueError(f"format {data['format']!r}, name {data['name']!r}")
        return _build(data)
    except (OSError, KeyError, TypeError, ValueError) as error:
        raise DataError(f"fuel record {path} is damaged: {type(error).__name__}: {error}") from error


def _hint(name: str) -> str:
    plain = name.strip().lower().replace("_", "-").replace(" ", "-")
    near = [SYNONYMS[plain]] if plain in SYNONYMS else difflib.get_close_matches(plain, names(), 3, 0.5)
    return "nearest: " + ", ".join(near) if near else "see the list of `fuelair fuels`"


def _build(data: Mapping[str, Any]) -> Fuel:
    kind = data["kind"]
    if kind in ("blend", "gas-mixture"):
        return _mixture(data)
    if kind not in ("pure", "commercial"):
        raise ValueError(f"unknown kind {kind!r}")
    return _substance(data)


def value(table: Mapping[str, Any]) -> Value:
    """Read one value table; unit, source and a known standing are required."""
    result = Value(float(table["value"]), table["unit"], table["source"], table["standing"], table.get("note", ""))
    if result.unit not in PER_KG and result.unit not in PER_KMOL and result.unit not in PLAIN:
        raise ValueError(f"unknown unit {result.unit!r}")
    if result.standing not in STANDINGS or not result.source:
        raise ValueError(f"standing {result.standing!r}, source {result.source!r}")
    return result


def per_kg(item: Value | None, molar_mass: float) -> float | None:
    """Return a value in SI per kilogram (molar units divided by ``molar_mass`` [kg/kmol]); None stays None."""
    if item is None:
        return None
    if item.unit in PER_KMOL:
        return item.value * PER_KMOL[item.unit] / molar_mass
    return item.value * PER_KG.get(item.unit, 1.0)


def _per_kmol(item: Value) -> float:
    return item.value * PER_KMOL[item.unit]


def _shape(data: Mapping[str, Any]) -> tuple[tuple[str, float], ...]:
    table = data["shape"]
    if table["standing"] not in STANDINGS or not table["source"]:
        raise ValueError("shape without source or standing")
    return tuple((species, float(weight)) for species, weight in table["species"].items())


def _saturation(data: Mapping[str, Any]) -> Saturation | None:
    table = data.get("saturation")
    if table is None:
        return None
    low, high = table["valid"]
    result = Saturation(
        table["form"],
        tuple(map(float, table["coefficients"])),
        (float(low), float(high)),
        (),
        table["source"],
        table["standing"],
        table.get("note", ""),
    )
    if FORMS[result.form] != len(result.coefficients) or result.standing not in STANDINGS or not result.source:
        raise ValueError("saturation is incomplete")
    return result


def _substance(data: Mapping[str, Any]) -> Fuel:
    values = {key: value(table) for key, table in data["values"].items()}
    if data["kind"] == "pure":
        atoms = formula.ordered(data["atoms"])
    else:
        fractions = {
            e: values[f"mass_fraction_{n}"].value for e, n in formula.ELEMENT_NAMES.items() if f"mass_fraction_{n}" in values
        }
        if abs(sum(fractions.values()) - 1.0) > 1e-6:
            raise ValueError("element mass fractions do not sum to one")
        atoms = formula.from_mass_fractions(fractions, values["molar_mass"].value)
    mass = formula.molar_mass(atoms)
    lower, latent = _heats(values, atoms, mass)
    entropy = values.get("entropy")
    vapour = Vapour(data["name"], atoms, mass, lower, _shape(data), _per_kmol(entropy) if entropy else None)
    slope, bend = values.get("pressure_term_linear"), values.get("pressure_term_quadratic")

    def si(key: str) -> float | None:
        return per_kg(values.get(key), mass)

    fuel = Fuel(
        name=data["name"],
        title=data["title"],
        kind=data["kind"],
        vapour=vapour,
        latent_heat=latent,
        density=si("density"),
        density_temperature=si("density_temperature"),
        liquid_cp=si("liquid_cp"),
        expansivity=si("expansivity"),
        pressure_terms=(slope.value, bend.value) if slope and bend else None,
        critical_temperature=si("critical_temperature"),
        saturation=_saturation(data),
        always_liquid=data["kind"] == "commercial",
        chemical_exergy_vapour=si("chemical_exergy_vapour"),
        chemical_exergy_liquid=si("chemical_exergy_liquid"),
        warnings=tuple(data.get("warnings", ())),
        records=tuple(values.items()),
        others=_others(data),
    )
    if latent is not None and None in (fuel.density, fuel.density_temperature, fuel.liquid_cp, fuel.expansivity):
        raise ValueError("liquid data are incomplete")
    return with_derived(fuel)


def _heats(values: Mapping[str, Value], atoms: formula.Atoms, mass: float) -> tuple[float, float | None]:
    """Return (lower heating value of the vapour, latent heat or None), J/kg."""
    latent = per_kg(values.get("latent_heat"), mass)
    if "heat_of_formation_vapour" in values:
        gas = _per_kmol(values["heat_of_formation_vapour"])
        if "heat_of_formation_liquid" in values:
            latent = (gas - _per_kmol(values["heat_of_formation_liquid"])) / mass
        return formula.heat_of_combustion(atoms, gas) / mass, latent
    liquid = per_kg(values["lower_heating_value_liquid"], mass)
    if liquid is None or latent is None:
        raise ValueError("lower heating value or latent heat is missing")
    return liquid + latent, latent


def _others(data: Mapping[str, Any]) -> tuple[tuple[str, Value], ...]:
    return tuple((table["quantity"], value(table)) for table in data.get("other", ()))


def with_derived(fuel: Fuel, source: str = "") -> Fuel:
    """Return the fuel with its derived figures appended to ``records`` (standing ``computed``)."""
    known = dict(fuel.records)
    if not source:
        source = FROM_FORMATION if "heat_of_formation_vapour" in known else FROM_HEATING_VALUE
    items: list[tuple[str, float | None, float, str, str]] = [
        ("molar_mass", fuel.molar_mass, 1.0, "kg/kmol", "Sum of IUPAC abridged standard atomic weights"),
        ("lower_heating_value_vapour", fuel.lower_heating_value_vapour, 1e-6, "MJ/kg", source),
        ("lower_heating_value_liquid", fuel.lower_heating_value_liquid, 1e-6, "MJ/kg", source),
        ("higher_heating_value_vapour", fuel.higher_heating_value_vapour, 1e-6, "MJ/kg", source),
        ("higher_heating_value_liquid", fuel.higher_heating_value_liquid, 1e-6, "MJ/kg", source),
        ("latent_heat", fuel.latent_heat, 1e-3, "kJ/kg", source),
        ("density", fuel.density, 1.0, "kg/m3", source),
        ("liquid_cp", fuel.liquid_cp, 1.0, "J/(kg K)", source),
        ("expansivity", fuel.expansivity, 1.0, "1/K", source),
    ]
    for key, number, scale, unit, origin in items:
        if number is not None and key not in known:
            known[key] = Value(number * scale, unit, origin, "computed")
    return replace(fuel, records=tuple(known.items()))


def _mixture(data: Mapping[str, Any]) -> Fuel:
    pairs = [(table["name"], float(table["fraction"])) for table in data["component"]]
    if data["standing"] not in STANDINGS or not data["source"] or abs(sum(f for _, f in pairs) - 1.0) > 1e-9:
        raise ValueError("mixture without source, standing or fractions that sum to one")
    parts = [(INERT[name] if name in INERT else Part.of(load(name)), share) for name, share in pairs]
    if data["basis"] == "volume":
        fuel = liquid_blend(parts)
    elif data["basis"] == "mole":
        fuel = gas_mixture(parts)
    else:
        raise ValueError(f"unknown basis {data['basis']!r}")
    shares = tuple(
        (
            f"{data['basis']}_fraction_{name}",
            Value(share, "m3/m3" if data["basis"] == "volume" else "kmol/kmol", data["source"], data["standing"]),
        )
        for name, share in pairs
    )
    vapour = replace(fuel.vapour, name=data["name"])
    warnings = tuple(dict.fromkeys((*data.get("warnings", ()), *fuel.warnings)))
    fuel = replace(
        fuel,
        name=data["name"],
        title=data["title"],
        kind=data["kind"],
        vapour=vapour,
        warnings=warnings,
        records=shares,
        others=_others(data),
    )
    return with_derived(fuel, f"Mixture rules over the records of {', '.join(n for n, _ in pairs)}")
