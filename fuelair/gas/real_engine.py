"""The real-gas engine behind the same seam: ideal polynomials plus the residual functions of `real_gas`.

Equilibrium runs through the generic Newton of `gibbs.py`, since Cantera cannot carry a home-made
equation of state in its equilibrium. Every answer ends in a state of fixed composition that meets the
given pair exactly, as with the ideal engine.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from fuelair.gas.complete import composition, oxygen_excess, solid_carbon
from fuelair.gas.engine import PRESSURE_LIMIT_OF_DATA, Array, Chemistry, GasState, Mask, Pair, Status, total
from fuelair.gas.frozen import frozen_state
from fuelair.gas.gibbs import Departure, equilibrate
from fuelair.gas.mixture import Mixture, mix
from fuelair.gas.polynomials import R
from fuelair.gas.real_gas import Residual, VirialTable, density, residual, valid, virial_table
from fuelair.gas.species import SpeciesTable

TOLERANCE = 1e-14
STALL = 1e-11
"""Relative change of the unknown at which a search is done; the second when it no longer shrinks."""
ACCEPTED = 1e-9
"""Step that the property of a pair may still ask for, and distance of the equilibrium's own temperature."""
MAX_ITERATIONS = 80
WATER_GAS_STEPS = 60
WATER_GAS_START = 2000.0
WATER_GAS_TOLERANCE = 1e-13


@dataclass(frozen=True, slots=True)
class _Point:
    """All properties at (T, v), arrays (N,): the building block of every search."""

    T: Array
    v: Array
    p: Array
    u: Array
    h: Array
    s: Array
    cv: Array
    cp: Array
    ds_dv_v: Array
    sound: Array


class RealGas:
    """Reference engine of the real gas. Stateless for its caller: equal calls give equal bits."""

    name = "reference-real"

    def __init__(self, fuel_fluid: str | None = None) -> None:
        self.fuel_fluid = fuel_fluid

    def state(
        self, table: SpeciesTable, pair: Pair, x: Array, y: Array, amounts: Array, chemistry: Chemistry = "frozen",
        guess: Array | None = None,
    ) -> GasState:  # fmt: skip
        """States of a batch; see `fuelair.gas.engine.Engine.state`. ``guess`` is not needed and not used."""
        x, y = (np.array(a, float) for a in np.broadcast_arrays(x, y))
        amounts = np.array(amounts, dtype=float)
        empty = ~(total(amounts) > 0.0)  # a stream without mass, or NaN: computed as nitrogen, told by its status
        if empty.any():
            nitrogen = table.amounts({"N2": 1.0})
            state = self.state(table, pair, np.where(empty, np.nan, x), y, np.where(empty[:, None], nitrogen, amounts), chemistry)
            state.amounts[empty] = amounts[empty]
            return state
        gas = virial_table(table, self.fuel_fluid)
        if chemistry == "frozen":
            return _fixed(table, gas, pair, x, y, amounts)
        if chemistry == "complete":
            return _complete(table, gas, pair, x, y, amounts)
        return _equilibrium(table, gas, pair, x, y, amounts)


def _equilibrium(table: SpeciesTable, gas: VirialTable, pair: Pair, x: Array, y: Array, amounts: Array) -> GasState:
    allowed = np.tile(table.forms, (len(x), 1))
    refused = solid_carbon(table, amounts)

    def departure(T: Array, size: Array, n: Array, at_pressure: bool) -> Departure:
        return _departure(gas, T, size, n, at_pressure)

    found = equilibrate(table, pair, x, y, amounts, allowed, departure=departure)
    state = _fixed(table, gas, pair, x, y, found.amounts, start=found.T)
    status = state.status.copy()
    apart = np.abs(found.T / state.T - 1.0) > 10.0 * ACCEPTED  # the equilibrium must be that of the state itself
    status[found.failed | (apart & (status == Status.OK))] = Status.NO_SOLUTION
    status[refused] = Status.CARBON_OVER_OXYGEN
    bad = (status == Status.NO_SOLUTION) | refused
    fields = {k: np.where(bad, np.nan, getattr(state, k)) for k in ("T", "p", "v", "u", "h", "s", "cp", "sound")}
    return GasState(amounts=found.amounts, status=status, iterations=found.iterations, **fields)


def _complete(table: SpeciesTable, gas: VirialTable, pair: Pair, x: Array, y: Array, amounts: Array) -> GasState:
    """Complete combustion; when rich the water-gas composition follows the state's temperature."""
    T = np.full(len(x), WATER_GAS_START)
    burned, short = composition(table, amounts, T)
    state = _fixed(table, gas, pair, x, y, burned)
    active = (oxygen_excess(table, amounts) < 0.0) & np.isfinite(state.T)
    previous = np.full(len(x), np.inf)
    for _ in range(WATER_GAS_STEPS):
        if not active.any():
            break
        T = np.where(active, state.T, T)  # what has converged is held: no case follows its neighbours
        burned, short = composition(table, amounts, T)
        state = _fixed(table, gas, pair, x, y, burned)
        size = np.abs(state.T / T - 1.0)
        active &= (size > WATER_GAS_TOLERANCE) & ~((size <= STALL) & (size >= previous))  # False for NaN
        previous = size
    state.status[active] = Status.NO_SOLUTION
    state.status[short] = Status.OXYGEN_BELOW_CARBON_MONOXIDE
    return state


