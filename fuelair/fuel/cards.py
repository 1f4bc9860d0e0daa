"""The card of a fuel: rows for display, nothing printed."""

from __future__ import annotations

from dataclasses import dataclass

from fuelair.fuel.model import Fuel, Value

LABELS = {
    "molar_mass": "Molar mass",
    "lower_heating_value_vapour": "Lower heating value, vapour",
    "lower_heating_value_liquid": "Lower heating value, liquid",
    "higher_heating_value_vapour": "Higher heating value, vapour",
    "higher_heating_value_liquid": "Higher heating value, liquid",
    "heat_of_formation_vapour": "Enthalpy of formation, vapour, 298.15 K",
    "heat_of_formation_liquid": "Enthalpy of formation, liquid, 298.15 K",
    "latent_heat": "Latent heat, 298.15 K",
    "entropy": "Standard entropy, vapour, 298.15 K, 1 bar",
    "density": "Liquid density",
    "density_temperature": "Temperature of the density",
    "liquid_cp": "Liquid specific heat, 298.15 K",
    "expansivity": "Liquid thermal expansion",
    "pressure_term_linear": "Liquid enthalpy against pressure, linear",
    "pressure_term_quadratic": "Liquid enthalpy against pressure, quadratic",
    "critical_temperature": "Critical temperature",
    "chemical_exergy_vapour": "Chemical exergy, vapour",
    "chemical_exergy_liquid": "Chemical exergy, liquid",
}


@dataclass(frozen=True, slots=True)
class Row:
    """One row of a card: label, value with its unit as text, source, standing and note."""

    label: str
    value: str
    source: str
    standing: str
    note: str = ""


def card(fuel: Fuel) -> list[Row]:
    """Return the rows of the fuel's card, in order: identity, values, correlations, other sources, warnings."""
    atoms = " ".join(f"{element}{_number(count)}" for element, count in fuel.atoms)
    rows = [Row("Fuel", fuel.title, "", ""), Row("Formula", atoms, "", "")]
    shown = dict(fuel.records)
    for key in [*LABELS, *(k for k in shown if k not in LABELS)]:
        if key in shown:
            rows.append(_row(LABELS.get(key, _label(key)), shown[key]))
    ratio = f"{_number(fuel.oxygen_demand)} kmol/kg"
    rows.append(Row("Oxygen demand", ratio, "C to CO2, H to H2O, S to SO2, N to N2", "computed"))
    shape = ", ".join(f"{_number(n)} x {species}" for species, n in fuel.vapour.shape)
    rows.append(Row("Specific heat of the vapour as", shape, "Cantera 3.2.0, nasa_gas.yaml", "read"))
    if fuel.saturation is not None:
        low, high = fuel.saturation.valid
        text = f"{fuel.saturation.form}, {low:g} to {high:g} K"
        curve = fuel.saturation
        rows.append(Row("Vapour pressure", text, curve.source, curve.standing, curve.note))
    rows += [_row(f"{LABELS.get(key, _label(key))} (elsewhere)", item) for key, item in fuel.others]
    rows += [Row("Warning", text, "", "") for text in fuel.warnings]
    return rows


def _row(label: str, item: Value) -> Row:
    unit = "" if item.unit == "-" else f" {item.unit}"
    return Row(label, f"{_number(item.value)}{unit}", item.source, item.standing, item.note)


def _label(key: str) -> str:
    return key.replace("_", " ").capitalize()


def _number(number: float) -> str:
    return f"{number:.6g}"
