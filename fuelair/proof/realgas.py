"""The real gas beside reference equations of state: compression of air, departures, burned gas."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from fuelair.gas.engine import Array, GasState, total
from fuelair.gas.mixture import mix
from fuelair.gas.polynomials import R
from fuelair.gas.real_engine import RealGas
from fuelair.gas.real_gas import density, residual, valid, virial_table
from fuelair.gas.second_opinion import compression_pressure
from fuelair.gas.species import SpeciesTable, build
from fuelair.proof.registry import computation, lookup, one, pick, solved

LEMMON_AIR = {"N2": 0.7812, "O2": 0.2096, "Ar": 0.0092}
"""Dry air of Lemmon et al. 2000 as mole fractions, from memory."""
FLUIDS = {
    "N2": "Nitrogen",
    "O2": "Oxygen",
    "Ar": "Argon",
    "CO2": "CarbonDioxide",
    "H2O": "Water",
    "CO": "CarbonMonoxide",
    "H2": "Hydrogen",
}
"""Names of the species in CoolProp."""
LOW_DENSITY = 0.3
"""Density at which a mixture shows little but its second virial coefficient [kmol/m3]; below 0.1 CoolProp's own is noise."""


def _fractions(table: SpeciesTable, mixture: Mapping[str, float]) -> Array:
    """Mole fractions (1, S) of a mixture given as relative amounts of substance."""
    amounts = table.amounts(dict(mixture))
    return np.asarray(amounts / total(amounts[None])[0])[None]


def _air() -> tuple[SpeciesTable, Array]:
    table = build()
    return table, table.amounts(LEMMON_AIR)[None]


def _compressed(T1: float, p1: float, r: float) -> tuple[GasState, GasState]:
    table, amounts = _air()
    start = solved(RealGas().state(table, "TP", one(T1), one(p1), amounts))
    return start, solved(RealGas().state(table, "SV", start.s, start.v / r, amounts))


@computation("real-air-compression")
def real_air_compression(*, T1: float, p1: float, r: float, result: str) -> float:
    """Isentropic compression of dry air as a real gas to the volume ratio ``r``: ``T`` [K], ``p`` [Pa], ``work`` [J/kg]."""
    start, end = _compressed(T1, p1, r)
    return pick({"T": end.T[0], "p": end.p[0], "work": end.u[0] - start.u[0]}, result)


@computation("peng-robinson-air-compression")
def peng_robinson_air_compression(*, T1: float, p1: float, r: float) -> float:
    """End pressure [Pa] of isentropic compression of dry air by the second opinion, Cantera's Peng-Robinson."""
    table, amounts = _air()
    start = solved(RealGas().state(table, "TP", one(T1), one(p1), amounts))
    found = compression_pressure(table, start, one(r))
    return float("nan") if found is None else found


@computation("real-air")
def real_air(*, T: float, p: float, result: str) -> float:
    """Dry air as a real gas at ``T`` [K], ``p`` [Pa].

    Parameters
    ----------
    result : ``Z`` [-], ``density`` [kg/m3], ``cp`` [J/(kg K)], or the departure from the ideal gas at the same
        T and p, ``h``, ``u`` [J/kg], ``s`` [J/(kg K)].
    """
    table, amounts = _air()
    state = solved(RealGas().state(table, "TP", one(T), one(p), amounts))
    mixture = mix(table, amounts)
    r = mixture.gas_constant()
    _, h0, s0 = mixture.thermal(state.T)
    s0 = s0 - r * np.log(p / table.reference_pressure)
    choices: dict[str, Any] = {
        "Z": (state.p * state.v / (r * state.T))[0],
        "density": 1.0 / state.v[0],
        "cp": state.cp[0],
        "h": (state.h - h0)[0],
        "u": (state.u - (h0 - r * state.T))[0],
        "s": (state.s - s0)[0],
    }
    return pick(choices, result)


@computation("real-mixture")
def real_mixture(*, mixture: dict[str, float], T: float, rho: float, result: str) -> float:
    """A mixture at ``T`` [K] and molar density ``rho`` [kmol/m3]: ``Z`` [-] or a species' fugacity coefficient [-].

    ArithmeticError where the model claims nothing.
    """
    table = build()
    x, vt = _fractions(table, mixture), virial_table(table)
    if not valid(vt, one(T), one(rho), x)[0]:
        raise ArithmeticError(f"{T} K, {rho} kmol/m3 lies outside what the real-gas model claims")
    state = residual(vt, one(T), one(rho), x)
    if result == "Z":
        return float(state.Z[0])
    return float(np.exp(state.mu[0, table.index(result)]) / state.Z[0])


