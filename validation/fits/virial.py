"""Makes mechanisms/virial/virial.toml: virial coefficients of pure fluids and pairs, fitted in T.

Run by hand, needs CoolProp and numpy:  python validation/fits/virial.py [output]

What is fitted, 250 to 3500 K (weakly down to 200 and up to 6000 K, so that the ends stay tame):

* B of every fluid from its reference equation of state (limit of zero density);
* c, the cube root of C, the same way, joined to nitrogen's by corresponding states where the equation
  is far outside its range, and held flat at cold for fluids that condense there: only C of a *mixture* counts,
  and the large negative C of cold steam says nothing of one water molecule between two of nitrogen;
* B of unlike pairs, twice the second virial coefficient of the equimolar mixture in the multi-fluid
  Helmholtz model less half of either pure one; corresponding states on nitrogen where the model has no pair
  or its pair is not credible (every pair with water, see WATER).

All in the basis (T0/T)**e of BASIS, whose members stay between 0.04 and 1 at 6000 K and above T0.
"""

from __future__ import annotations

import re
import sys
from dataclasses import dataclass
from functools import lru_cache
from itertools import combinations_with_replacement
from pathlib import Path

import CoolProp
import CoolProp.CoolProp as CP  # noqa: N817
import numpy as np

T0 = 400.0
BASIS = (0.0, 0.5, 1.0, 1.5, 2.0, 3.0, 4.0, 6.0, 8.0)
LAMBDA = 0.4
"""Constant of the closing term LAMBDA (C rho^2)^2 that stands for all coefficients above the third.

Chosen on dry air (Lemmon 2000) from 300 to 2000 K: without it Z is 0.35 % low at 6 kmol/m3 and 2.6 % low at 300 K
and 30 MPa, with it 0.19 % and 0.41 %. A term in X^3 was tried beside it, and a quotient X^2/(1 + k X): no better."""
MAPPING = {
    "OH": "H2O", "H": "H2", "O": "O2", "N": "N2", "NO": "N2 O2", "NO2": "CO2", "N2O": "CO2", "HO2": "O2", "H2O2": "H2O",
    "HCN": "NH3",
}  # fmt: skip
"""Species without a fluid of their own -> fluid that stands for them; two names count half each."""
CORE = (250.0, 3500.0)
GRID = np.exp(np.linspace(np.log(200.0), np.log(6000.0), 240))
VANISHING = 1e-6  # density at which limits are read [mol/m3]


@dataclass(frozen=True)
class Fluid:
    """One fluid: name here, CoolProp's name, how far its equation is followed for B and for C, cold floor of C."""

    name: str
    coolprop: str
    b_to: float = np.inf
    c_to: float = np.inf
    c_flat_below: float = 0.0
    fuel: bool = False


