"""Blowdown, exhaust, residual gas, and the fixed point of gas exchange.

Source: first law for the gas that stays and the gas that leaves (Heywood 1988 ch. 5 has the same
balances for constant specific heats, from memory):

    m_e h_e = m4 u4 - m6 u6 + p_e (V4 - V6),    m6 = p_e V6 / (R6 T6)
    m1 h1   = m_i h_i + m6 [h6 + v6 (p_i - p_e)]
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from fuelair.charge import BurnedGas, Charge, Recipe, compose
from fuelair.cycle.geometry import Volumes
from fuelair.cycle.stages import HeatAddition, choose, freeze_composition
from fuelair.gas.complete import composition
from fuelair.gas.engine import Array, Engine, GasState, Mask, Status, total
from fuelair.gas.mixture import mix
from fuelair.gas.species import FUEL, SpeciesTable
from fuelair.roots import bracketed

if TYPE_CHECKING:
    from collections.abc import Callable

    from fuelair.cycle.result import CycleResult

DEFAULT_FREEZE = 1740.0
"""Temperature at which the composition of exhaust leaves equilibrium [K], common practice: the constant
water-gas ratio 3.5 used for exhaust analysis belongs to it."""
FIXED_POINT_TOLERANCE = 1e-12
FIXED_POINT_STEPS = 1500
FIRST_RESIDUAL, FIRST_RESIDUAL_TEMPERATURE = 0.03, 1000.0
"""Where the fixed point starts: residual fraction [-] and its temperature [K]."""
LEANEST, RICHEST = 1e-4, 1.0
"""Equivalence ratios between which a cut-off ratio is sought; it grows throughout."""
CUTOFF_WIDTH = 1e-13


@dataclass(frozen=True, slots=True)
class Settings:
    """How the cycle runs; arrays of shape (N,) in SI.

    Attributes
    ----------
    volumes : cylinder volumes over the swept volume.
    heat_addition, pressure_limit : way of combustion; limit [Pa], NaN if there is none.
    freeze_temperature : at which exhaust composition leaves equilibrium [K].
    residual : residual fraction given, or None: solved from exhaust pressure and volume.
    exhaust_pressure, intake_pressure : [Pa].
    swept_volume : of one cylinder [m3], NaN if unknown.
    four_stroke : whether pumping strokes exist.
    compression_exponent : polytropic exponents (N,), None for isentropic.
    """

    volumes: Volumes
    heat_addition: HeatAddition
    pressure_limit: Array
    freeze_temperature: Array
    residual: Array | None
    exhaust_pressure: Array
    intake_pressure: Array
    swept_volume: Array
    four_stroke: bool = True
    compression_exponent: Array | None = None


@dataclass(frozen=True, slots=True)
class Exhaust:
    """After exhaust opening, per kg trapped.

    Attributes
    ----------
    remaining : gas left in the cylinder at exhaust pressure.
    leaving : enthalpy mean of the gas that leaves, at exhaust pressure.
    remaining_mass, leaving_mass : per kg trapped.
    back_flow : where release pressure lies below exhaust pressure.
    blowdown_work : work an ideal expander could take from the blowdown to exhaust pressure [J/kg trapped].
    """

    remaining: GasState
    leaving: GasState
    remaining_mass: Array
    leaving_mass: Array
    back_flow: Mask
    blowdown_work: Array


def exhaust(
    engine: Engine,
    table: SpeciesTable,
    burned: GasState,
    release: GasState,
    *,
    mass: Array,
    trapped_volume: Array,
    settings: Settings,
    shifting: bool,
) -> Exhaust:
    """Blow down from ``release`` and mix what leaves.

    Parameters
    ----------
    burned, release : end of combustion and release, per kg present.
    mass : gas present per kg trapped; trapped_volume : specific volume at intake closing [m3/kg].
    shifting : whether the expansion shifted, so that composition has still to freeze. It then freezes
        as at ``settings.freeze_temperature``: gas released hotter shifts down to it, gas released
        colder takes the composition it had there, at the internal energy and volume of release.
    """
    p_e = settings.exhaust_pressure
    if shifting:
        frozen = freeze_composition(engine, table, burned, release, settings.freeze_temperature)
        start = engine.state(table, "UV", release.u, release.v, frozen)
        remaining = engine.state(table, "SP", start.s, p_e, frozen)
        hot = (settings.freeze_temperature < release.T) & np.isfinite(release.T)
        if hot.any():
            remaining = choose(hot, _shift_then_freeze(engine, table, release, hot, settings), remaining)
    else:
        remaining = engine.state(table, "SP", release.s, p_e, release.amounts)
    scale = trapped_volume / settings.volumes.intake_closing  # m3 per kg trapped and unit of swept volume
    v4 = settings.volumes.exhaust_opening * scale
    if settings.residual is None:
        stays = settings.volumes.exhaust_closing * scale / remaining.v
    else:
        stays = settings.residual * np.ones_like(mass)
    v6 = stays * remaining.v
    leaves = mass - stays
    with np.errstate(divide="ignore", invalid="ignore"):
        h_e = (mass * release.u - stays * remaining.u + p_e * (v4 - v6)) / leaves
    leaving = engine.state(table, "HP", h_e, p_e, remaining.amounts)
    back = release.p < p_e
    available = mass * (release.u - remaining.u) - p_e * (mass * remaining.v - v4)
    return Exhaust(remaining, leaving, stays, leaves, back, np.asarray(np.where(back, 0.0, available)))


def _shift_then_freeze(engine: Engine, table: SpeciesTable, release: GasState, hot: Mask, settings: Settings) -> GasState:
    """Isentropic blowdown that shifts down to the freeze temperature, then stays frozen."""
    entropy = np.where(hot, release.s, np.nan)
    p_e = settings.exhaust_pressure
    at = engine.state(table, "ST", entropy, settings.freeze_temperature, release.amounts, "equilibrium")
    frozen = engine.state(table, "SP", entropy, p_e, at.amounts)
    still_hot = at.p < p_e
    if not still_hot.any():
        return frozen
    shifting = engine.state(table, "SP", np.where(still_hot, entropy, np.nan), p_e, release.amounts, "equilibrium")
    return choose(still_hot, shifting, frozen)


def solve_charge(
    recipe: Recipe,
    engine: Engine,
    settings: Settings,
    run: Callable[[Charge], tuple[CycleResult, Exhaust]],
    *,
    fuel_mass: Array | None = None,
    cutoff_ratio: Array | None = None,
) -> Charge:
    """Trapped charge with residual and recirculated gas of its own cycle.

    Parameters
    ----------
    run : the headline cycle, charge -> (result, exhaust).
    fuel_mass : fuel per cylinder and cycle [kg] instead of the recipe's equivalence ratio.
    cutoff_ratio : V3 / V2 [-] instead of the recipe's equivalence ratio, up to a stoichiometric mixture.

    Elements are iterated independently; one that finds no fixed point gets ``NOT_CONVERGED``.
    """
    if cutoff_ratio is None:
        return _fixed_point(recipe, engine, settings, run, fuel_mass)

    def miss(phi: Array) -> Array:
        charge = _fixed_point(recipe.with_equivalence_ratio(phi), engine, settings, run, None)
        return np.asarray(run(charge)[0].figures["cutoff_ratio"] - cutoff_ratio)

    n = len(recipe)
    phi, found = bracketed(miss, np.full(n, LEANEST), np.full(n, RICHEST), width=CUTOFF_WIDTH)
    charge = _fixed_point(recipe.with_equivalence_ratio(phi), engine, settings, run, None)
    solvable = run(charge)[0].status == Status.OK  # else the cycle's own status says why
    status = charge.status.copy()
    status[(status == Status.OK) & ~found & solvable] = Status.CUTOFF_NOT_REACHED
    return replace(charge, status=status)


def _fixed_point(
    recipe: Recipe,
    engine: Engine,
    settings: Settings,
    run: Callable[[Charge], tuple[CycleResult, Exhaust]],
    fuel_mass: Array | None,
) -> Charge:
    burned = _first_guess(recipe, settings)
    if fuel_mass is not None:
        recipe = recipe.with_equivalence_ratio(np.full(len(recipe), 0.5))
    returns = settings.residual is None or bool(np.any(settings.residual > 0.0)) or bool(np.any(recipe.egr_fraction > 0.0))
    charge = compose(recipe, engine, burned)
    if not returns and fuel_mass is None:
        return charge
    active = np.ones(len(recipe), np.bool_)
    for _ in range(FIXED_POINT_STEPS):
        phi = recipe.equivalence_ratio
        if fuel_mass is not None:
            phi = np.where(active, _ratio_from_mass(charge, settings, fuel_mass), phi)
        new = _burned(charge, run(charge)[1], settings) if returns else burned
        change = np.maximum(_change(new, burned), np.abs(phi - recipe.equivalence_ratio))
        moves = active & np.isfinite(change)  # an element whose cycle fails stays where it failed: its status says why
        burned = _hold(moves, new, burned)
        recipe = recipe.with_equivalence_ratio(np.where(moves, phi, recipe.equivalence_ratio))
        charge = compose(recipe, engine, burned)
        active = moves & (change > FIXED_POINT_TOLERANCE)
        if not active.any():
            break
    status = charge.status.copy()
    status[(status == Status.OK) & active] = Status.NOT_CONVERGED
    return replace(charge, status=status)


def _first_guess(recipe: Recipe, settings: Settings) -> BurnedGas:
    """Completely burned fresh mixture at a plausible exhaust temperature."""
    table, n = recipe.table, len(recipe)
    dry = table.amounts({k: v for k, v in recipe.air.composition().items() if v > 0.0})
    mixture = np.tile(dry, (n, 1))
    mixture[:, table.index("H2O")] += recipe.humidity / table.molar_mass[table.index("H2O")]
    mixture[:, table.index(FUEL)] += (
        recipe.equivalence_ratio / recipe.stoichiometric_air_fuel_ratio / table.molar_mass[table.index(FUEL)]
    )
    mixture /= total(mixture * table.molar_mass)[:, None]
    amounts, _ = composition(table, mixture, np.full(n, DEFAULT_FREEZE))
    hot = np.full(n, FIRST_RESIDUAL_TEMPERATURE)
    properties = mix(table, amounts)
    _, h, _ = properties.thermal(hot)
    fraction = np.full(n, FIRST_RESIDUAL) if settings.residual is None else settings.residual * np.ones(n)
    return BurnedGas(amounts, fraction, h, properties.gas_constant() * hot / settings.exhaust_pressure)


def _burned(charge: Charge, out: Exhaust, settings: Settings) -> BurnedGas:
    if settings.residual is None:
        volumes = settings.volumes
        fraction = volumes.exhaust_closing / volumes.intake_closing * charge.trapped.v / out.remaining.v
    else:
        fraction = charge.residual_fraction
    return BurnedGas(out.remaining.amounts, fraction, out.remaining.h, out.remaining.v)


def _ratio_from_mass(charge: Charge, settings: Settings, fuel_mass: Array) -> Array:
    """Equivalence ratio of a fuel mass per cylinder in the dry air trapped with it."""
    trapped = settings.volumes.intake_closing * settings.swept_volume / charge.trapped.v
    return np.asarray(fuel_mass / (charge.dry_air * trapped) * charge.recipe.stoichiometric_air_fuel_ratio)


def _change(new: BurnedGas, old: BurnedGas) -> Array:
    """Largest relative change of what the next charge takes from the burned gas."""
    with np.errstate(invalid="ignore"):
        moved = np.max(np.abs(new.amounts - old.amounts), axis=1) / total(new.amounts)
        h = np.abs(new.h - old.h) / (np.abs(new.h) + 1e5)
        v = np.abs(new.v / old.v - 1.0)
        return np.asarray(np.maximum.reduce([moved, h, v, np.abs(new.fraction - old.fraction)]))


def _hold(active: Mask, new: BurnedGas, old: BurnedGas) -> BurnedGas:
    return BurnedGas(
        np.where(active[:, None], new.amounts, old.amounts),
        np.where(active, new.fraction, old.fraction),
        np.where(active, new.h, old.h),
        np.where(active, new.v, old.v),
    )


def short_circuit(
    engine: Engine,
    table: SpeciesTable,
    out: Exhaust,
    *,
    extra: Array,
    extra_enthalpy: Array,
    extra_amounts: Array,
    pressure: Array,
) -> GasState:
    """Exhaust after fresh gas that passed straight through has mixed in.

    Parameters
    ----------
    extra : mass of short-circuited gas per kg trapped; its enthalpy [J/kg] and amounts (N, S) [kmol/kg].
    """
    whole = out.leaving_mass + extra
    amounts = (out.leaving.amounts * out.leaving_mass[:, None] + extra_amounts * extra[:, None]) / whole[:, None]
    h = (out.leaving.h * out.leaving_mass + extra_enthalpy * extra) / whole
    return engine.state(table, "HP", h, pressure, amounts)
