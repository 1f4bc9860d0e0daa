"""Air, water and fuels: properties of the tool beside printed tables and packages' data."""

from __future__ import annotations

import math

import numpy as np

from fuelair import fuel as fuels
from fuelair.air import dry_air, humidity_ratio, standard_atmosphere, water_dew_point, water_saturation_pressure
from fuelair.cycle.exergy import P0, T0, element_potentials, standard_vapour_exergy
from fuelair.gas.cantera_gas import CanteraGas
from fuelair.gas.mixture import gibbs, mix
from fuelair.gas.polynomials import R
from fuelair.gas.species import build
from fuelair.proof import packages
from fuelair.proof.equilibria import species_property
from fuelair.proof.flames import named_vapour
from fuelair.proof.registry import computation, lookup, one, pick, solved


def _air(T: float) -> tuple[float, float, float]:
    """h [J/kg], s at the reference pressure [J/(kg K)] and R of the tool's dry air."""
    table = build()
    mixture = mix(table, table.amounts(dry_air().composition())[None])
    _, h, s = mixture.thermal(one(T))
    return float(h[0]), float(s[0]), float(mixture.gas_constant()[0])


@computation("air-table")
def air_table(*, T: float, base_T: float, base: float, result: str) -> float:
    """A column of the ideal-gas air table [SI], with its own printed value ``base`` at ``base_T``.

    ``h``, ``u`` and ``s0`` add the difference to the base; ``pr`` and ``vr`` multiply it.
    """
    (h, s, r), (h0, s0, _) = _air(T), _air(base_T)
    relative = math.exp((s - s0) / r)
    return pick(
        {
            "h": base + h - h0,
            "u": base + h - h0 - r * (T - base_T),
            "s0": base + s - s0,
            "pr": base * relative,
            "vr": base * T / base_T / relative,
        },
        result,
    )


@lookup("air-fit-difference")
def air_fit_difference(*, T: float, base_T: float, base: float, result: str, further: float = 0.0) -> float:
    """What the tool's polynomials of N2, O2 and CO2 change in `air_table` against the JANAF tables [SI].

    Interpolated linearly between printed temperatures. ``further`` [SI] is added: a flaw of the printed row.
    """
    dh, ds = (_fit(T, p) - _fit(base_T, p) for p in ("enthalpy", "entropy"))
    _, _, r = _air(T)
    printed = air_table(T=T, base_T=base_T, base=base, result=result)
    changes = {"h": dh, "u": dh, "s0": ds, "pr": printed * -math.expm1(-ds / r), "vr": printed * -math.expm1(ds / r)}
    return further + pick(changes, result)


def _fit(T: float, result: str) -> float:
    """Tool less JANAF in the air's H - H(298.15) [J/kg] or S [J/(kg K)]."""
    air = dry_air()
    column, factor = {"enthalpy": ("H-H(Tr)", 1e3), "entropy": ("S", 1.0)}[result]
    low, high = packages.janaf_neighbours("CO2", T)

    def miss(name: str, t: float) -> float:
        return species_property(species=name, T=t, result=result) - packages.janaf_value(name, column, t) * factor

    share = 0.0 if high == low else (T - low) / (high - low)
    total = 0.0
    for name, x in (("N2", air.N2), ("O2", air.O2), ("CO2", air.CO2)):
        total += x * ((1.0 - share) * miss(name, low) + share * miss(name, high))
    return total / air.molar_mass * 1e3


@computation("relative-volume-identity")
def relative_volume_identity(*, T: float, pr: float, vr: float) -> float:
    """Gas constant [J/(kg K)] that a printed row of relative pressure and volume implies: 100 vr pr / T."""
    return 100.0 * vr * pr / T


@computation("air-gas-constant")
def air_gas_constant() -> float:
    """Specific gas constant of the tool's dry air [J/(kg K)]."""
    return _air(300.0)[2]


@computation("air-compression")
def air_compression(*, T1: float, p1: float, r: float, result: str) -> float:
    """Isentropic compression of dry air, ideal gas with its own cp: ``T`` [K] or ``p`` [Pa] at volume ratio ``r``."""
    table, engine = build(), CanteraGas()
    amounts = table.amounts(dry_air().composition())[None]
    start = solved(engine.state(table, "TP", one(T1), one(p1), amounts))
    end = solved(engine.state(table, "SV", start.s, start.v / r, amounts))
    return pick({"T": end.T[0], "p": end.p[0]}, result)


@computation("water-saturation")
def water_saturation(*, T: float) -> float:
    """Saturation pressure of water [Pa]."""
    return float(water_saturation_pressure(T))


@computation("water-dew-point")
def dew_point(*, p: float) -> float:
    """Temperature at which water vapour of partial pressure ``p`` [Pa] saturates [K]."""
    return float(water_dew_point(p)[0])


@computation("humidity-ratio")
def humidity(*, relative_humidity: float, T: float, p: float) -> float:
    """Water vapour per dry air [kg/kg]."""
    return float(humidity_ratio(relative_humidity, T, p, dry_air().molar_mass))