FLUIDS = (
    Fluid("N2", "Nitrogen"),
    Fluid("O2", "Oxygen"),
    Fluid("Ar", "Argon"),
    Fluid("CO2", "CarbonDioxide", c_flat_below=280.0),
    Fluid("H2O", "Water"),
    Fluid("CO", "CarbonMonoxide", c_to=500.0),
    Fluid("H2", "Hydrogen"),
    Fluid("CH4", "Methane", c_to=1000.0),
    Fluid("NH3", "Ammonia", c_flat_below=610.0),
    Fluid("SO2", "SulfurDioxide", c_to=700.0, c_flat_below=600.0),
    Fluid("ethane", "Ethane", fuel=True),
    Fluid("propane", "n-Propane", fuel=True),
    Fluid("n-butane", "n-Butane", fuel=True),
    Fluid("n-heptane", "n-Heptane", fuel=True),
    Fluid("n-octane", "n-Octane", fuel=True),
    Fluid("n-dodecane", "n-Dodecane", fuel=True),
    Fluid("toluene", "Toluene", fuel=True),
    Fluid("methanol", "Methanol", b_to=620.0, fuel=True),
    Fluid("ethanol", "Ethanol", b_to=650.0, fuel=True),
    Fluid("dme", "DimethylEther", fuel=True),
    Fluid("methyl-oleate", "MethylOleate", fuel=True),
)
BY_NAME = {f.name: f for f in FLUIDS}
MULTI_FLUID = {
    frozenset(p) for p in (("N2", "O2"), ("N2", "Ar"), ("O2", "Ar"), ("N2", "CO2"), ("O2", "CO2"), ("Ar", "CO2"), ("N2", "CO"),
        ("N2", "H2"), ("O2", "H2"), ("CO2", "H2"), ("CO", "H2"), ("N2", "CH4"), ("CO2", "CH4"), ("O2", "CO"))
}  # fmt: skip
AIR_WATER = {frozenset((gas, "H2O")) for gas in ("N2", "O2", "Ar")}
"""Pairs that take the air-water coefficient from first principles (Harvey and Huang 2007, as CoolProp carries it)."""
WATER = (300.0, 50.0)
"""Temperature [K] and volume [cm3/mol] that stand for water towards molecules that it does not bind.

With them corresponding states meet the air-water coefficient within 2.5 cm3/mol at 300 K and 1 above 450 K.
"""
BOUND = ("CO2", "NH3", "SO2", "methanol", "ethanol", "dme")
"""Molecules that water binds: here its own critical temperature counts. Carbon dioxide and water: -175 cm3/mol at
300 K and -113 at 373 K, close to what measurements gave (from memory: about -190 and -110).
"""


@lru_cache(maxsize=64)
def state(name: str) -> CP.AbstractState:
    """A gas state of a pure fluid, or of an equimolar pair 'A&B'."""
    s = CP.AbstractState("HEOS", name)
    if "&" in name:
        s.set_mole_fractions([0.5, 0.5])
    s.specify_phase(CP.iphase_gas)
    return s


def limits(name: str, T: float) -> tuple[float, float]:
    """B [cm3/mol] and C [cm6/mol2] at vanishing density."""
    s = state(name)
    s.update(CP.DmolarT_INPUTS, VANISHING, T)
    return s.Bvirial() * 1e6, s.Cvirial() * 1e12


def critical(fluid: Fluid) -> tuple[float, float]:
    """Critical temperature [K] and volume [cm3/mol]."""
    s = state(fluid.coolprop)
    return s.T_critical(), 1e6 / s.rhomolar_critical()


def simple_b(T: float, Tc: float, vc: float) -> float:
    """B of a molecule shaped like nitrogen, by corresponding states [cm3/mol]."""
    t, v = critical(BY_NAME["N2"])
    return limits("Nitrogen", T * t / Tc)[0] * vc / v


def simple_c(T: float, Tc: float, vc: float) -> float:
    """Cube root of C likewise [(cm3/mol)**(2/3)], held at its critical value at colder states."""
    t, v = critical(BY_NAME["N2"])
    return float(np.cbrt(limits("Nitrogen", _not_below(T / Tc, 1.0) * t)[1] * (vc / v) ** 2))


def _not_below(T: float, floor: float) -> float:
    return float((T**6 + floor**6) ** (1 / 6))


def pure_b(fluid: Fluid, T: float) -> float:
    """B of a pure fluid; beyond ``b_to`` corresponding states, joined without a step."""
    if fluid.b_to >= T:
        return limits(fluid.coolprop, T)[0]
    tc, vc = critical(fluid)
    step = limits(fluid.coolprop, fluid.b_to)[0] - simple_b(fluid.b_to, tc, vc)
    return simple_b(T, tc, vc) + step * (fluid.b_to / T) ** 3


def pure_c(fluid: Fluid, T: float) -> float:
    """Cube root of C as used in mixtures."""
    if fluid.name == "H2O":  # of one water and two air molecules, over that of air: (C_aaw/C_aaa^(2/3))
        aaw, aaa = (CP.HAProps_Aux(key, T, 101325.0, 0.0)[0] * 1e12 for key in ("Caaw", "Caaa"))
        return float(aaw / np.cbrt(aaa) ** 2)
    tc, vc = critical(fluid)
    if fluid.fuel:
        return simple_c(T, tc, vc)
    warm = _not_below(T, fluid.c_flat_below) if fluid.c_flat_below else T
    if warm <= fluid.c_to:
        return float(np.cbrt(limits(fluid.coolprop, warm)[1]))
    ratio = np.cbrt(limits(fluid.coolprop, fluid.c_to)[1]) / simple_c(fluid.c_to, tc, vc)
    return float(ratio) * simple_c(warm, tc, vc)


