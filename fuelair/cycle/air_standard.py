"""The air-standard companions: the same trapped state, ratio and fuel energy, air alone.

``air-cold`` has constant specific heats (k and R are inputs); ``air-variable`` integrates the specific
heat of dry air exactly, which equals the relative-pressure tables without their rounding. Energy is
added to air as heat, per kg of trapped gas as much as the fuel releases; so every difference to a
fuel-air model is a difference of the model.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from fuelair.air import DryAir
from fuelair.charge import Charge
from fuelair.cycle.breathing import Settings
from fuelair.cycle.result import CycleResult, Point, WorkParts, closed, performance, state_figures
from fuelair.gas.engine import Array, Codes, Engine, GasState, Mask, Pair, Status, worst
from fuelair.gas.species import build

COLD_K, COLD_R = 1.4, 287.05
"""Defaults of the cold-air model: ratio of specific heats [-], gas constant [J/(kg K)] (ISO 2533: 287.05287)."""

StateOf = Callable[[Pair, Array, Array], GasState]


@dataclass(frozen=True, slots=True)
class ColdAir:
    """Perfect gas with constant specific heats; entropy zero at 298.15 K and 101 325 Pa, energy zero at 0 K."""

    k: float = COLD_K
    gas_constant: float = COLD_R

    def __call__(self, pair: Pair, x: Array, y: Array) -> GasState:
        """State from a pair, as the gas engines give it (composition empty)."""
        r, cv = self.gas_constant, self.gas_constant / (self.k - 1.0)
        cp = cv + r
        t0, p0 = 298.15, 101325.0
        with np.errstate(invalid="ignore", over="ignore", divide="ignore"):
            if pair[0] == "T":
                T = np.asarray(x, float)
            elif pair == "HP":
                T = x / cp
            elif pair == "UV":
                T = x / cv
            elif pair == "SP":
                T = t0 * np.exp((x + r * np.log(y / p0)) / cp)
            elif pair == "SV":
                T = t0 * np.exp((x - r * np.log(y * p0 / (r * t0))) / cv)
            else:
                raise ValueError(f"pair {pair} is not offered by the cold-air model")
            p = r * T / y if pair[1] == "V" else np.asarray(y, float)
            s = cp * np.log(T / t0) - r * np.log(p / p0)
        n = len(T)
        bad = ~(T > 0.0) | ~(p > 0.0)
        status = np.where(bad, Status.NO_SOLUTION, Status.OK).astype(np.int8)
        return GasState(
            T=T,
            p=p,
            v=r * T / p,
            u=cv * T,
            h=cp * T,
            s=s,
            cp=np.full(n, cp),
            sound=np.sqrt(np.abs(self.k * r * T)),
            amounts=np.zeros((n, 0)),
            status=status,
            iterations=np.zeros(n, np.int32),
        )


def variable_air(engine: Engine, air: DryAir) -> StateOf:
    """State function of dry air with its own specific heat, frozen composition."""
    table = build()
    amounts = table.amounts({k: v for k, v in air.composition().items() if v > 0.0})

    def state(pair: Pair, x: Array, y: Array) -> GasState:
        return engine.state(table, pair, x, y, np.tile(amounts, (len(x), 1)))

    return state


def run(
    model: str,
    state: StateOf,
    charge: Charge,
    settings: Settings,
    *,
    heat: Array | None = None,
    cutoff_ratio: Array | None = None,
) -> CycleResult:
    """Run an air-standard cycle beside a charge.

    Parameters
    ----------
    model : id for the result.
    state : state function of the air (`ColdAir` or `variable_air`).
    heat : energy added [J/kg trapped]; default the fuel energy that burns.
    cutoff_ratio : V3 / V2 of the constant-pressure part instead of the heat [-].

    Returns
    -------
    CycleResult; figures as for the fuel-air models. Efficiency is work over the fuel energy supplied
    (over the heat added when ``cutoff_ratio`` or ``heat`` is given).
    """
    volumes = settings.volumes
    own = heat is not None or cutoff_ratio is not None
    q = charge.heat_added if heat is None else heat
    start = state("TP", charge.trapped.T, charge.trapped.p)
    compressed, taken, exchanged = _compress(state, start, settings)
    burned, limited, q, status = _burn(state, compressed, settings, q, cutoff_ratio)
    release = state("SV", burned.s, start.v * volumes.exhaust_opening / volumes.intake_closing)
    remaining, leaving, stays, leaves, available = _exhaust(state, start, release, charge, settings)
    work = WorkParts(taken, np.where(limited, burned.p * (burned.v - compressed.v), 0.0), burned.u - release.u)
    is_limited = limited & (settings.heat_addition == "pressure-limited")
    one = np.ones(len(charge.recipe))
    points = [Point("trapped", start, one), Point("compressed", compressed, one)]
    if is_limited.any():
        heated = np.where(is_limited, compressed.T * settings.pressure_limit / compressed.p, np.nan)
        points.append(Point("limit", state("TV", heated, compressed.v), one))
    points += [Point("burned", burned, one), Point("release", release, one)]
    points += [Point("blown-down", remaining, stays), Point("exhaust", leaving, leaves)]
    energy = charge.fuel_mass * charge.lower_heating_value
    supplied = q if own else energy
    figures = performance(
        trapped=start,
        volumes=volumes,
        work=work,
        fuel_mass=charge.fuel_mass * supplied / energy,
        fuel_energy=supplied,
        intake_pressure=settings.intake_pressure,
        exhaust_pressure=settings.exhaust_pressure,
        four_stroke=settings.four_stroke,
    )
    cutoff = np.where(limited, burned.v / compressed.v, 1.0)
    figures |= state_figures(tuple(points), cutoff_ratio=cutoff, heat_added=q, blowdown=available)
    figures["compression_heat_J_per_kg"] = exchanged
    scale = np.maximum(np.abs(q), 1e3)
    ledger = {
        "energy_closed_part": (start.u + exchanged + q - release.u + work.compression - work.burning - work.expansion) / scale
    }
    status = worst(charge.status, status, *(s.status for s in (start, compressed, burned, release, remaining, leaving)))
    return CycleResult(
        model,
        None,
        tuple(points),
        figures,
        ledger,
        {"limited": is_limited, "back-flow": release.p < settings.exhaust_pressure},
        closed(status, ledger),
    )


def _compress(state: StateOf, start: GasState, settings: Settings) -> tuple[GasState, Array, Array]:
    """Compressed state, work taken and heat taken in [J/kg]."""
    ratio, exponent = settings.volumes.effective_compression, settings.compression_exponent
    if exponent is None:
        end = state("SV", start.s, start.v / ratio)
        return end, end.u - start.u, np.zeros_like(ratio)
    end = state("TP", start.T * ratio ** (exponent - 1.0), start.p * ratio**exponent)
    work = (end.p * end.v - start.p * start.v) / (exponent - 1.0)
    return end, work, end.u - start.u - work


def _burn(
    state: StateOf, compressed: GasState, settings: Settings, q: Array, cutoff_ratio: Array | None
) -> tuple[GasState, Mask, Array, Codes]:
    """Burned state, where the constant-pressure part exists, heat added, status."""
    n, limit = len(q), settings.pressure_limit
    status = np.zeros(n, np.int8)
    all_ = np.ones(n, np.bool_)
    if settings.heat_addition == "pressure-limited":
        status[compressed.p > limit] = Status.LIMIT_BELOW_COMPRESSION
    if cutoff_ratio is not None:
        p3 = limit if settings.heat_addition == "pressure-limited" else compressed.p
        v3 = compressed.v * cutoff_ratio
        burned = state("TP", p3 * v3 * compressed.T / (compressed.p * compressed.v), p3)
        return burned, all_, burned.u - compressed.u + p3 * (v3 - compressed.v), status
    if settings.heat_addition == "constant-pressure":
        return state("HP", compressed.h + q, compressed.p), all_, q, status
    burned = state("UV", compressed.u + q, compressed.v)
    if settings.heat_addition == "constant-volume":
        return burned, ~all_, q, status
    limited = burned.p > limit
    held = state(
        "HP", np.where(limited, compressed.u + q + limit * compressed.v, compressed.h), np.where(limited, limit, compressed.p)
    )
    chosen = {k: np.where(limited, getattr(held, k), getattr(burned, k)) for k in ("T", "p", "v", "u", "h", "s", "cp", "sound")}
    both = GasState(
        amounts=burned.amounts,
        status=np.where(limited, held.status, burned.status).astype(np.int8),
        iterations=burned.iterations,
        **chosen,
    )
    return both, limited, q, status


def _exhaust(
    state: StateOf, start: GasState, release: GasState, charge: Charge, settings: Settings
) -> tuple[GasState, GasState, Array, Array, Array]:
    """Blowdown by the same balances as the fuel-air cycle, with the charge's own residual mass."""
    p_e = settings.exhaust_pressure
    remaining = state("SP", release.s, p_e)
    stays = charge.residual_fraction
    v4 = start.v * settings.volumes.exhaust_opening / settings.volumes.intake_closing
    with np.errstate(divide="ignore", invalid="ignore"):
        h_e = (release.u - stays * remaining.u + p_e * (v4 - stays * remaining.v)) / (1.0 - stays)
    leaving = state("HP", h_e, p_e)
    available = release.u - remaining.u - p_e * (remaining.v - v4)
    return remaining, leaving, stays, 1.0 - stays, np.where(release.p < p_e, 0.0, available)