@computation("standard-atmosphere")
def atmosphere(*, altitude: float, result: str) -> float:
    """Temperature ``T`` [K], pressure ``p`` [Pa] or density ``rho`` [kg/m3] of the standard atmosphere."""
    T, p = standard_atmosphere(altitude)
    return pick({"T": T, "p": p, "rho": p / (_air(300.0)[2] * T)}, result)


@computation("heating-value")
def heating_value(*, fuel: str, result: str) -> float:
    """``lower`` or ``higher`` heating value of the ``-vapour`` or ``-liquid`` [J/kg], e.g. ``lower-vapour``."""
    record = fuels.load(fuel)
    values = {"lower-vapour": record.lower_heating_value_vapour, "higher-vapour": record.higher_heating_value_vapour}
    if record.lower_heating_value_liquid is not None and record.higher_heating_value_liquid is not None:
        values |= {"lower-liquid": record.lower_heating_value_liquid, "higher-liquid": record.higher_heating_value_liquid}
    return pick(values, result)


@lookup("atct-heating-value")
def atct_heating_value(*, fuel: str, result: str) -> float:
    """Heating value [J/kg] from the Active Thermochemical Tables in chemicals: fuel, CO2 and water all from there."""
    record = fuels.load(fuel)
    level, phase = result.split("-")
    atoms = dict(record.atoms)
    method = {"vapour": ("ATCT_G", "gas"), "liquid": ("ATCT_L", "liquid")}[phase]
    reactant = packages.formation_enthalpy(CAS[fuel], *method)
    water = ("ATCT_G", "gas") if level == "lower" else ("ATCT_L", "liquid")
    products = atoms.get("C", 0.0) * packages.formation_enthalpy("124-38-9", "ATCT_G", "gas")
    products += atoms.get("H", 0.0) / 2 * packages.formation_enthalpy("7732-18-5", *water)
    return (reactant - products) / record.molar_mass * 1e3


CAS = {
    "methane": "74-82-8",
    "ethane": "74-84-0",
    "propane": "74-98-6",
    "n-butane": "106-97-8",
    "n-heptane": "142-82-5",
    "iso-octane": "540-84-1",
    "n-octane": "111-65-9",
    "toluene": "108-88-3",
    "methanol": "67-56-1",
    "ethanol": "64-17-5",
    "dme": "115-10-6",
    "ammonia": "7664-41-7",
    "n-dodecane": "112-40-3",
    "n-hexadecane": "544-76-3",
}
"""CAS numbers of the pure fuels."""


@computation("stoichiometric-air")
def stoichiometric_air(*, fuel: str, oxygen: float, air_molar_mass: float) -> float:
    """Dry air per fuel by mass [-] for air of a mole fraction of ``oxygen`` and a molar mass [kg/kmol]."""
    return fuels.load(fuel).stoichiometric_air_fuel_ratio(oxygen_mole_fraction=oxygen, air_molar_mass=air_molar_mass)


@computation("carbon-fraction")
def carbon_fraction(*, fuel: str) -> float:
    """Mass fraction of carbon [-]."""
    return fuels.load(fuel).mass_fractions["C"]


@computation("vapour-exergy")
def vapour_exergy(
    *, fuel: str = "", species: str = "", atoms: dict[str, float] | None = None, lower_heating_value: float = math.nan
) -> float:
    """Standard chemical exergy of a fuel vapour from species data [J/mol]."""
    record = fuels.load(fuel).vapour if fuel else named_vapour(species, atoms or {}, lower_heating_value)
    table = build(record)
    return standard_vapour_exergy(table) * float(table.molar_mass[table.index("fuel")]) / 1e3


@computation("product-exergy")
def product_exergy(*, species: str) -> float:
    """Standard chemical exergy of a species of burned gas [J/mol] at 298.15 K, 101 325 Pa."""
    table = build()
    j = table.index(species)
    own = R * T0 * (gibbs(table, one(T0))[0][j] + math.log(P0 / table.reference_pressure))
    return float(own - np.sum(table.atoms[j] * element_potentials(table))) / 1e3


@lookup("szargut-known-difference")
def szargut_known_difference(*, fuel: str, devaluation: float, per_carbon: float, phase: str = "vapour") -> float:
    """What is known to separate the tool's exergy from the table's [J/mol].

    ``per_carbon`` [J/mol]: the exergy of CO2 in the tool's reference atmosphere less the table's, for each
    carbon atom; and the heat of combustion, the tool's less the printed ``devaluation`` enthalpy [J/mol].
    """
    record = fuels.load(fuel)
    heat = heating_value(fuel=fuel, result=f"lower-{phase}") * record.molar_mass / 1e3
    return dict(record.atoms).get("C", 0.0) * per_carbon + heat - devaluation


@computation("liquid-exergy")
def liquid_exergy(*, fuel: str) -> float:
    """Standard chemical exergy of a liquid fuel [J/mol]: that of its vapour at saturation."""
    record = fuels.load(fuel)
    saturation = record.saturation_pressure(298.15)
    if saturation is None:
        raise LookupError(f"{fuel} has no vapour-pressure equation")
    return vapour_exergy(fuel=fuel) + R / 1e3 * 298.15 * math.log(saturation / 101325.0)
