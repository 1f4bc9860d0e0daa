"""The list of fuels and the card of one fuel as plain tables."""

from __future__ import annotations

from fuelair import fuel
from fuelair.air import dry_air
from fuelair.fuel import Fuel
from fuelair.report.tables import Table


def fuel_list() -> Table:
    """Every recorded fuel in a row."""
    heads = ("name", "", "LHV vapour\nMJ/kg", "LHV liquid\nMJ/kg", "kg air\nper kg", "H/C", "C, H, O\nmass %")
    rows = tuple(_row(name, fuel.load(name)) for name in fuel.names())
    note = "fuelair fuels NAME shows the card with the source of every value."
    return Table("Fuels", heads, rows, note)


def _row(name: str, f: Fuel) -> tuple[str, ...]:
    air, atoms, liquid = dry_air(), dict(f.atoms), f.lower_heating_value_liquid
    ratio = f.stoichiometric_air_fuel_ratio(oxygen_mole_fraction=air.O2, air_molar_mass=air.molar_mass)
    return (
        name,
        f.title,
        f"{f.lower_heating_value_vapour / 1e6:.2f}",
        "-" if liquid is None else f"{liquid / 1e6:.2f}",
        f"{ratio:.2f}",
        f"{atoms.get('H', 0.0) / atoms['C']:.2f}" if atoms.get("C") else "-",
        ", ".join(f"{100 * f.mass_fractions.get(e, 0.0):.1f}" for e in "CHO"),
    )


def fuel_card(name: str) -> Table:
    """One fuel: every value with its unit, standing and source."""
    rows = tuple(
        (row.label, row.value, row.standing, row.source + (f" ({row.note})" if row.note else ""))
        for row in fuel.card(fuel.load(name))
    )
    return Table(name, ("", "value", "standing", "source"), rows)
