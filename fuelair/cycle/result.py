"""What a cycle model returns, and the figures every model shares.

All per-kg values are per kg of *trapped* gas; states are per kg of the gas present at that state.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fuelair.cycle.geometry import Volumes
from fuelair.gas.engine import Array, Codes, GasState, Mask, Status
from fuelair.gas.species import SpeciesTable

MODELS: tuple[str, ...] = (
    "air-cold",
    "air-variable",
    "fuel-air-complete",
    "fuel-air-frozen",
    "fuel-air-equilibrium",
    "fuel-air-real-gas",
)
"""Model ids in the order of the ladder, crudest first."""
REFERENCE_MODEL = "fuel-air-equilibrium"
REAL_MODEL = "fuel-air-real-gas"
FREEZE_MODEL = "fuel-air-freeze-below"
"""Headline when a freeze temperature is given; beside the ladder, not part of it."""
LEDGER_LIMIT = 1e-8
"""Relative residual above which a model's status says that its ledger is open."""


@dataclass(frozen=True, slots=True)
class Point:
    """A named state: gas state, and its mass per kg trapped (N,)."""

    name: str
    state: GasState
    mass: Array

    @property
    def volume(self) -> Array:
        """Volume per kg trapped [m3/kg]."""
        return np.asarray(self.mass * self.state.v)


@dataclass(frozen=True, slots=True)
class CycleResult:
    """One model over a batch of cases.

    Attributes
    ----------
    model : model id.
    table : species of the states; None for a gas without composition.
    points : named states in the order in which they are passed.
    figures : quantity key -> (N,) in SI.
    ledger : balance name -> relative residual (N,).
    flags : name -> (N,) bool: what a reader should know (limited, back-flow ...).
    status : per case.
    """

    model: str
    table: SpeciesTable | None
    points: tuple[Point, ...]
    figures: dict[str, Array]
    ledger: dict[str, Array]
    flags: dict[str, Mask]
    status: Codes

    def point(self, name: str) -> Point:
        """The named state; KeyError if this model has none of that name."""
        for one in self.points:
            if one.name == name:
                return one
        raise KeyError(f"{self.model} has no state {name!r}; it has {', '.join(p.name for p in self.points)}")

    def has(self, name: str) -> bool:
        """Whether this model passes a state of that name."""
        return any(one.name == name for one in self.points)


@dataclass(frozen=True, slots=True)
class WorkParts:
    """Work per kg trapped [J/kg]: taken by compression, given by the constant-pressure part and by expansion."""

    compression: Array
    burning: Array
    expansion: Array


def performance(
    *,
    trapped: GasState,
    volumes: Volumes,
    work: WorkParts,
    fuel_mass: Array,
    fuel_energy: Array,
    intake_pressure: Array,
    exhaust_pressure: Array,
    four_stroke: bool,
) -> dict[str, Array]:
    """Work, mean pressures, efficiency and consumption (N,) from the parts of the work.

    Parameters
    ----------
    fuel_mass, fuel_energy : supplied fuel and its lower heating value, per kg trapped [kg/kg], [J/kg].
    intake_pressure, exhaust_pressure : [Pa].

    Gross work lies between the dead centres of compression and expansion: exhaust pressure acts after
    exhaust opening and intake pressure before intake closing. Pumping mean pressure is positive as a loss,
    (p_e - p_i)(V_largest - V(exhaust closing)) / V_d, which is p_e - p_i when the exhaust closes at dead
    centre; two-stroke cycles have none.
    """
    per_volume = volumes.intake_closing / trapped.v  # kg trapped per m3 swept
    opened = exhaust_pressure * (volumes.largest - volumes.exhaust_opening)
    closing = intake_pressure * (volumes.largest - volumes.intake_closing)
    gross = work.burning + work.expansion - work.compression + (opened - closing) / per_volume
    imep = gross * per_volume
    pmep = (exhaust_pressure - intake_pressure) * (volumes.largest - volumes.exhaust_closing) if four_stroke else 0.0 * imep
    with np.errstate(divide="ignore", invalid="ignore"):
        return {
            "work_J_per_kg": gross,
            "heat_supplied_J_per_kg": fuel_energy,
            "imep_gross_Pa": imep,
            "pmep_Pa": pmep,
            "imep_net_Pa": imep - pmep,
            "indicated_efficiency": gross / fuel_energy,
            "isfc_kg_per_J": fuel_mass / gross,
        }


EXCHANGE_FIGURES = ("exhaust_temperature_K", "blowdown_temperature_K", "residual_fraction", "blowdown_energy_J_per_kg")
"""Figures of `state_figures` that the gas exchange makes; the closed part has all others."""


def state_figures(points: tuple[Point, ...], *, cutoff_ratio: Array, heat_added: Array, blowdown: Array) -> dict[str, Array]:
    """Figures read off the named states (N,); heat and blowdown energy in J/kg trapped."""
    at = {p.name: p for p in points}
    compressed, burned, release = (at[k].state for k in ("compressed", "burned", "release"))
    return closed_figures(compressed, burned, release, cutoff_ratio=cutoff_ratio, heat_added=heat_added) | {
        "exhaust_temperature_K": at["exhaust"].state.T,
        "blowdown_temperature_K": at["blown-down"].state.T,
        "residual_fraction": at["blown-down"].mass,
        "blowdown_energy_J_per_kg": blowdown,
    }


def closed_figures(
    compressed: GasState, burned: GasState, release: GasState, *, cutoff_ratio: Array, heat_added: Array
) -> dict[str, Array]:
    """Those of them that the closed part of the cycle has."""
    return {
        "compression_temperature_K": compressed.T,
        "compression_pressure_Pa": compressed.p,
        "peak_temperature_K": burned.T,
        "peak_pressure_Pa": burned.p,
        "release_temperature_K": release.T,
        "release_pressure_Pa": release.p,
        "cutoff_ratio": cutoff_ratio,
        "heat_added_J_per_kg": heat_added,
    }


def closed(status: Codes, ledger: dict[str, Array]) -> Codes:
    """Status with ``LEDGER_OPEN`` where an otherwise good case does not close."""
    out = status.copy()
    for residual in ledger.values():
        out[(out == Status.OK) & ~(np.abs(residual) <= LEDGER_LIMIT)] = Status.LEDGER_OPEN
    return out
