"""The result of the main job: one frozen record with tables and a plain dictionary for JSON."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from fuelair.air import STANDARD_PRESSURE, Ambient
from fuelair.case import Case
from fuelair.charge import Charge, enters_as_liquid
from fuelair.cycle.exergy import ExergyBalance
from fuelair.cycle.ladder import Step
from fuelair.cycle.result import CycleResult
from fuelair.errors import InputError, Problem
from fuelair.fuel import Fuel
from fuelair.gas.engine import Status
from fuelair.gas.polynomials import R
from fuelair.sources import Source

if TYPE_CHECKING:
    import pandas as pd

FORMAT = 1
"""Version of the JSON layout."""
SMALLEST_FRACTION = 1e-12
"""Mole fractions below this are left out of the states in JSON."""


@dataclass(frozen=True, slots=True)
class Assessment:
    """A case through every cycle model. SI throughout; per-kg figures are per kg trapped.

    Attributes
    ----------
    case, fuel, ambient, charge : what was asked, and what was trapped.
    headline : model id of the verdict.
    results : model id -> result, crudest first.
    companions : basis -> model id -> air-standard result on that basis.
    ladder, overprediction : see `fuelair.cycle.ladder`.
    exergy : balance of the headline model.
    engine_figures, exhaust_figures : weekly outputs; None where the case does not say enough.
    flame_temperature : stoichiometric flame at compression pressure [K], or None.
    second_opinion : compression pressure by Peng-Robinson [Pa], None where it cannot say.
    swept_volume : of one cylinder [m3], or None.
    engine, versions : gas engine and versions used.
    warnings, sources, verdict : what to mind, what it rests on, one sentence.
    """

    case: Case
    fuel: Fuel
    ambient: Ambient
    charge: Charge
    headline: str
    results: dict[str, CycleResult]
    companions: dict[str, dict[str, CycleResult]]
    ladder: tuple[Step, ...]
    overprediction: dict[str, dict[str, dict[str, float | None]]]
    exergy: ExergyBalance
    engine_figures: dict[str, float | None]
    exhaust_figures: dict[str, float | None]
    flame_temperature: float | None
    second_opinion: float | None
    swept_volume: float | None
    engine: str
    versions: dict[str, str]
    warnings: tuple[str, ...]
    sources: tuple[Source, ...]
    verdict: str

    def figures(self, model: str | None = None) -> dict[str, float | None]:
        """Figures of a model (default the headline), None where it was not solved.

        Raises InputError for a model that is not there.
        """
        result = self._result(model)
        good = result.status[0] == Status.OK
        return {k: _number(v[0]) if good else None for k, v in result.figures.items()}

    def status(self, model: str | None = None) -> Status:
        """How a model ended."""
        return Status(int(self._result(model).status[0]))

    def _result(self, model: str | None) -> CycleResult:
        name = self.headline if model is None else model
        if name not in self.results:
            raise InputError(Problem("no such model", "model", name, ", ".join(self.results)))
        return self.results[name]

    def table(self) -> pd.DataFrame:
        """Models as rows, quantities (SI, unit in the name) as columns, NaN where not solved."""
        import pandas as pd

        rows = {m: {"status": self.status(m).label, **self.figures(m)} for m in self.results}
        return pd.DataFrame.from_dict(rows, orient="index").rename_axis("model")

    def states(self, model: str | None = None) -> pd.DataFrame:
        """Named states of a model as rows: T, p, v, u, h, s, V, mass and mole fractions (SI)."""
        import pandas as pd

        rows = [flat_state(s) for s in self.to_states(model)]
        return pd.DataFrame(rows).set_index("state")

    def to_states(self, model: str | None = None) -> list[dict[str, Any]]:
        """Named states of a model (default the headline) as dictionaries, SI; mole fractions where there are any."""
        result = self._result(model)
        if self.charge.status[0] != Status.OK:
            return []
        scale = None if self.swept_volume is None else self.engine_figures["trapped_mass_kg"]
        out = []
        for point in result.points:
            s = point.state
            row: dict[str, Any] = {
                "state": point.name,
                "T_K": _number(s.T[0]),
                "p_Pa": _number(s.p[0]),
                "v_m3_per_kg": _number(s.v[0]),
                "u_J_per_kg": _number(s.u[0]),
                "h_J_per_kg": _number(s.h[0]),
                "s_J_per_kgK": _number(s.s[0]),
                "mass_per_trapped": _number(point.mass[0]),
                "V_m3": None if scale is None else _number(point.volume[0] * scale),
                "mass_kg": None if scale is None else _number(point.mass[0] * scale),
            }
            if result.table is not None:
                x = s.mole_fractions()[0]
                row["mole_fractions"] = {
                    n: float(v) for n, v in zip(result.table.names, x, strict=True) if v >= SMALLEST_FRACTION
                }
            out.append(row)
        return out

    def charge_figures(self) -> dict[str, float | None]:
        """Make-up of the trapped charge."""
        c, recipe = self.charge, self.charge.recipe
        fresh = float(c.dry_air[0] + c.water_in[0])
        return {
            "equivalence_ratio": _number(recipe.equivalence_ratio[0]),
            "excess_air_ratio": _number(1.0 / recipe.equivalence_ratio[0]),
            "air_fuel_ratio": _number(recipe.stoichiometric_air_fuel_ratio / recipe.equivalence_ratio[0]),
            "stoichiometric_air_fuel_ratio": recipe.stoichiometric_air_fuel_ratio,
            "oxygen_excess_ratio": _number(c.oxygen_excess_ratio()[0]),
            "trapped_O2_mole_fraction": _number(c.trapped_oxygen()[0]),
            "trapped_temperature_K": _number(c.trapped.T[0]),
            "trapped_pressure_Pa": _number(c.trapped.p[0]),
            "residual_fraction": _number(c.residual_fraction[0]),
            "egr_fraction": _number(recipe.egr_fraction[0]),
            "fuel_per_trapped_mass": _number(c.fuel_mass[0]),
            "fresh_air_per_trapped_mass": fresh,
            "recirculated_per_trapped_mass": _number(c.recirculated[0]),
            "humidity_ratio": _number(recipe.humidity[0]),
            "water_added_per_trapped_mass": _number(c.water_added[0]),
            "drained_water_per_dry_air": _number(c.drained_water[0]),
            "receiver_dew_point_K": _number(c.receiver_dew_point[0]),
            "fuel_vapour_saturation_ratio": _number(c.saturation_ratio[0]),
            "heat_added_J_per_kg": _number(c.heat_added[0]),
            "lower_heating_value_J_per_kg": _number(c.lower_heating_value[0]),
            "lower_heating_value_other_phase_J_per_kg": _number(self.other_heating_value),
            "fuel_pump_work_J_per_kg_fuel": _number(self.pump_work),
            "wall_heat_J_per_kg": _number(c.wall_heat[0]),
            "ambient_pressure_Pa": self.ambient.pressure,
            "ambient_temperature_K": self.ambient.temperature,
            "ambient_relative_humidity": self.ambient.relative_humidity,
        }

    @property
    def liquid_fuel(self) -> bool:
        """Whether the fuel enters as liquid, so that its heating value is that of the liquid."""
        return bool(enters_as_liquid(self.charge.recipe)[0])

    @property
    def other_heating_value(self) -> float | None:
        """Lower heating value on the basis that is not used [J/kg]; None if the fuel has only one."""
        return self.fuel.lower_heating_value_vapour if self.liquid_fuel else self.fuel.lower_heating_value_liquid

    @property
    def pump_work(self) -> float | None:
        """Least work to press the fuel to the injector [J/kg fuel]; None if it is not injected.

        v (p - p0) for a liquid, R T ln(p/p0) for a gas, from its reference pressure or one atmosphere; a line of
        its own, not deducted from the indicated efficiency.
        """
        recipe, volume = self.charge.recipe, self.fuel.liquid_volume
        pressure = float(recipe.fuel_pressure[0])
        if recipe.admission == "premixed":
            return None
        if self.liquid_fuel and volume is not None:
            return max(volume * (pressure - self.fuel.liquid_reference_pressure), 0.0)
        work = R / self.fuel.molar_mass * float(recipe.fuel_temperature[0]) * math.log(pressure / STANDARD_PRESSURE)
        return max(work, 0.0)

    def exergy_figures(self) -> dict[str, Any]:
        """Exergy balance in J per kg trapped, and the fuel's exergy basis."""
        e = self.exergy
        names = (
            "fuel",
            "trapped",
            "burned",
            "release",
            "work",
            "indicated_work",
            "destroyed_by_entropy",
            "destroyed_by_balance",
            "leaving",
            "remaining",
            "destroyed_blowdown",
        )
        out: dict[str, Any] = {f"{k}_J_per_kg": _number(getattr(e, k)[0]) for k in names}
        out["fuel_J_per_kg_fuel"] = _number(e.fuel_per_kg[0])
        out["destroyed_share_of_fuel"] = _number(e.destroyed_by_entropy[0] / e.fuel[0])
        out["fuel_basis"] = "Szargut-Styrylo ratio" if e.from_correlation else "species data"
        return out

    def to_dict(self) -> dict[str, Any]:
        """Everything as plain numbers, text, lists and dictionaries; null where there is no figure."""
        return {
            "format": FORMAT,
            "versions": dict(self.versions),
            "engine": self.engine,
            "headline": self.headline,
            "verdict": self.verdict,
            "case": self.case.resolved(),
            "defaulted": sorted(self.case.defaulted),
            "charge": self.charge_figures(),
            "models": {m: self._model(m) for m in self.results},
            "companions": {
                basis: {
                    m: {"status": Status(int(r.status[0])).label}
                    | {k: _number(v[0]) if r.status[0] == Status.OK else None for k, v in r.figures.items()}
                    for m, r in group.items()
                }
                for basis, group in self.companions.items()
            },
            "states": {m: self.to_states(m) for m in self.results},
            "ladder": [{"from": s.lower, "to": s.upper, "assumption": s.assumption, **s.change} for s in self.ladder],
            "overprediction": self.overprediction,
            "exergy": self.exergy_figures(),
            "second_opinion": {"peng_robinson_compression_pressure_Pa": self.second_opinion},
            "engine_figures": self.engine_figures,
            "exhaust": {**self.exhaust_figures, "stoichiometric_flame_temperature_K": self.flame_temperature},
            "ledger": {m: {k: _number(v[0]) for k, v in r.ledger.items()} for m, r in self.results.items()},
            "warnings": list(self.warnings),
            "sources": [{"key": s.key, "reference": s.reference, "standing": s.standing} for s in self.sources],
        }

    def _model(self, model: str) -> dict[str, Any]:
        status, result = self.status(model), self.results[model]
        return {
            "status": status.label,
            "reason": status.reason,
            **self.figures(model),
            "flags": sorted(k for k, v in result.flags.items() if bool(v[0])),
        }


def flat_state(state: dict[str, Any]) -> dict[str, Any]:
    """A state with its mole fractions as columns ``x_NAME`` of their own."""
    rest = {k: v for k, v in state.items() if k != "mole_fractions"}
    return rest | {f"x_{k}": v for k, v in state.get("mole_fractions", {}).items()}


def _number(value: Any) -> float | None:
    return None if value is None or not math.isfinite(value) else float(value)
