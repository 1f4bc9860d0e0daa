"""Equilibrium constants, species functions and dissociation examples from the tool's species table."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any, Literal

import numpy as np

from fuelair.errors import UnsolvedError
from fuelair.gas.cantera_gas import CanteraGas
from fuelair.gas.complete import water_gas_constant
from fuelair.gas.engine import total
from fuelair.gas.mixture import gibbs, mix, species_thermal
from fuelair.gas.polynomials import R
from fuelair.gas.species import SpeciesTable, build
from fuelair.proof import packages
from fuelair.proof.registry import computation, lookup, one, solved
from fuelair.roots import bracketed

T_REFERENCE = 298.15
BAR, ATMOSPHERE = 1e5, 101325.0
LN10 = math.log(10.0)
Data = Literal["tool", "bar", "janaf"]


def restricted(species: Sequence[str], extra: Sequence[str] = (), reference_pressure: float | None = None) -> SpeciesTable:
    """The tool's table of products whose equilibrium may form ``species`` only."""
    whole = build(extra=extra)
    mask = np.array([n in species for n in whole.names])
    return replace(whole, forms=mask, reference_pressure=reference_pressure or whole.reference_pressure)


def _with_gibbs(table: SpeciesTable, T: float, gibbs_over_rt: Mapping[str, float]) -> SpeciesTable:
    """The table with enthalpies shifted so that free energies of formation at ``T`` are the given ones over R T.

    Elements are referred to O2, N2, H2 (and carbon to the table's own CO) as they stand in the table.
    """
    g = gibbs(table, one(T))[0]
    level = {"O": g[table.index("O2")] / 2, "N": g[table.index("N2")] / 2, "H": g[table.index("H2")] / 2, "Ar": 0.0}
    level["C"] = g[table.index("CO")] - level["O"]
    low, high = table.low.copy(), table.high.copy()
    for name, value in gibbs_over_rt.items():
        j = table.index(name)
        elements = sum(n * level[e] for n, e in zip(table.atoms[j], table.elements, strict=True) if n)
        shift = (value + elements - g[j]) * T
        low[j, 5] += shift
        high[j, 5] += shift
    return replace(table, low=low, high=high)


def _janaf_formation(T: float, species: Sequence[str]) -> dict[str, float]:
    return {n: -LN10 * packages.janaf_value(n, "log Kf", T) for n in species if n not in ("O2", "N2", "H2", "Ar")}


def _table(data: Data, species: Sequence[str], T: float) -> SpeciesTable:
    if data == "tool":
        return restricted(species)
    table = restricted(species, reference_pressure=BAR)
    return table if data == "bar" else _with_gibbs(table, T, _janaf_formation(T, species))


@computation("equilibrium-composition")
def equilibrium_composition(
    *,
    mixture: dict[str, float],
    species: list[str],
    T: float,
    p: float,
    result: str,
    per_mixture: bool = False,
    data: Data = "tool",
    gibbs_J_per_mol: dict[str, float] | None = None,
    gibbs_over_rt: dict[str, float] | None = None,
) -> float:
    """Equilibrium of a ``mixture`` at ``T`` [K], ``p`` [Pa] among ``species`` only.

    Parameters
    ----------
    result : species whose mole fraction, or with ``per_mixture`` amount in the mixture's own measure, is returned.
    data : ``tool``: as shipped; ``bar``: the same polynomials at a standard pressure of 1 bar; ``janaf``:
        free energies of formation read from the JANAF tables.
    gibbs_J_per_mol, gibbs_over_rt : free energies of formation that the source itself uses, at 1 atm.
    """
    table = _table(data, species, T)
    given = {k: v / (R / 1e3 * T) for k, v in (gibbs_J_per_mol or {}).items()} or gibbs_over_rt
    if given:
        table = _with_gibbs(restricted(species, reference_pressure=ATMOSPHERE), T, given)
    amounts = table.amounts(mixture)[None]
    state = solved(CanteraGas().state(table, "TP", one(T), one(p), amounts, "equilibrium"))
    share = float(state.amounts[0, table.index(result)] / total(state.amounts)[0])
    if not per_mixture:
        return share
    return float(state.amounts[0, table.index(result)] / total(amounts)[0]) * sum(mixture.values())


@lookup("label-effect")
def label_effect(*, further: float = 0.0, **inputs: Any) -> float:
    """What the standard pressure of the tool's label, 1 atm for 1 bar, changes in `equilibrium_composition`.

    ``further`` is added: a known difference in other data, in the same measure.
    """
    return further + equilibrium_composition(**inputs) - equilibrium_composition(**{**inputs, "data": "bar"})


@computation("dissociation-temperature")
def dissociation_temperature(
    *, species: list[str], parent: str, degree: float, p: float, low: float, high: float, data: Data = "tool"
) -> float:
    """Temperature [K] at which the share ``degree`` of pure ``parent`` is dissociated at ``p`` [Pa]."""
    table = _table(data, species, high) if data != "janaf" else restricted(species)
    amounts = table.amounts({parent: 1.0})[None]

    def miss(T: np.ndarray) -> np.ndarray:
        state = solved(CanteraGas().state(table, "TP", T, one(p), amounts, "equilibrium"))
        return np.asarray(1.0 - state.amounts[:, table.index(parent)] / amounts[0, table.index(parent)] - degree)

    T, found = bracketed(miss, one(low), one(high), width=1e-6)
    if not found[0]:
        raise UnsolvedError("no-solution", f"no temperature between {low} and {high} K gives that degree")
    return float(T[0])


