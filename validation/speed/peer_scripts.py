"""What a competent user would write with Cantera alone: the peers of `studies.py`, meant to be read.

`plain` takes the mechanism that everybody has (GRI-Mech 3.0, 53 species, bundled with Cantera) and its defaults.
`tuned` knows what it does: the nineteen species of burned gas and methane only, one phase for all cases, the fastest
solver named, nothing looked up twice. Both run the same ideal fuel-air cycle of premixed methane, one case after the
other: isentropic compression, combustion to equilibrium, isentropic expansion in shifting equilibrium.
"""

from __future__ import annotations

from pathlib import Path

import cantera as ct
import numpy as np

SPECIES = (
    ["CO2", "CO", "H2O", "H2", "OH", "H", "O2", "O", "N2", "NO", "N", "Ar", "NO2", "HO2", "N2O", "H2O2", "CH4", "NH3", "HCN"]
)  # fmt: skip
NINE = ("N2", "O2")
"""Species that come from the nine-coefficient file."""
STOICHIOMETRIC = 2.0
"""Moles of oxygen per mole of methane."""
AIR = {"N2": 0.78084, "O2": 0.209476, "Ar": 0.00934, "CO2": 0.0004}
QUANTITIES = ("T2", "p2", "T3", "p3", "T4", "p4", "work", "imep", "efficiency")


def plain_gas() -> ct.Solution:
    """GRI-Mech 3.0 as it comes."""
    return ct.Solution("gri30.yaml")


def tuned_gas() -> ct.Solution:
    """Burned gas of nineteen species."""
    data = Path(ct.__file__).parent / "data"
    listed = {s.name: s for s in ct.Species.list_from_file(str(data / "nasa_gas.yaml"))}
    listed |= {s.name: s for s in ct.Species.list_from_file(str(data / "airNASA9.yaml")) if s.name in NINE}
    return ct.Solution(thermo="ideal-gas", species=[listed[name] for name in SPECIES])


def plain_cycle(gas: ct.Solution, phi: float, r: float, p1: float, T1: float, mode: str, limit: float) -> tuple[float, ...]:
    """One cycle with named properties and default settings."""
    oxygen = AIR["O2"]
    gas.TPX = T1, p1, {"CH4": phi * oxygen / STOICHIOMETRIC, "O2": oxygen, "N2": AIR["N2"], "AR": AIR["Ar"], "CO2": AIR["CO2"]}
    fuel = gas["CH4"].Y[0]
    u1, s1, v1 = gas.u, gas.s, gas.v
    gas.SV = s1, v1 / r
    T2, p2, u2, v2 = gas.T, gas.P, gas.u, gas.v
    if mode == "constant-pressure":
        gas.equilibrate("HP")
    else:
        gas.equilibrate("UV")
        if mode == "pressure-limited" and limit < gas.P:
            gas.HP = u2 + limit * v2, limit
            gas.equilibrate("HP")
    T3, p3, u3, v3 = gas.T, gas.P, gas.u, gas.v
    gas.SV = gas.s, v1
    gas.equilibrate("SV")
    work = p3 * (v3 - v2) + u3 - gas.u - (u2 - u1)
    return T2, p2, T3, p3, gas.T, gas.P, work, work / (v1 - v2), work / (fuel * 50.03e6)


def tuned_cycle(gas: ct.Solution, phi: float, r: float, p1: float, T1: float, mode: str, limit: float) -> tuple[float, ...]:
    """One cycle with arrays set by position and the element-potential solver."""
    x = np.zeros(len(SPECIES))
    x[[8, 6, 11, 0]] = AIR["N2"], AIR["O2"], AIR["Ar"], AIR["CO2"]
    x[16] = phi * AIR["O2"] / STOICHIOMETRIC
    gas.TPX = T1, p1, x
    fuel = gas.Y[16]
    s1, v1 = gas.SV
    u1 = gas.int_energy_mass
    v2 = v1 / r
    gas.SV = s1, v2
    T2, p2 = gas.TP
    u2 = gas.int_energy_mass
    if mode == "constant-pressure":
        gas.equilibrate("HP", solver="element_potential")
    else:
        gas.equilibrate("UV", solver="element_potential")
        if mode == "pressure-limited" and limit < gas.P:
            gas.HP = u2 + limit * v2, limit
            gas.equilibrate("HP", solver="element_potential")
    T3, p3 = gas.TP
    u3, v3 = gas.UV
    gas.SV = gas.entropy_mass, v1
    gas.equilibrate("SV", solver="element_potential")
    T4, p4 = gas.TP
    work = p3 * (v3 - v2) + u3 - gas.int_energy_mass - (u2 - u1)
    return T2, p2, T3, p3, T4, p4, work, work / (v1 - v2), work / (fuel * 50.03e6)


def tuned_closed_cycle(gas: ct.Solution, phi: float, r: float, p_i: float, T_i: float, p_e: float) -> tuple[float, ...]:
    """One constant-volume cycle with the residual gas that it leaves itself: repeated until the trapped state stands.

    The gas that stays expands isentropically, composition frozen, to the exhaust pressure; it mixes with the fresh charge at
    constant enthalpy.
    """
    x = np.zeros(len(SPECIES))
    x[[8, 6, 11, 0]] = AIR["N2"], AIR["O2"], AIR["Ar"], AIR["CO2"]
    x[16] = phi * AIR["O2"] / STOICHIOMETRIC
    gas.TPX = T_i, p_i, x
    fresh, h_i, fuel = gas.Y, gas.enthalpy_mass, gas.Y[16]
    residual, h6, v6, burned, before = 0.0, 0.0, 0.0, fresh, 0.0
    for _ in range(100):
        mixed = (1.0 - residual) * fresh + residual * burned
        gas.HPY = (1.0 - residual) * h_i + residual * (h6 + v6 * (p_i - p_e)), p_i, mixed
        T1 = gas.T
        s1, v1 = gas.SV
        u1 = gas.int_energy_mass
        v2 = v1 / r
        gas.SV = s1, v2
        T2, p2 = gas.TP
        u2 = gas.int_energy_mass
        gas.equilibrate("UV", solver="element_potential")
        T3, p3 = gas.TP
        u3 = gas.int_energy_mass
        gas.SV = gas.entropy_mass, v1
        gas.equilibrate("SV", solver="element_potential")
        T4, p4 = gas.TP
        u4 = gas.int_energy_mass
        gas.SP = gas.entropy_mass, p_e
        h6, v6, burned = gas.enthalpy_mass, gas.volume_mass, gas.Y
        residual = v2 / v6
        if abs(T1 - before) < 1e-9 * T1:
            break
        before = T1
    work = u3 - u4 - (u2 - u1)
    return T2, p2, T3, p3, T4, p4, work, work / (v1 - v2), work / ((1.0 - residual) * fuel * 50.03e6)