def _departure(gas: VirialTable, T: Array, size: Array, amounts: Array, at_pressure: bool) -> Departure:
    whole = total(amounts)
    x = amounts / whole[:, None]
    with np.errstate(invalid="ignore"):
        rho = density(gas, T, size, x) if at_pressure else whole / size
        r = residual(gas, T, rho, x)
    cp = r.cv + (r.Z + r.dZ_dT_T) ** 2 / (r.Z + r.dZ_drho_rho) - 1.0
    if not at_pressure:
        return Departure(Z=r.Z, mu=r.mu, u=r.u, h=r.h, s=r.s, cv=r.cv, cp=cp)
    log_z = np.log(r.Z)
    return Departure(Z=r.Z, mu=r.mu - log_z[:, None], u=r.u, h=r.h, s=r.s + log_z, cv=r.cv, cp=cp)


def _fixed(
    table: SpeciesTable, gas: VirialTable, pair: Pair, x: Array, y: Array, amounts: Array, start: Array | None = None
) -> GasState:
    """State of fixed composition from any pair."""
    mixture = mix(table, amounts)
    fractions = amounts / mixture.moles[:, None]
    ideal = frozen_state(table, pair, x, y, amounts)
    T = np.where(np.isfinite(ideal.T), ideal.T, 1000.0) if start is None else start.copy()
    point, iterations, failed = _search(mixture, gas, fractions, pair, x, y, T)
    status = np.zeros(len(x), np.int8)
    outside = (mixture.t_min > point.T) | (mixture.t_max < point.T) | ~(point.p <= PRESSURE_LIMIT_OF_DATA) | ~(point.p > 0.0)
    with np.errstate(invalid="ignore"):
        claimed = valid(gas, point.T, mixture.moles / point.v, fractions)
    status[outside | ~claimed] = Status.OUTSIDE_DATA
    status[failed] = Status.NO_SOLUTION
    fields = {k: np.where(failed, np.nan, getattr(point, k)) for k in ("T", "p", "v", "u", "h", "s", "cp", "sound")}
    return GasState(amounts=amounts, status=status, iterations=iterations, **fields)


def _search(
    mixture: Mixture, gas: VirialTable, fractions: Array, pair: Pair, x: Array, y: Array, T: Array
) -> tuple[_Point, npt.NDArray[np.int32], Mask]:
    """Newton on the unknown of the pair: ln T (density follows the volume or the pressure), or ln v for ST."""
    n = mixture.moles
    finite = np.isfinite(x) & np.isfinite(y) & (y > 0.0)
    safe_x, safe_y = np.where(finite, x, 1.0), np.where(finite, y, 1.0)
    finite &= (x > 0.0) if pair[0] == "T" else True
    if pair[0] == "T":
        T = np.where(finite, x, 1000.0)
    if pair == "ST":
        T = np.where(finite, y, 1000.0)

    def volume(t: Array) -> Array:
        if pair[1] != "P":
            return safe_y
        with np.errstate(invalid="ignore"):  # as in `_at`
            return np.asarray(n / density(gas, t, safe_y, fractions))

    log_v = np.log(n * R * T / 5e6)
    active, done = finite & (pair[0] != "T"), np.zeros(len(T), np.int32)
    previous = np.full(len(T), np.inf)
    point = _at(mixture, gas, fractions, T, np.exp(log_v) if pair == "ST" else volume(T))
    for _ in range(MAX_ITERATIONS):
        if not active.any():
            break
        step = _step(point, pair, safe_x)
        size = np.abs(step)
        if pair == "ST":
            log_v = np.where(active, log_v + step, log_v)
        else:
            T = np.where(active, np.clip(T * np.exp(step), 50.0, 12000.0), T)
        done += active
        active &= ~((size <= TOLERANCE) | ((size <= STALL) & (size >= previous))) & np.isfinite(size)
        previous = size
        point = _at(mixture, gas, fractions, T, np.exp(log_v) if pair == "ST" else volume(T))
    met = np.ones(len(T), np.bool_) if pair[0] == "T" else np.abs(_step(point, pair, safe_x)) <= ACCEPTED
    return point, done, ~finite | active | ~np.isfinite(point.p) | ~met


def _step(point: _Point, pair: Pair, x: Array) -> Array:
    """Newton step of the unknown, ln T or for ST ln v, towards the first property of the pair."""
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        if pair == "ST":
            step = (x - point.s) / point.ds_dv_v
        elif pair[0] == "S":
            step = (x - point.s) / (point.cp if pair[1] == "P" else point.cv)
        else:
            value, slope = (point.h, point.cp) if pair == "HP" else (point.u, point.cv)
            step = np.log1p(np.clip((x - value) / (slope * point.T), -0.6, 1.5))
    return np.asarray(np.clip(step, -1.0, 1.0))


def _at(mixture: Mixture, gas: VirialTable, fractions: Array, T: Array, v: Array) -> _Point:
    """Every property at temperature and specific volume."""
    n = mixture.moles
    with np.errstate(invalid="ignore"):  # far outside the fits C may turn negative: the NaN becomes a status
        r: Residual = residual(gas, T, n / v, fractions, potentials=False)
    cp0, h0, s0 = mixture.thermal(T)
    rt = R * n * T
    p_ideal = rt / v
    p = r.Z * p_ideal
    u = h0 - rt + rt * r.u
    with np.errstate(divide="ignore", invalid="ignore"):
        s = s0 - R * n * np.log(p_ideal / mixture.reference_pressure) + R * n * r.s
        cv = cp0 - R * n + R * n * r.cv
        slope = r.Z + r.dZ_drho_rho  # (dp/drho) over RT
        cp = cv + R * n * (r.Z + r.dZ_dT_T) ** 2 / slope
        sound = np.sqrt(np.abs(cp / cv * rt * slope))
    return _Point(
        T=T, v=v, p=p, u=u, h=u + p * v, s=s, cv=cv, cp=cp, ds_dv_v=R * n * (r.Z + r.dZ_dT_T), sound=sound,
    )  # fmt: skip