@computation("restricted-flame")
def restricted_flame(
    *, mixture: dict[str, float], species: list[str], T: float, p: float, result: str, data: Data = "tool"
) -> float:
    """Adiabatic constant-pressure combustion among ``species`` only: result ``T`` [K], or amount of a species per mixture."""
    table = _table(data, species, T)
    amounts = table.amounts(mixture)[None]
    fresh = solved(CanteraGas().state(table, "TP", one(T), one(p), amounts))
    state = solved(CanteraGas().state(table, "HP", fresh.h, fresh.p, amounts, "equilibrium"))
    if result == "T":
        return float(state.T[0])
    return float(state.amounts[0, table.index(result)] / total(amounts)[0]) * sum(mixture.values())


@computation("log10-k")
def log10_k(*, reaction: dict[str, float], T: float) -> float:
    """log10 of the equilibrium constant for partial pressures in bar, as the tool's equilibria have it.

    From the table's free energies, which hold at the table's standard pressure.
    """
    table = build()
    g = gibbs(table, one(T))[0]
    own = -sum(nu * float(g[table.index(n)]) for n, nu in reaction.items()) / LN10
    return own + math.log10(table.reference_pressure / BAR) * sum(reaction.values())


@lookup("janaf-log10-k")
def janaf_log10_k(*, reaction: dict[str, float], T: float) -> float:
    """log10 of the equilibrium constant at 1 bar: stoichiometric sum of the printed log Kf."""
    return sum(nu * packages.janaf_value(n, "log Kf", T) for n, nu in reaction.items())


@lookup("janaf-log10-k-known-difference")
def known_difference(*, reaction: dict[str, float], T: float, thermal: Sequence[str] = ()) -> float:
    """What is known to separate the tool's constant from JANAF's [dex].

    The standard pressure, 1 atm in the label of the data against 1 bar: log10(1.01325) sum(nu); the
    enthalpy of reaction at 298.15 K, that differs by the two compilations' enthalpies of formation; and
    for the species in ``thermal`` the free-energy function -[G - H(298.15)]/T.
    """
    table = build()
    label = math.log10(table.reference_pressure / BAR) * sum(reaction.values())
    ours = sum(nu * _standard_enthalpy(table, n) for n, nu in reaction.items())
    theirs = sum(nu * packages.janaf_value(n, "delta-f H", T_REFERENCE) * 1e3 for n, nu in reaction.items())
    functions = 0.0
    for name in thermal:
        own = species_property(species=name, T=T, result="entropy") - species_property(species=name, T=T, result="enthalpy") / T
        functions += reaction[name] * (own - packages.janaf_value(name, "-[G-H(Tr)]/T", T))
    return label - (ours - theirs) / (R / 1e3 * T * LN10) + functions / (R / 1e3 * LN10)


@computation("water-gas-constant")
def water_gas(*, T: float) -> float:
    """K of CO2 + H2 = CO + H2O [-] as complete combustion and the exhaust analysis use it."""
    return float(water_gas_constant(build(), one(T))[0])


@lookup("heywood-water-gas")
def heywood_water_gas(*, T: float) -> float:
    """K of CO2 + H2 = CO + H2O [-], fit of Heywood 1988 p. 105 (coefficients from memory), 400 to 3200 K."""
    return math.exp(2.743 - 1.761e3 / T - 1.611e6 / T**2 + 0.2803e9 / T**3)


@computation("species-property")
def species_property(*, species: str, T: float, result: str) -> float:
    """Molar ``enthalpy`` H(T) - H(298.15), ``formation-enthalpy`` [J/mol], ``entropy``, ``heat-capacity`` [J/(mol K)]."""
    table = build()
    if result == "formation-enthalpy":
        return _standard_enthalpy(table, species)
    amounts = np.zeros((2, len(table)))
    amounts[:, table.index(species)] = 1e-3
    cp, h, s = mix(table, amounts).thermal(np.array([T, T_REFERENCE]))
    return float({"enthalpy": h[0] - h[1], "entropy": s[0], "heat-capacity": cp[0]}[result])


def _standard_enthalpy(table: SpeciesTable, species: str) -> float:
    """Molar enthalpy at 298.15 K on the elements' datum [J/mol]."""
    _, h, _ = species_thermal(table, one(T_REFERENCE))
    return float(h[0, table.index(species)]) * R / 1e3 * T_REFERENCE


@lookup("janaf-species")
def janaf_species(*, species: str, T: float, result: str) -> float:
    """The same from the JANAF tables."""
    column, factor = {
        "enthalpy": ("H-H(Tr)", 1e3),
        "entropy": ("S", 1.0),
        "heat-capacity": ("Cp", 1.0),
        "formation-enthalpy": ("delta-f H", 1e3),
    }[result]
    return packages.janaf_value(species, column, T) * factor
