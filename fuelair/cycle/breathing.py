"""Blowdown, exhaust, residual gas, and the fixed point of gas exchange.

Source: first law for the gas that stays and the gas that leaves (Heywood 1988 ch. 5 has the same
balances for constant specific heats, from memory):

    m_e h_e = m4 u4 - m6 u6 + p_e (V4 - V6),    m6 = p_e V6 / (R6 T6)
    m1 h1   = m_i h_i + m6 [h6 + v6 (p_i - p_e)]
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from fuelair.charge import BurnedGas, Charge, Recipe, compose
from fuelair.cycle.geometry import Volumes
from fuelair.cycle.stages import HeatAddition, Passage, freeze_composition, replaced
from fuelair.gas.complete import composition
from fuelair.gas.engine import Array, Engine, GasState, Index, Mask, Status, taken, total
from fuelair.gas.mixture import mix
from fuelair.gas.species import FUEL, SpeciesTable
from fuelair.roots import bracketed

DEFAULT_FREEZE = 1740.0
"""Temperature at which the composition of exhaust leaves equilibrium [K], common practice: the constant
water-gas ratio 3.5 used for exhaust analysis belongs to it."""
FIXED_POINT_TOLERANCE = 1e-12
FIXED_POINT_STEPS = 1500
LARGEST_MIX = 1.0
"""Largest part of the last step that acceleration takes back or adds."""
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

    def rows(self, index: Index | slice) -> Settings:
        """The settings of some rows only."""
        own: dict[str, Any] = {k: taken(v, index) for k in self.__slots__ if isinstance(v := getattr(self, k), np.ndarray)}
        return replace(self, volumes=self.volumes.rows(index), **own)


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


def blow_down(
    engine: Engine, table: SpeciesTable, burned: GasState, release: GasState, *, settings: Settings, shifting: bool
) -> GasState:
    """The gas that stays, expanded from ``release`` to exhaust pressure.

    Parameters
    ----------
    burned, release : end of combustion and release, per kg present.
    shifting : whether the expansion shifted, so that composition has still to freeze. It then freezes
        as at ``settings.freeze_temperature``: gas released hotter shifts down to it, gas released
        colder takes the composition it had there, at the internal energy and volume of release.
    """
    p_e, T = settings.exhaust_pressure, settings.freeze_temperature
    if not shifting:
        return engine.state(table, "SP", release.s, p_e, release.amounts)
    frozen = freeze_composition(engine, table, burned, release, T)
    start = engine.state(table, "UV", release.u, release.v, frozen)
    remaining = engine.state(table, "SP", start.s, p_e, frozen)

    def shifted(rows: Index) -> GasState:
        """Isentropic blowdown that shifts down to the freeze temperature, then stays frozen."""
        s, p, amounts = release.s[rows], p_e[rows], release.amounts[rows]
        at = engine.state(table, "ST", s, T[rows], amounts, "equilibrium")
        cold = engine.state(table, "SP", s, p, at.amounts)
        return replaced(cold, at.p < p, lambda i: engine.state(table, "SP", s[i], p[i], amounts[i], "equilibrium"))

    return replaced(remaining, release.T > T, shifted)


def exhaust(
    engine: Engine,
    table: SpeciesTable,
    passage: Passage,
    *,
    mass: Array,
    trapped_volume: Array,
    settings: Settings,
) -> Exhaust:
    """Mix what leaves when the gas that stays has expanded to exhaust pressure.

    Parameters
    ----------
    passage : release and the gas that stays, per kg present.
    mass : gas present per kg trapped; trapped_volume : specific volume at intake closing [m3/kg].
    """
    p_e, release, remaining = settings.exhaust_pressure, passage.release, passage.remaining
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


Cycle = Callable[[Charge, Settings], Passage]
"""The headline cycle of some rows: their charge and settings -> one passage."""


def solve_charge(
    recipe: Recipe,
    engine: Engine,
    settings: Settings,
    cycle: Cycle,
    *,
    fuel_mass: Array | None = None,
    cutoff_ratio: Array | None = None,
) -> Charge:
    """Trapped charge with residual and recirculated gas of its own cycle.

    Parameters
    ----------
    cycle : the headline cycle.
    fuel_mass : fuel per cylinder and cycle [kg] instead of the recipe's equivalence ratio.
    cutoff_ratio : V3 / V2 [-] instead of the recipe's equivalence ratio, up to a stoichiometric mixture.

    Elements are iterated independently; one that finds no fixed point gets ``NOT_CONVERGED``.
    """
    if cutoff_ratio is None:
        return _fixed_point(recipe, engine, settings, cycle, fuel_mass)

    def miss(phi: Array) -> Array:
        charge = _fixed_point(recipe.with_equivalence_ratio(phi), engine, settings, cycle, None)
        return np.asarray(cycle(charge, settings).burn.volume_ratio - cutoff_ratio)

    n = len(recipe)
    phi, found = bracketed(miss, np.full(n, LEANEST), np.full(n, RICHEST), width=CUTOFF_WIDTH)
    charge = _fixed_point(recipe.with_equivalence_ratio(phi), engine, settings, cycle, None)
    solvable = cycle(charge, settings).status == Status.OK  # else the cycle's own status says why
    status = charge.status.copy()
    status[(status == Status.OK) & ~found & solvable] = Status.CUTOFF_NOT_REACHED
    return replace(charge, status=status)


def _fixed_point(recipe: Recipe, engine: Engine, settings: Settings, cycle: Cycle, fuel_mass: Array | None) -> Charge:
    """Iterate the burned gas that comes back; each row leaves when it has settled, or where its cycle fails: its status says why.

    Picard's iteration, with Anderson's acceleration of depth one (Anderson 1965, from memory) while the change shrinks.
    """
    n = len(recipe)
    returns = settings.residual is None or bool(np.any(settings.residual > 0.0)) or bool(np.any(recipe.egr_fraction > 0.0))
    burned = _first_guess(recipe, settings) if returns else BurnedGas.none(n, len(recipe.table))
    if fuel_mass is not None:
        recipe = recipe.with_equivalence_ratio(np.full(n, 0.5))
    phi = recipe.equivalence_ratio.copy()
    left = np.arange(n) if returns or fuel_mass is not None else np.arange(0)
    before = _Before(np.zeros(n), burned, burned) if returns else None
    for _ in range(FIXED_POINT_STEPS):
        if not len(left):
            break
        some, own, old = recipe.rows(left).with_equivalence_ratio(phi[left]), settings.rows(left), burned.rows(left)
        charge = compose(some, engine, old)
        ratio = phi[left] if fuel_mass is None else _ratio_from_mass(charge, own, fuel_mass[left])
        change = np.abs(ratio - phi[left])
        new = old
        if returns:
            new = _burned(charge, cycle(charge, own).remaining, own)
            change = np.maximum(change, _change(new, old))
        moves = np.isfinite(change)
        rows, going = left[moves], moves & (change > FIXED_POINT_TOLERANCE)
        phi[rows] = ratio[moves]
        burned = burned.replaced(rows, new.rows(np.flatnonzero(moves)))
        left = left[going]
        if before is not None and len(left):
            kept = np.flatnonzero(going)
            burned = burned.replaced(left, before.better(left, change[kept], old.rows(kept), new.rows(kept)))
    charge = compose(recipe.with_equivalence_ratio(phi), engine, burned)
    status = charge.status.copy()
    status[left] = np.where(status[left] == Status.OK, np.int8(Status.NOT_CONVERGED), status[left])
    return replace(charge, status=status)


@dataclass(slots=True)
class _Before:
    """What the iteration knows of its last step, per row: its change, where it stood and where it led to."""

    change: Array
    at: BurnedGas
    to: BurnedGas

    def better(self, rows: Index, change: Array, at: BurnedGas, to: BurnedGas) -> BurnedGas:
        """Where to go on from instead of ``to``: the least change that a mix with the step before promises."""
        old_at, old_to = self.at.rows(rows), self.to.rows(rows)
        along = across = np.zeros(len(rows))
        for step, last in zip(_scaled(to, at), _scaled(old_to, old_at), strict=True):
            turn = step - last
            along, across = along + step * turn, across + turn * turn
        with np.errstate(divide="ignore", invalid="ignore"):
            share = along / across
        shrinks = (change < self.change[rows]) & np.isfinite(share)
        share = np.where(shrinks, np.clip(share, -LARGEST_MIX, LARGEST_MIX), 0.0)
        self.change[rows] = change
        self.at, self.to = self.at.replaced(rows, at), self.to.replaced(rows, to)
        mixed = BurnedGas(
            *(new - _along(share, new) * (new - old) for new, old in zip(to.fields(), old_to.fields(), strict=True))
        )
        np.maximum(mixed.amounts, 0.0, out=mixed.amounts)
        return mixed


def _scaled(to: BurnedGas, at: BurnedGas) -> tuple[Array, Array, Array]:
    """Difference of two burned gases in comparable numbers; their composition goes along with these."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return (to.h - at.h) / (np.abs(to.h) + 1e5), to.v / at.v - 1.0, to.fraction - at.fraction


def _along(share: Array, values: Array) -> Array:
    """``share`` (N,) in the shape of ``values`` (N,) or (N, S)."""
    return share if values.ndim == 1 else share[:, None]


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


def _burned(charge: Charge, remaining: GasState, settings: Settings) -> BurnedGas:
    if settings.residual is None:
        volumes = settings.volumes
        fraction = volumes.exhaust_closing / volumes.intake_closing * charge.trapped.v / remaining.v
    else:
        fraction = charge.residual_fraction
    return BurnedGas(remaining.amounts, fraction, remaining.h, remaining.v)


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