@computation("real-vapour")
def real_vapour(*, species: str, T: float, p: float) -> float:
    """Compressibility factor [-] of one species as a gas at ``T`` [K], ``p`` [Pa]."""
    table = build()
    x, vt = _fractions(table, {species: 1.0}), virial_table(table)
    rho = density(vt, one(T), one(p), x)
    if not valid(vt, one(T), rho, x)[0]:
        raise ArithmeticError(f"{species} at {T} K, {p} Pa lies outside what the real-gas model claims")
    return float(p / (rho[0] * R * T))


def _multi_fluid(mixture: Mapping[str, float], T: float, rho: float) -> tuple[float, dict[str, float]]:
    """Z and fugacity coefficients of the multi-fluid Helmholtz mixture at ``rho`` [mol/m3]."""
    from CoolProp.CoolProp import AbstractState, DmolarT_INPUTS, iphase_gas

    state = AbstractState("HEOS", "&".join(FLUIDS[name] for name in mixture))
    whole = sum(mixture.values())
    if len(mixture) > 1:
        state.set_mole_fractions([value / whole for value in mixture.values()])
    state.specify_phase(iphase_gas)
    state.update(DmolarT_INPUTS, rho, T)
    factors = {name: float(state.fugacity_coefficient(i)) for i, name in enumerate(mixture)}
    return float(state.compressibility_factor()), factors


@lookup("multi-fluid-mixture")
def multi_fluid_mixture(*, mixture: dict[str, float], T: float, rho: float, result: str) -> float:
    """The same as `real_mixture` from the multi-fluid Helmholtz mixture of CoolProp."""
    Z, factors = _multi_fluid(mixture, T, rho * 1e3)
    return Z if result == "Z" else pick(factors, result)


@lookup("second-virial-difference")
def second_virial_difference(*, mixture: dict[str, float], T: float, rho: float, result: str) -> float:
    """What second virial coefficients change in a fugacity coefficient, `real_mixture` less multi-fluid [-].

    The difference of both residual potentials at a low density, carried on in proportion to density.
    """
    table = build()
    x, j = _fractions(table, mixture), table.index(result)
    own = float(residual(virial_table(table), one(T), one(LOW_DENSITY), x).mu[0, j])
    Z, factors = _multi_fluid(mixture, T, LOW_DENSITY * 1e3)
    change = (own - float(np.log(factors[result] * Z))) * rho / LOW_DENSITY
    Z, factors = _multi_fluid(mixture, T, rho * 1e3)
    ratio = real_mixture(mixture=mixture, T=T, rho=rho, result="Z") / Z
    return factors[result] * float(np.expm1(change - np.log(ratio)))


@lookup("lemmon-air")
def lemmon_air(*, T: float, p: float, result: str) -> float:
    """The same as `real_air` from the equation of Lemmon et al. 2000 in CoolProp."""
    from CoolProp.CoolProp import PT_INPUTS, AbstractState

    air = AbstractState("HEOS", "Air")
    air.update(PT_INPUTS, p, T)
    mass, gas = air.molar_mass(), air.gas_constant()
    Z = air.compressibility_factor()
    u = gas * air.T_reducing() * air.dalphar_dTau() / mass
    choices: dict[str, Any] = {
        "Z": Z,
        "density": air.rhomass(),
        "cp": air.cpmass(),
        "h": u + gas * T * (Z - 1.0) / mass,
        "u": u,
        "s": u / T - gas * (air.alphar() - np.log(Z)) / mass,
    }
    return pick(choices, result)


@lookup("lemmon-air-compression")
def lemmon_air_compression(*, T1: float, p1: float, r: float, result: str) -> float:
    """The same as `real_air_compression` from the equation of Lemmon et al. 2000 in CoolProp."""
    from CoolProp.CoolProp import PT_INPUTS, AbstractState, DmassSmass_INPUTS

    air = AbstractState("HEOS", "Air")
    air.update(PT_INPUTS, p1, T1)
    start = air.umass()
    air.update(DmassSmass_INPUTS, air.rhomass() * r, air.smass())
    return pick({"T": air.T(), "p": air.p(), "work": air.umass() - start}, result)


@lookup("pure-vapour")
def pure_vapour(*, species: str, T: float, p: float) -> float:
    """The same as `real_vapour` from the fluid's own reference equation in CoolProp."""
    from CoolProp.CoolProp import PropsSI

    return float(PropsSI("Z", "T", T, "P", p, f"HEOS::{FLUIDS[species]}"))