def pair_b(a: Fluid, b: Fluid, T: float) -> float:
    """B of an unlike pair [cm3/mol]."""
    if frozenset((a.name, b.name)) in MULTI_FLUID:
        mixed = _equimolar_b(f"{a.coolprop}&{b.coolprop}", T)
        return 2.0 * mixed - 0.5 * (limits(a.coolprop, T)[0] + limits(b.coolprop, T)[0])
    if frozenset((a.name, b.name)) in AIR_WATER:
        return float(CP.HAProps_Aux("Baw", T, 101325.0, 0.0)[0]) * 1e6
    (ta, va), (tb, vb) = (_size(f, a if f is b else b) for f in (a, b))
    side = ((np.cbrt(va) + np.cbrt(vb)) / 2.0) ** 3
    depth = np.sqrt(ta * tb) * (np.sqrt(va * vb) / side) ** 2
    return simple_b(T, float(depth), float(side))


def _size(fluid: Fluid, partner: Fluid) -> tuple[float, float]:
    """Temperature [K] and volume [cm3/mol] of a fluid in corresponding states with a partner."""
    if fluid.name != "H2O":
        return critical(fluid)
    return (critical(fluid)[0], WATER[1]) if partner.name in BOUND else WATER


def _equimolar_b(name: str, T: float) -> float:
    s = state(name)
    slope = []
    for rho in (2.0, 4.0):
        s.update(CP.DmolarT_INPUTS, rho, T)
        slope.append(s.alphar() / rho)
    return (2.0 * slope[0] - slope[1]) * 1e6


def fit(values: np.ndarray, floor: float, relative: float) -> tuple[list[float], float, float]:
    """Coefficients, largest error above 500 K, largest relative error below (over 250 to 3500 K)."""
    matrix = (T0 / GRID)[:, None] ** np.array(BASIS)
    core = (CORE[0] <= GRID) & (CORE[1] >= GRID)
    weight = np.where(core, 1.0, 0.1) / (floor + relative * np.abs(values))
    coefficients = np.linalg.lstsq(matrix * weight[:, None], values * weight, rcond=None)[0]
    coefficients = np.array([float(f"{c:.10g}") for c in coefficients])
    error = np.abs(matrix @ coefficients - values)
    hot, cold = core & (GRID > 500.0), core & (GRID <= 500.0)
    return list(coefficients), float(error[hot].max()), float((error / (np.abs(values) + 10.0))[cold].max())


def atoms(name: str) -> str:
    """Atoms of a molecule as an inline table, read from CoolProp's formula such as C_{7}H_{16}."""
    formula = CP.get_fluid_param_string(name, "formula")
    counts: dict[str, int] = {}
    for symbol, count in re.findall(r"([A-Z][a-z]?)(?:_\{(\d+)\})?", formula):
        counts[symbol] = counts.get(symbol, 0) + int(count or 1)
    return "{ " + ", ".join(f"{k} = {v}" for k, v in counts.items()) + " }"


def beyond(fluid: Fluid) -> tuple[str, str]:
    """In words: what B and c follow where the equation of state is not followed."""
    equation = "the equation itself, extrapolated: smooth, flat and of plausible size"
    b = equation if np.isinf(fluid.b_to) else f"nitrogen's by corresponding states from {fluid.b_to:g} K, joined"
    if fluid.name == "H2O":
        return b, "air-water third coefficient over the air's to the power 2/3, at all temperatures"
    if fluid.fuel:
        return b, "nitrogen's by corresponding states at all temperatures, held flat below the critical temperature"
    c = equation if np.isinf(fluid.c_to) else f"nitrogen's by corresponding states from {fluid.c_to:g} K, scaled to join"
    return b, c + (f"; held flat below {fluid.c_flat_below:g} K" if fluid.c_flat_below else "")


