"""What a fuel is: frozen records with sourced values, in SI."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fuelair.errors import InputError, Problem
from fuelair.fuel import formula
from fuelair.fuel.formula import Atoms
from fuelair.fuel.saturation import Saturation

REFERENCE_TEMPERATURE = 298.15
REFERENCE_PRESSURE = 101325.0
STANDINGS = ("read", "computed", "from memory", "common practice", "given")


@dataclass(frozen=True, slots=True)
class Value:
    """One number of a record as its source prints it.

    Attributes
    ----------
    value : number in ``unit``.
    unit : unit as written in the record, e.g. ``MJ/kg``.
    source : full reference.
    standing : ``read``, ``computed``, ``from memory``, ``common practice`` or ``given`` (by the user).
    note : remark, may be empty.
    """

    value: float
    unit: str
    source: str
    standing: str
    note: str = ""


@dataclass(frozen=True, slots=True)
class Vapour:
    """The fuel as ideal gas, in plain numbers for the gas room.

    Attributes
    ----------
    name : fuel name.
    atoms : (element, atoms per molecule), nonzero of C H O N S in this order; decimals for commercial fuels.
    molar_mass : kg/kmol, the sum over the atoms.
    lower_heating_value : J/kg of the vapour at 298.15 K, water as vapour.
    shape : (species of Cantera's nasa_gas.yaml, molecules of it per fuel molecule); weights may be negative
        (group increments). The weighted sum gives cp(T) in J/(kmol K), and the entropy if ``entropy`` is None.
        For commercial fuels the masses match and the atoms need not.
    entropy : J/(kmol K) at 298.15 K and 1 bar, ideal gas, or None.
    """

    name: str
    atoms: Atoms
    molar_mass: float
    lower_heating_value: float
    shape: tuple[tuple[str, float], ...]
    entropy: float | None = None


@dataclass(frozen=True, slots=True)
class Fuel:
    """One fuel: vapour, liquid, exergy and where every number comes from.

    Attributes
    ----------
    name, title : short name and full name.
    kind : ``pure``, ``commercial``, ``gas-mixture``, ``blend`` or ``own``.
    vapour : the fuel as ideal gas.
    latent_heat : J/kg, ideal-gas vapour less liquid at 298.15 K; None if the fuel is never liquid here.
    density : kg/m3 of the liquid at ``density_temperature`` [K], or None.
    liquid_cp : J/(kg K) of the liquid at 298.15 K, or None.
    expansivity : 1/K of the liquid at 298.15 K, or None.
    pressure_terms : (J/(kg Pa), J/(kg Pa2)): linear and quadratic rise of the liquid's enthalpy with pressure;
        None: the linear term follows from density and expansivity.
    critical_temperature : K, or None.
    saturation : vapour-pressure correlation, or None.
    always_liquid : True for commercial liquids and for own liquid fuels: never taken as gas by phase().
    chemical_exergy_vapour, chemical_exergy_liquid : J/kg, or None where no sourced value exists.
    warnings : what a user of this fuel should know.
    records : (name, Value) of everything recorded or derived, in the order of the card.
    others : (quantity, Value) of independent sources, for comparison only.
    """

    name: str
    title: str
    kind: str
    vapour: Vapour
    latent_heat: float | None = None
    density: float | None = None
    density_temperature: float | None = None
    liquid_cp: float | None = None
    expansivity: float | None = None
    pressure_terms: tuple[float, float] | None = None
    critical_temperature: float | None = None
    saturation: Saturation | None = None
    always_liquid: bool = False
    chemical_exergy_vapour: float | None = None
    chemical_exergy_liquid: float | None = None
    warnings: tuple[str, ...] = ()
    records: tuple[tuple[str, Value], ...] = field(default=(), repr=False)
    others: tuple[tuple[str, Value], ...] = field(default=(), repr=False)

    @property
    def atoms(self) -> Atoms:
        """(element, atoms per molecule), nonzero of C H O N S in this order."""
        return self.vapour.atoms

    @property
    def molar_mass(self) -> float:
        """Molar mass [kg/kmol]."""
        return self.vapour.molar_mass

    @property
    def values(self) -> dict[str, Value]:
        """Name to recorded or derived value, as its source prints it; a fresh dictionary."""
        return dict(self.records)

    @property
    def mass_fractions(self) -> dict[str, float]:
        """Element symbol to mass fraction [kg/kg]; only the elements present."""
        return formula.mass_fractions(self.atoms)

    @property
    def oxygen_demand(self) -> float:
        """Oxygen for complete combustion [kmol O2 / kg fuel]: C to CO2, H to H2O, S to SO2, N to N2."""
        return formula.oxygen_per_molecule(self.atoms) / self.molar_mass

    @property
    def lower_heating_value_vapour(self) -> float:
        """Lower heating value of the vapour [J/kg] at 298.15 K."""
        return self.vapour.lower_heating_value

    @property
    def lower_heating_value_liquid(self) -> float | None:
        """Lower heating value of the liquid [J/kg] at 298.15 K; None if never liquid here."""
        return None if self.latent_heat is None else self.lower_heating_value_vapour - self.latent_heat

    @property
    def higher_heating_value_vapour(self) -> float:
        """Higher heating value of the vapour [J/kg] at 298.15 K, water condensed."""
        return self.lower_heating_value_vapour + formula.water_heat(self.atoms)

    @property
    def higher_heating_value_liquid(self) -> float | None:
        """Higher heating value of the liquid [J/kg] at 298.15 K; None if never liquid here."""
        lower = self.lower_heating_value_liquid
        return None if lower is None else lower + formula.water_heat(self.atoms)

    def mass_ratio(self, element: str) -> float | None:
        """Return the mass of an element (``H``, ``O``, ``N``, ``S``) over that of carbon; None without carbon."""
        w = self.mass_fractions
        return w.get(element, 0.0) / w["C"] if "C" in w else None

    def stoichiometric_air_fuel_ratio(
        self,
        oxygen_mass_fraction: float | None = None,
        *,
        oxygen_mole_fraction: float | None = None,
        air_molar_mass: float | None = None,
    ) -> float:
        """Return kg dry air per kg fuel for complete combustion.

        Parameters
        ----------
        oxygen_mass_fraction : kg O2 per kg dry air; or instead both of the next two.
        oxygen_mole_fraction : kmol O2 per kmol dry air.
        air_molar_mass : kg/kmol.
        """
        if oxygen_mass_fraction is None and oxygen_mole_fraction is not None and air_molar_mass is not None:
            return self.oxygen_demand / oxygen_mole_fraction * air_molar_mass
        if oxygen_mass_fraction is None or oxygen_mole_fraction is not None or air_molar_mass is not None:
            raise TypeError("give either oxygen_mass_fraction or both oxygen_mole_fraction and air_molar_mass")
        return self.oxygen_demand * formula.OXYGEN_MOLAR_MASS / oxygen_mass_fraction

    def saturation_pressure(self, temperature: float) -> float | None:
        """Return the vapour pressure [Pa] at ``temperature`` [K].

        None if no correlation is recorded or the temperature is at or above the critical one. Outside the
        correlation's range (``saturation.valid``) it extrapolates.
        """
        limit = float(self.vapour_limit(temperature))
        return None if math.isinf(limit) else limit

    def vapour_limit(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Vapour pressure [Pa] at ``temperature`` [K], of its shape; infinite where there is none, NaN for NaN."""
        T = np.asarray(temperature, dtype=float)
        if self.saturation is None:
            return np.where(np.isnan(T), np.nan, np.inf)
        with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
            value = self.saturation.pressure(T)
        return value if self.critical_temperature is None else np.where(self.critical_temperature <= T, np.inf, value)

    def is_liquid(self, temperature: ArrayLike, pressure: ArrayLike) -> NDArray[np.bool_]:
        """Where it is liquid at ``temperature`` [K] and ``pressure`` [Pa]; shapes broadcast. See :meth:`phase`."""
        T, p = np.broadcast_arrays(np.asarray(temperature, dtype=float), np.asarray(pressure, dtype=float))
        if self.latent_heat is None or self.always_liquid:
            return np.full(T.shape, self.always_liquid and self.latent_heat is not None)
        return np.asarray(p >= self.vapour_limit(T))

    def phase(self, temperature: float, pressure: float) -> str:
        """Return ``"liquid"`` or ``"gas"`` at ``temperature`` [K] and ``pressure`` [Pa].

        Liquid if the pressure is at or above the vapour pressure below the critical temperature. Commercial
        liquids count as liquid; a fuel without liquid data and anything above the critical temperature as gas.
        """
        return "liquid" if bool(self.is_liquid(temperature, pressure)) else "gas"

    @property
    def liquid_reference_pressure(self) -> float:
        """Pressure [Pa] where the pressure term is zero: 101 325 Pa, or the vapour pressure at 298.15 K if higher."""
        if self.always_liquid:
            return REFERENCE_PRESSURE
        limit = self.saturation_pressure(REFERENCE_TEMPERATURE)
        return REFERENCE_PRESSURE if limit is None else max(limit, REFERENCE_PRESSURE)

    @property
    def liquid_volume(self) -> float | None:
        """Specific volume of the liquid [m3/kg] at 298.15 K and the reference pressure; None if never liquid here."""
        if self.density is None or self.density_temperature is None:
            return None
        span = self.density_temperature - REFERENCE_TEMPERATURE
        return 1.0 / (self.density * (1.0 + (self.expansivity or 0.0) * span))

    def liquid_enthalpy(self, temperature: ArrayLike, pressure: ArrayLike) -> NDArray[np.float64]:
        """Enthalpy of the supplied liquid relative to its ideal-gas vapour at 298.15 K.

        ``h = -latent_heat + cp (T - 298.15) + v (1 - beta T)(p - p0)``. The volume is linear in temperature, so
        ``v (1 - beta T)`` (v and beta at T) equals ``v0 (1 - beta0 * 298.15)`` at every T: this goes with a
        constant cp, and is closer to reference equations than constant v and beta. With ``pressure_terms``
        (liquids under pressure) the last term is ``a (p - p0) + b (p - p0)^2``.

        Parameters
        ----------
        temperature, pressure : supply state [K], [Pa]; any shapes that broadcast.

        Returns
        -------
        J/kg, broadcast shape.

        Valid range: 280 to 353 K and up to 100 MPa (DME 50, n-butane 10), where it was measured against reference
        equations. Largest error there, kJ/kg: toluene 7, n-dodecane 9, n-heptane and n-octane 11, DME 9, methanol
        14, propane 19, ethanol 20 (7 of it the latent heat), ammonia 29; the formula is low at high pressure
        because real liquids stiffen. At 200 MPa n-dodecane is 11 (298 K) to 16 kJ/kg (353 K) low.

        Raises
        ------
        InputError : the fuel has no liquid data.
        """
        volume = self.liquid_volume
        if self.latent_heat is None or volume is None or self.liquid_cp is None:
            raise InputError(Problem(f"fuel {self.name!r} is never liquid here", hint="supply it as gas"))
        temperature, pressure = np.asarray(temperature, dtype=float), np.asarray(pressure, dtype=float)
        rise = pressure - self.liquid_reference_pressure
        if self.pressure_terms is None:
            push: Any = volume * (1.0 - (self.expansivity or 0.0) * REFERENCE_TEMPERATURE) * rise
        else:
            push = self.pressure_terms[0] * rise + self.pressure_terms[1] * rise * rise
        result: NDArray[np.float64] = self.liquid_cp * (temperature - REFERENCE_TEMPERATURE) + push - self.latent_heat
        return result

    def chemical_exergy(self, phase: str) -> float | None:
        """Return the chemical exergy [J/kg] of the ``"vapour"`` (``"gas"``) or ``"liquid"``; None if unsourced."""
        if phase not in ("vapour", "gas", "liquid"):
            allowed = "vapour, gas, liquid"
            raise InputError(Problem("no such phase", value=phase, allowed=allowed))
        return self.chemical_exergy_liquid if phase == "liquid" else self.chemical_exergy_vapour
