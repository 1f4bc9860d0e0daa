"""The fuel-air cycle: real charge, complete combustion or equilibrium, frozen or shifting expansion."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from fuelair.charge import Charge
from fuelair.cycle.breathing import Exhaust, Settings, exhaust
from fuelair.cycle.result import FREEZE_MODEL, CycleResult, Point, WorkParts, closed, performance, state_figures
from fuelair.cycle.stages import Burn, Compression, Expansion, burn, compress, end_of_constant_volume, expand
from fuelair.gas.engine import Array, Chemistry, Engine, GasState, Mask, total, weighted, worst


@dataclass(frozen=True, slots=True)
class Kind:
    """What makes a fuel-air model: combustion chemistry, expansion, and where it freezes if it does."""

    chemistry: Chemistry
    expansion: Expansion
    freezes: bool = False


KINDS: dict[str, Kind] = {
    "fuel-air-complete": Kind("complete", "frozen"),
    "fuel-air-frozen": Kind("equilibrium", "frozen"),
    "fuel-air-equilibrium": Kind("equilibrium", "equilibrium"),
    "fuel-air-real-gas": Kind("equilibrium", "equilibrium"),
    FREEZE_MODEL: Kind("equilibrium", "equilibrium", freezes=True),
}


def seen_by(engine: Engine, charge: Charge) -> Charge:
    """The same charge with its trapped state, at the same pressure and temperature, as another gas engine has it."""
    trapped = charge.trapped
    state = engine.state(charge.recipe.table, "TP", trapped.T, trapped.p, trapped.amounts)
    return replace(charge, trapped=state, status=worst(charge.status, state.status))


@dataclass(frozen=True, slots=True)
class Run:
    """A solved fuel-air cycle with its stages."""

    charge: Charge
    compression: Compression
    burn: Burn
    release: GasState
    exhaust: Exhaust
    result: CycleResult


def run(engine: Engine, charge: Charge, settings: Settings, model: str, *, headline: bool = True, points: bool = True) -> Run:
    """Run one fuel-air model on a charge.

    Parameters
    ----------
    model : a key of `KINDS`.
    headline : whether the charge was made with this model. The others take its residual mass as
        given, and their gas exchange is not balanced against the intake.
    points : whether to find the state at the end of the constant-volume part (costs a search).
    """
    kind, recipe = KINDS[model], charge.recipe
    if not headline:
        settings = replace(settings, residual=charge.residual_fraction)
    table, volumes = recipe.table, settings.volumes
    compression = compress(engine, table, charge.trapped, volumes.effective_compression, settings.compression_exponent)
    reactants = charge.reactants()
    burned = burn(
        engine,
        table,
        compression.state,
        reactants=reactants,
        injected=charge.injected,
        fuel_enthalpy=charge.injected_enthalpy,
        heat_addition=settings.heat_addition,
        pressure_limit=settings.pressure_limit,
        chemistry=kind.chemistry,
    )
    mass = 1.0 + charge.injected
    v1 = charge.trapped.v
    release_volume = v1 * volumes.exhaust_opening / volumes.intake_closing / mass
    freeze = settings.freeze_temperature if kind.freezes else None
    release = expand(engine, table, burned.state, release_volume, kind.expansion, freeze)
    out = exhaust(
        engine,
        table,
        burned.state,
        release,
        mass=mass,
        trapped_volume=v1,
        settings=settings,
        shifting=kind.expansion == "equilibrium",
    )
    work = WorkParts(compression.work, burned.expansion_work * mass, mass * (burned.state.u - release.u))
    limited = burned.limited & (settings.heat_addition == "pressure-limited")
    named = _points(engine, charge, settings, compression, burned, release, out, kind, limited if points else None)
    figures = performance(
        trapped=charge.trapped,
        volumes=volumes,
        work=work,
        fuel_mass=charge.fuel_mass,
        fuel_energy=charge.fuel_mass * charge.lower_heating_value,
        intake_pressure=settings.intake_pressure,
        exhaust_pressure=settings.exhaust_pressure,
        four_stroke=settings.four_stroke,
    ) | state_figures(named, cutoff_ratio=burned.volume_ratio, heat_added=charge.heat_added, blowdown=out.blowdown_work)
    figures["compression_heat_J_per_kg"] = compression.heat
    ledger = _ledger(engine, charge, compression, burned, release, out, settings, headline)
    status = worst(
        charge.status, compression.state.status, burned.status, release.status, out.remaining.status, out.leaving.status
    )
    result = CycleResult(
        model, table, named, figures, ledger, {"limited": limited, "back-flow": out.back_flow}, closed(status, ledger)
    )
    return Run(charge, compression, burned, release, out, result)


def _points(
    engine: Engine,
    charge: Charge,
    settings: Settings,
    compression: Compression,
    burned: Burn,
    release: GasState,
    out: Exhaust,
    kind: Kind,
    limited: Mask | None,
) -> tuple[Point, ...]:
    table, one = charge.recipe.table, np.ones(len(charge.recipe))
    mass = one + charge.injected
    named = [
        Point("trapped", charge.trapped, one),
        Point("compressed", compression.state, one),
    ]
    if limited is not None and limited.any():
        at, share = end_of_constant_volume(
            engine,
            table,
            compression.state,
            reactants=charge.reactants(),
            injected=charge.injected,
            fuel_enthalpy=charge.injected_enthalpy,
            pressure_limit=settings.pressure_limit,
            limited=limited,
            chemistry=kind.chemistry,
        )
        named.append(Point("limit", at, one + charge.injected * share))
    named += [
        Point("burned", burned.state, mass),
        Point("release", release, mass),
        Point("blown-down", out.remaining, out.remaining_mass),
        Point("exhaust", out.leaving, out.leaving_mass),
    ]
    return tuple(named)


def _ledger(
    engine: Engine,
    charge: Charge,
    compression: Compression,
    burned: Burn,
    release: GasState,
    out: Exhaust,
    settings: Settings,
    headline: bool,
) -> dict[str, Array]:
    """Relative residuals of mass, elements, energy and entropy, each from states evaluated afresh.

    Energy of a state is taken from its composition, temperature and volume, not from the value that the
    solver was asked to meet. Energies are relative to the fuel's.
    """
    table, mass = charge.recipe.table, 1.0 + charge.injected
    atoms, target = table.atoms, charge.reactants()
    scale = np.maximum(charge.fuel_mass * charge.lower_heating_value, 1e3)
    whole = weighted(target, atoms)
    biggest = np.max(np.abs(whole), axis=1)
    elements = np.zeros(len(mass))
    kilograms = np.zeros(len(mass))
    for state in (burned.state, release, out.remaining, out.leaving):
        elements = np.maximum(elements, np.max(np.abs(weighted(state.amounts, atoms) - whole), axis=1) / biggest)
        kilograms = np.maximum(kilograms, np.abs(total(state.amounts * table.molar_mass) - 1.0))
    first, second, third, fourth, stays, leaves = (
        engine.state(table, "TV", s.T, s.v, s.amounts)
        for s in (charge.trapped, compression.state, burned.state, release, out.remaining, out.leaving)
    )
    supplied = charge.injected * charge.injected_enthalpy
    work = -compression.work + burned.expansion_work * mass + mass * (burned.state.u - release.u)
    closed_part = first.u + supplied + compression.heat - mass * fourth.u - work
    left = mass * fourth.u - out.remaining_mass * stays.u - out.leaving_mass * leaves.h
    v4 = charge.trapped.v * settings.volumes.exhaust_opening / settings.volumes.intake_closing
    leaving = left + settings.exhaust_pressure * (v4 - out.remaining_mass * out.remaining.v)
    combustion = mass * (third.u + burned.expansion_work) - (second.u + supplied)
    out_ledger = {
        "mass": kilograms,
        "elements": elements,
        "energy_combustion": combustion / scale,
        "energy_closed_part": closed_part / scale,
        "energy_exhaust": leaving / scale,
    }
    if settings.compression_exponent is None:
        out_ledger["entropy_compression"] = second.s / first.s - 1.0
    out_ledger["entropy_expansion"] = fourth.s / third.s - 1.0
    if charge.recipe.from_intake and headline:
        x = charge.residual_fraction
        p_i, p_e = charge.recipe.pressure, settings.exhaust_pressure
        inside = out.remaining.h + out.remaining.v * (p_i - p_e)
        mixed = charge.intake_enthalpy + np.where(x > 0.0, x * inside, 0.0) - first.h
        out_ledger["energy_intake"] = mixed / scale
        out_ledger["residual"] = out.remaining_mass - x
    return out_ledger