def row(values: list[float]) -> str:
    """Coefficients as TOML."""
    return "[" + ", ".join(f"{v:.10g}" if v else "0.0" for v in values) + "]"


def main(path: Path) -> None:
    """Fit everything and write the file."""
    version = CoolProp.__version__
    lines = [
        "# Virial coefficients of pure fluids and pairs, made by validation/fits/virial.py; do not edit by hand.",
        "# b: B in cm3/mol, c: cube root of C in (cm3/mol)^(2/3); value = sum of coefficient * (T0/T)^exponent.",
        "# error_b, error_c: largest miss of the fit above 500 K (250 to 3500 K fitted, weakly 200 to 6000 K);",
        "# cold_b, cold_c: largest miss below 500 K over (magnitude + 10).",
        "# source: key of the reference equation of state in CoolProp's list of references; equation_t_max [K]: its limit",
        "# there; beyond_b, beyond_c: what stands in beyond. Volumes in cm3/mol, temperatures in K, masses in g/mol.",
        "# Pairs: Harvey2007 = A. H. Harvey, P. H. Huang, Int. J. Thermophys. 28 (2007) 556, air-water from first",
        "# principles, for all three gases of air; multi-fluid = CoolProp's Helmholtz mixture model, equimolar;",
        "# corresponding-states = nitrogen's B with T_ij = sqrt(T_i T_j) sqrt(v_i v_j)^2/v_ij^2, v_ij^(1/3) the mean.",
        "# lambda: constant of the closing term; [mapping]: fluids that stand for species without data of their own.",
        "", "format = 1", f'made_with = "CoolProp {version}"', f"T0 = {T0}", f"exponents = {list(BASIS)}", f"lambda = {LAMBDA}",
        "", "[mapping]", *(f'{k} = "{v}"' for k, v in MAPPING.items()), "",
    ]  # fmt: skip
    for f in FLUIDS:
        b, eb, cb = fit(np.array([pure_b(f, T) for T in GRID]), 0.05, 0.002)
        c, ec, cc = fit(np.array([pure_c(f, T) for T in GRID]), 0.05, 0.002)
        s = state(f.coolprop)
        tc, vc = critical(f)
        key = CP.get_BibTeXKey(f.coolprop, "EOS")
        beyond_b, beyond_c = beyond(f)
        lines += [
            "[[fluid]]", f'name = "{f.name}"', f"fuel = {str(f.fuel).lower()}", f"atoms = {atoms(f.coolprop)}",
            f'source = "{key}"',
            f"equation_t_max = {s.Tmax():.6g}", f"molar_mass = {s.molar_mass() * 1e3:.6g}", f"critical_temperature = {tc:.7g}",
            f"critical_volume = {vc:.6g}",
            f'beyond_b = "{beyond_b}"', f'beyond_c = "{beyond_c}"', f"b = {row(b)}", f"c = {row(c)}",
            f"error_b = {eb:.2g}", f"cold_b = {cb:.2g}", f"error_c = {ec:.2g}", f"cold_c = {cc:.2g}", "",
        ]  # fmt: skip
    for f, g in combinations_with_replacement(FLUIDS, 2):
        if f is g or (f.fuel and g.fuel):
            continue
        b, eb, cb = fit(np.array([pair_b(f, g, T) for T in GRID]), 0.05, 0.002)
        names = frozenset((f.name, g.name))
        source = "multi-fluid" if names in MULTI_FLUID else "Harvey2007" if names in AIR_WATER else "corresponding-states"
        lines += ["[[pair]]", f'of = ["{f.name}", "{g.name}"]', f'source = "{source}"', f"b = {row(b)}",
            f"error_b = {eb:.2g}", f"cold_b = {cb:.2g}", ""]  # fmt: skip
    path.write_text("\n".join(lines), encoding="utf-8")


if __name__ == "__main__":
    home = Path(__file__).resolve().parents[2] / "mechanisms" / "virial" / "virial.toml"
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else home)
