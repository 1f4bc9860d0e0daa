"""Exergy of the fuel-air cycle: what the fuel brings, what each stage destroys, what leaves.

Dead state: 298.15 K, 101 325 Pa, chemical equilibrium with a reference atmosphere given by partial
pressures (Szargut's reference gases; values from memory). Every exergy is
E = U + p0 V - T0 S - sum(b_e mu_e0) over elements, b the amounts of atoms and mu_e0 their potentials in
that atmosphere; a flow has H in place of U + p0 V. Sulfur is measured against the standard chemical
exergy of sulfur dioxide.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fuelair.air import M_H2O, water_saturation_pressure
from fuelair.charge import WATER_CP, Charge, enters_as_liquid
from fuelair.cycle.fuel_air import Run
from fuelair.fuel import Fuel
from fuelair.gas.engine import Array, GasState, weighted
from fuelair.gas.mixture import gibbs, mix
from fuelair.gas.polynomials import R
from fuelair.gas.species import FUEL, SpeciesTable, shape_is_molecule

T0, P0 = 298.15, 101325.0
"""Dead state [K], [Pa]."""
REFERENCE_PRESSURES = {"O2": 20.39e3, "N2": 75.78e3, "Ar": 0.906e3, "CO2": 0.0335e3, "H2O": 2.2e3}
"""Partial pressures of the reference gases in the atmosphere [Pa], Szargut 1989, from memory."""
SULFUR_DIOXIDE = 313.4e6
"""Standard chemical exergy of sulfur dioxide [J/kmol], Szargut, from memory."""


@dataclass(frozen=True, slots=True)
class ExergyBalance:
    """Exergy per kg trapped [J/kg], arrays (N,).

    Attributes
    ----------
    fuel : brought by the supplied fuel, unburned part included.
    trapped, burned, release : non-flow exergy of the gas at those states.
    work : exergy of the work from the start of compression to release (against p0).
    indicated_work : gross indicated work, against the pressures of intake and exhaust.
    destroyed_by_entropy, destroyed_by_balance : by combustion, computed twice.
    leaving, remaining : of the exhaust that leaves (flow) and of the gas that stays.
    destroyed_blowdown : from release to exhaust pressure, by balance.
    fuel_per_kg : exergy of the fuel as supplied [J/kg fuel].
    from_correlation : whether the fuel's exergy rests on the Szargut-Styrylo ratio.
    """

    fuel: Array
    trapped: Array
    burned: Array
    release: Array
    work: Array
    indicated_work: Array
    destroyed_by_entropy: Array
    destroyed_by_balance: Array
    leaving: Array
    remaining: Array
    destroyed_blowdown: Array
    fuel_per_kg: Array
    from_correlation: bool


def element_potentials(table: SpeciesTable) -> Array:
    """Chemical potentials of the elements in the reference atmosphere [J/kmol of atoms], shape (E,)."""
    g = gibbs(table, np.array([T0]))[0]

    def potential(name: str) -> float:
        p = REFERENCE_PRESSURES[name]
        return float(R * T0 * (g[table.index(name)] + np.log(p / table.reference_pressure)))

    oxygen = 0.5 * potential("O2")
    values = {
        "O": oxygen,
        "N": 0.5 * potential("N2"),
        "Ar": potential("Ar"),
        "C": potential("CO2") - 2.0 * oxygen,
        "H": 0.5 * (potential("H2O") - oxygen),
    }
    if table.has("SO2"):
        standard = R * T0 * (g[table.index("SO2")] + np.log(P0 / table.reference_pressure))
        values["S"] = float(standard - SULFUR_DIOXIDE - 2.0 * oxygen)
    return np.array([values[e] for e in table.elements])


def nonflow(table: SpeciesTable, state: GasState) -> Array:
    """Exergy of closed gas [J/kg]."""
    return np.asarray(state.u + P0 * state.v - T0 * state.s - _elements(table, state.amounts))


def flow(table: SpeciesTable, state: GasState) -> Array:
    """Exergy of flowing gas [J/kg]."""
    return np.asarray(state.h - T0 * state.s - _elements(table, state.amounts))


def standard_vapour_exergy(table: SpeciesTable) -> float:
    """Chemical exergy of the fuel vapour at the dead state from species data [J/kg fuel]."""
    amounts = _only(table, FUEL, 1)
    mixture = mix(table, amounts)
    _, h, s = mixture.thermal(np.array([T0]))
    s = s - mixture.gas_constant() * np.log(P0 / table.reference_pressure)
    return float((h - T0 * s - _elements(table, amounts))[0])


def styrylo_ratio(fuel: Fuel) -> float:
    """Chemical exergy over lower heating value of a liquid fuel, Szargut and Styrylo 1964 (from memory).

    beta = 1.0401 + 0.1728 H/C + 0.0432 O/C + 0.2169 S/C (1 - 2.0628 H/C), mass ratios; needs carbon.
    """
    h, o, s = ((fuel.mass_ratio(e) or 0.0) for e in "HOS")
    return 1.0401 + 0.1728 * h + 0.0432 * o + 0.2169 * s * (1.0 - 2.0628 * h)


def fuel_exergy(charge: Charge) -> tuple[Array, bool]:
    """Flow exergy of the fuel as supplied [J/kg fuel] (N,), and whether it rests on the correlation.

    From species data when the vapour's entropy is its own molecule's: a liquid has the free energy of
    its vapour at saturation, plus what warming and pressing it take. Else the Szargut-Styrylo ratio
    times the lower heating value, plus the same.
    """
    recipe = charge.recipe
    table, fuel, T, p = recipe.table, recipe.fuel, recipe.fuel_temperature, recipe.fuel_pressure
    liquid = enters_as_liquid(recipe)
    exact = shape_is_molecule(fuel.vapour)
    vapour = standard_vapour_exergy(table) if exact else styrylo_ratio(fuel) * fuel.lower_heating_value_vapour
    mixture = mix(table, _only(table, FUEL, len(recipe)))
    r = mixture.gas_constant()
    _, h0, s0 = mixture.thermal(np.full(len(recipe), T0))
    _, h, s = mixture.thermal(T)
    warm = vapour + (h - h0) - T0 * (s - s0) + r * T0 * np.log(p / P0)
    if not liquid.any():
        return warm, not exact
    saturation = fuel.saturation_pressure(T0)
    base = vapour + (r * T0 * np.log(saturation / P0) if exact and saturation else 0.0)
    if not exact and fuel.lower_heating_value_liquid is not None:
        base = styrylo_ratio(fuel) * fuel.lower_heating_value_liquid
    cp = fuel.liquid_cp or 0.0
    heating = cp * (T - T0 - T0 * np.log(T / T0))
    pressing = (fuel.liquid_volume or 0.0) * (p - fuel.liquid_reference_pressure)
    return np.where(liquid, base + heating + pressing, warm), not exact


def water_exergy(charge: Charge) -> Array:
    """Flow exergy of the added liquid water [J/kg]: as its vapour at saturation, plus what warming takes."""
    T, n = charge.recipe.liquid_water_temperature, len(charge.recipe)
    at_rest = R * T0 / M_H2O * np.log(water_saturation_pressure(T0) / REFERENCE_PRESSURES["H2O"])
    return np.asarray(np.full(n, at_rest) + WATER_CP * (T - T0 - T0 * np.log(T / T0)))


def balance(run: Run) -> ExergyBalance:
    """Exergy balance of a solved fuel-air cycle."""
    charge, table = run.charge, run.charge.recipe.table
    mass = 1.0 + charge.injected
    per_kg, marked = fuel_exergy(charge)
    compressed, burned = run.compression.state, run.burn.state
    water = water_exergy(charge)
    supplied = charge.fuel_injected * per_kg + charge.water_injected * water
    entropy_of_fuel = (charge.fuel_enthalpy - per_kg - _elements(table, _only(table, FUEL, len(mass)))) / T0
    entropy_of_water = (charge.water_enthalpy - water - _elements(table, _only(table, "H2O", len(mass)))) / T0
    brought = charge.fuel_injected * entropy_of_fuel + charge.water_injected * entropy_of_water
    generated = mass * burned.s - compressed.s - brought
    useful = run.burn.expansion_work * mass - P0 * (mass * burned.v - compressed.v)
    by_balance = nonflow(table, compressed) + supplied - mass * nonflow(table, burned) - useful
    release = mass * nonflow(table, run.release)
    out = run.exhaust
    leaving = out.leaving_mass * flow(table, out.leaving)
    remaining = out.remaining_mass * nonflow(table, out.remaining)
    v4 = mass * run.release.v
    v6 = out.remaining_mass * out.remaining.v
    displaced = (out.leaving.p - P0) * (v4 - v6)
    displaced_first = mass * run.release.v - charge.trapped.v
    work = -run.compression.work + run.burn.expansion_work * mass + mass * (burned.u - run.release.u) - P0 * displaced_first
    return ExergyBalance(
        fuel=charge.fuel_mass * per_kg,
        trapped=nonflow(table, charge.trapped),
        burned=mass * nonflow(table, burned),
        release=release,
        work=work,
        indicated_work=run.result.figures["work_J_per_kg"],
        destroyed_by_entropy=T0 * generated,
        destroyed_by_balance=by_balance,
        leaving=leaving,
        remaining=remaining,
        destroyed_blowdown=np.asarray(release + displaced - leaving - remaining),
        fuel_per_kg=per_kg,
        from_correlation=marked,
    )


def _elements(table: SpeciesTable, amounts: Array) -> Array:
    return weighted(amounts, (table.atoms * element_potentials(table)).sum(axis=1, keepdims=True))[:, 0]


def _only(table: SpeciesTable, name: str, n: int) -> Array:
    amounts = np.zeros((n, len(table)))
    amounts[:, table.index(name)] = 1.0 / table.molar_mass[table.index(name)]
    return amounts
