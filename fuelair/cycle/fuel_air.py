"""The fuel-air cycle: real charge, complete combustion or equilibrium, frozen or shifting expansion."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from fuelair.charge import Charge
from fuelair.cycle.breathing import Exhaust, Settings, blow_down, exhaust
from fuelair.cycle.result import FREEZE_MODEL, CycleResult, Point, WorkParts, closed, closed_figures, performance, state_figures
from fuelair.cycle.stages import Burn, ClosedPart, Compression, Expansion, Passage, burn, compress, end_of_constant_volume, expand
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


def closed_part(engine: Engine, charge: Charge, settings: Settings, model: str) -> ClosedPart:
    """Compression, combustion and expansion of the charge by one fuel-air model, a key of `KINDS`."""
    kind, table, volumes = KINDS[model], charge.recipe.table, settings.volumes
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
    volume = charge.trapped.v * volumes.exhaust_opening / volumes.intake_closing / (1.0 + charge.injected)
    freeze = settings.freeze_temperature if kind.freezes else None
    release = expand(engine, table, burned.state, volume, kind.expansion, freeze)
    status = worst(charge.status, compression.state.status, burned.status, release.status)
    return ClosedPart(compression, burned, release, status, reactants)


def passage(engine: Engine, charge: Charge, settings: Settings, model: str) -> Passage:
    """The charge once through the cycle of one fuel-air model, up to the gas that stays after blowdown."""
    once, shifting = closed_part(engine, charge, settings, model), KINDS[model].expansion == "equilibrium"
    remaining = blow_down(engine, charge.recipe.table, once.burn.state, once.release, settings=settings, shifting=shifting)
    status = worst(once.status, remaining.status)
    return Passage(once.compression, once.burn, once.release, status, once.reactants, remaining)


def run_closed(engine: Engine, charge: Charge, settings: Settings, model: str) -> CycleResult:
    """The figures of the closed part alone, for studies that ask for none of `EXCHANGE_FIGURES`.

    Its ledger is that of the closed part; states are taken as the engine gave them.
    """
    once = closed_part(engine, charge, settings, model)
    compression, burned, release = once.compression, once.burn, once.release
    figures = _performance(charge, settings, once) | closed_figures(
        compression.state, burned.state, release, cutoff_ratio=burned.volume_ratio, heat_added=charge.heat_added
    )
    figures["compression_heat_J_per_kg"] = compression.heat
    states = (charge.trapped, compression.state, burned.state, release)
    ledger = _closed_ledger(charge, once, settings, states, release.amounts)
    status = closed(once.status, ledger)
    return CycleResult(model, charge.recipe.table, (), figures, ledger, {"limited": _limited(once, settings)}, status)


def run(engine: Engine, charge: Charge, settings: Settings, model: str, *, headline: bool = True, in_full: bool = True) -> Run:
    """Run one fuel-air model on a charge.

    Parameters
    ----------
    model : a key of `KINDS`.
    headline : whether the charge was made with this model. The others take its residual mass as
        given, and their gas exchange is not balanced against the intake.
    in_full : whether to find the state at the end of the constant-volume part (a search) and to evaluate
        every state of the ledger afresh; else the ledger takes the energies that the engine gave.
    """
    kind, table = KINDS[model], charge.recipe.table
    if not headline:
        settings = replace(settings, residual=charge.residual_fraction)
    once = passage(engine, charge, settings, model)
    compression, burned, release = once.compression, once.burn, once.release
    mass = 1.0 + charge.injected
    out = exhaust(engine, table, once, mass=mass, trapped_volume=charge.trapped.v, settings=settings)
    limited = _limited(once, settings)
    named = _points(engine, charge, settings, once, out, kind, limited if in_full else None)
    figures = _performance(charge, settings, once) | state_figures(
        named, cutoff_ratio=burned.volume_ratio, heat_added=charge.heat_added, blowdown=out.blowdown_work
    )
    figures["compression_heat_J_per_kg"] = compression.heat
    ledger = _ledger(engine if in_full else None, charge, once, out, settings, headline)
    flags = {"limited": limited, "back-flow": out.back_flow}
    result = CycleResult(model, table, named, figures, ledger, flags, closed(worst(once.status, out.leaving.status), ledger))
    return Run(charge, compression, burned, release, out, result)


def _limited(once: ClosedPart, settings: Settings) -> Mask:
    """Where the pressure limit acts."""
    return np.asarray(once.burn.limited & (settings.heat_addition == "pressure-limited"))


def _performance(charge: Charge, settings: Settings, once: ClosedPart) -> dict[str, Array]:
    """Work and mean pressures of the closed part."""
    mass, burned = 1.0 + charge.injected, once.burn
    work = WorkParts(once.compression.work, burned.expansion_work * mass, mass * (burned.state.u - once.release.u))
    return performance(
        trapped=charge.trapped,
        volumes=settings.volumes,
        work=work,
        fuel_mass=charge.fuel_mass,
        fuel_energy=charge.fuel_mass * charge.lower_heating_value,
        intake_pressure=settings.intake_pressure,
        exhaust_pressure=settings.exhaust_pressure,
        four_stroke=settings.four_stroke,
    )


def _points(
    engine: Engine,
    charge: Charge,
    settings: Settings,
    once: Passage,
    out: Exhaust,
    kind: Kind,
    limited: Mask | None,
) -> tuple[Point, ...]:
    compression = once.compression
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
            reactants=once.reactants,
            injected=charge.injected,
            fuel_enthalpy=charge.injected_enthalpy,
            pressure_limit=settings.pressure_limit,
            limited=limited,
            chemistry=kind.chemistry,
        )
        named.append(Point("limit", at, one + charge.injected * share))
    named += [
        Point("burned", once.burn.state, mass),
        Point("release", once.release, mass),
        Point("blown-down", out.remaining, out.remaining_mass),
        Point("exhaust", out.leaving, out.leaving_mass),
    ]
    return tuple(named)


def _ledger(
    engine: Engine | None, charge: Charge, once: Passage, out: Exhaust, settings: Settings, headline: bool
) -> dict[str, Array]:
    """Relative residuals of mass, elements, energy and entropy: elements over all moles, energies over the fuel's.

    With an engine each state is evaluated afresh: its energy is taken from its composition, temperature and
    volume, not from the value that the solver was asked to meet.
    """
    compression, burned, release = once.compression, once.burn, once.release
    table, mass = charge.recipe.table, 1.0 + charge.injected
    first, second, third, fourth, stays, leaves = (
        s if engine is None else engine.state(table, "TV", s.T, s.v, s.amounts)
        for s in (charge.trapped, compression.state, burned.state, release, out.remaining, out.leaving)
    )
    compositions = (burned.state.amounts, release.amounts, out.remaining.amounts, out.leaving.amounts)
    ledger = _closed_ledger(charge, once, settings, (first, second, third, fourth), *compositions)
    scale = _scale(charge)
    left = mass * fourth.u - out.remaining_mass * stays.u - out.leaving_mass * leaves.h
    v4 = charge.trapped.v * settings.volumes.exhaust_opening / settings.volumes.intake_closing
    leaving = left + settings.exhaust_pressure * (v4 - out.remaining_mass * out.remaining.v)
    ledger["energy_exhaust"] = leaving / scale
    if charge.recipe.from_intake and headline:
        x = charge.residual_fraction
        p_i, p_e = charge.recipe.pressure, settings.exhaust_pressure
        inside = out.remaining.h + out.remaining.v * (p_i - p_e)
        mixed = charge.intake_enthalpy + np.where(x > 0.0, x * inside, 0.0) - first.h
        ledger["energy_intake"] = mixed / scale
        ledger["residual"] = out.remaining_mass - x
    return ledger


def _closed_ledger(
    charge: Charge, once: ClosedPart, settings: Settings, states: tuple[GasState, GasState, GasState, GasState], *burned_to: Array
) -> dict[str, Array]:
    """The residuals of the closed part from its four states; the compositions ``burned_to`` must hold what burned."""
    first, second, third, fourth = states
    table, mass, burned = charge.recipe.table, 1.0 + charge.injected, once.burn
    elements, kilograms, moles = np.zeros(len(mass)), np.zeros(len(mass)), total(once.reactants)
    for amounts in _distinct(*burned_to):
        apart = np.abs(weighted(amounts - once.reactants, table.balances))
        elements = np.maximum(elements, np.max(apart[:, :-1], axis=1) / moles)
        kilograms = np.maximum(kilograms, apart[:, -1])
    scale, supplied = _scale(charge), charge.injected * charge.injected_enthalpy
    work = -once.compression.work + burned.expansion_work * mass + mass * (burned.state.u - once.release.u)
    ledger = {
        "mass": kilograms,
        "elements": elements,
        "energy_combustion": (mass * (third.u + burned.expansion_work) - (second.u + supplied)) / scale,
        "energy_closed_part": (first.u + supplied + once.compression.heat - mass * fourth.u - work) / scale,
    }
    if settings.compression_exponent is None:
        ledger["entropy_compression"] = second.s / first.s - 1.0
    ledger["entropy_expansion"] = fourth.s / third.s - 1.0
    return ledger


def _scale(charge: Charge) -> Array:
    """Energy of the fuel [J/kg trapped], at least a little."""
    return np.asarray(np.maximum(charge.fuel_mass * charge.lower_heating_value, 1e3))


def _distinct(*arrays: Array) -> list[Array]:
    """The arrays without those that are the same object as one before."""
    return list({id(array): array for array in arrays}.values())
