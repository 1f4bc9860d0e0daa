"""The main job: a case in, an Assessment out. No printing, no files."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fuelair import outputs
from fuelair.air import STANDARD_PRESSURE, DryAir
from fuelair.assessment import Assessment
from fuelair.case import Case
from fuelair.charge import COLDEST, Charge, enters_as_liquid, supply_enthalpy
from fuelair.cycle import air_standard, exergy, fuel_air, ladder
from fuelair.cycle.breathing import Settings, solve_charge
from fuelair.cycle.result import FREEZE_MODEL, MODELS, REAL_MODEL, CycleResult
from fuelair.cycle.stages import Passage
from fuelair.errors import InputError, Problem, UnsolvedError
from fuelair.gas import virial_data
from fuelair.gas.engine import Array, Engine, Status
from fuelair.gas.engines import EngineName, Engines, pick
from fuelair.gas.second_opinion import compression_pressure
from fuelair.gas.species import T_STANDARD, data_versions
from fuelair.prepare import Prepared, ambient, prepare
from fuelair.remarks import sources, verdict, warnings
from fuelair.version import __version__


def assess(case: Case, *, engine: Engine | EngineName | None = None, dry_air: DryAir | None = None) -> Assessment:
    """Run a case through every cycle model and set the results side by side.

    Parameters
    ----------
    case : what the user wrote.
    engine : gas engines by name, or the one of the ideal-gas models itself; default the reference on Cantera.
    dry_air : composition of dry air; default `fuelair.air.dry_air`.

    Returns
    -------
    Assessment, SI throughout.

    Raises
    ------
    InputError : the pressure limit lies below the headline model's compression pressure.
    UnsolvedError : the headline model has no solution; status and reason say why.
    """
    if not isinstance(case, Case):
        what = "a Case, e.g. fuelair.Case.read(path) or fuelair.Case.from_dict(tables)"
        raise InputError(Problem("assess takes a case", "case", type(case).__name__, what))
    prepared = prepare(case, dry_air)
    engines = pick(engine if isinstance(engine, str) else "reference", own_fluid(prepared))
    if engine is not None and not isinstance(engine, str):
        engines = replace(engines, ideal=engine)
    gas = of_model(engines, prepared.headline)
    charge = trap(prepared, gas)
    headline = fuel_air.run(gas, charge, prepared.settings, prepared.headline)
    _refuse_unsolved(case, prepared, headline)
    results = models(prepared, engines, headline)
    return _gather(case, prepared, engines, headline, results)


def own_fluid(prepared: Prepared) -> str | None:
    """Fluid of the virial data that is the fuel itself; None if there is none."""
    return prepared.fuel.name if prepared.fuel.name in virial_data.fluids() else None


def of_model(engines: Engines, model: str) -> Engine:
    """Engine that runs a model."""
    return engines.real if model == REAL_MODEL else engines.ideal


def trap(prepared: Prepared, engine: Engine) -> Charge:
    """The trapped charge, gas exchange solved once with the headline model."""

    def cycle(charge: Charge, settings: Settings) -> Passage:
        return fuel_air.passage(engine, charge, settings, prepared.headline)

    return solve_charge(
        prepared.recipe, engine, prepared.settings, cycle, fuel_mass=prepared.fuel_mass, cutoff_ratio=prepared.cutoff_ratio
    )


def models(prepared: Prepared, engines: Engines, headline: fuel_air.Run) -> dict[str, CycleResult]:
    """Every model of the ladder on the headline's charge, crudest first; the freeze model last if it leads."""
    leads = (FREEZE_MODEL,) if prepared.headline == FREEZE_MODEL else ()
    return {model: result_of(model, prepared, engines, headline) for model in MODELS + leads}


def result_of(model: str, prepared: Prepared, engines: Engines, headline: fuel_air.Run, *, in_full: bool = True) -> CycleResult:
    """One model on the headline's charge; ``in_full`` as in `fuelair.cycle.fuel_air.run`."""
    charge, settings = headline.charge, prepared.settings
    if model == prepared.headline:
        return headline.result
    if model == "air-cold":
        return air_standard.run(model, air_standard.ColdAir(), charge, settings)
    if model == "air-variable":
        return air_standard.run(model, air_standard.variable_air(engines.ideal, charge.recipe.air), charge, settings)
    engine = of_model(engines, model)
    own = charge if engine is of_model(engines, prepared.headline) else fuel_air.seen_by(engine, charge)
    return fuel_air.run(engine, own, settings, model, headline=False, in_full=in_full).result


def at_rest(prepared: Prepared, engines: Engines, headline: fuel_air.Run) -> CycleResult | None:
    """The complete-combustion model with injected fuel at 298.15 K and no injection pressure; None if none is injected."""
    charge = headline.charge
    recipe, fuel = charge.recipe, prepared.fuel
    if recipe.admission != "direct":
        return None
    pressure = fuel.liquid_reference_pressure if bool(enters_as_liquid(recipe)[0]) else STANDARD_PRESSURE
    one = np.ones(len(recipe))
    plain = replace(recipe, fuel_temperature=one * T_STANDARD, fuel_pressure=one * pressure)
    resting = replace(fuel_air.seen_by(engines.ideal, charge), recipe=plain, fuel_enthalpy=supply_enthalpy(plain))
    return fuel_air.run(engines.ideal, resting, prepared.settings, ladder.SUPPLY_MODEL, headline=False, in_full=False).result


def companions(prepared: Prepared, engine: Engine, headline: fuel_air.Run) -> dict[str, dict[str, CycleResult]]:
    """Air-standard cycles on another basis: the same cut-off ratio, and for rich charges heat limited by oxygen."""
    charge, settings = headline.charge, prepared.settings
    airs: dict[str, air_standard.StateOf] = {
        "air-cold": air_standard.ColdAir(),
        "air-variable": air_standard.variable_air(engine, charge.recipe.air),
    }
    out: dict[str, dict[str, CycleResult]] = {}
    cutoff = headline.result.figures["cutoff_ratio"]
    if bool(headline.burn.limited[0]):
        out["same-cutoff-ratio"] = {
            k: air_standard.run(k, state, charge, settings, cutoff_ratio=cutoff) for k, state in airs.items()
        }
    share = float(charge.oxygen_excess_ratio()[0])
    if float(charge.oxygen_left()[0]) < 0.0:
        heat = np.minimum(charge.fuel_mass * charge.lower_heating_value * max(share, 0.0), charge.heat_added)
        out["oxygen-limited-heat"] = {k: air_standard.run(k, state, charge, settings, heat=heat) for k, state in airs.items()}
    return out


def _refuse_unsolved(case: Case, prepared: Prepared, headline: fuel_air.Run) -> None:
    result = headline.result
    status = Status(int(result.status[0]))
    if status is Status.OK:
        return
    if status is Status.LIMIT_BELOW_COMPRESSION:
        reached = float(result.figures["compression_pressure_Pa"][0]) / 1e5
        problem = Problem(
            "lies below the compression pressure of the headline model",
            "combustion.pressure_limit",
            case.written("combustion.pressure_limit"),
            f"above {reached:.1f} bar, the compression pressure of {prepared.headline}",
            "raise the limit, or lower compression_ratio or the trapped pressure",
        )
        raise InputError(case.place(problem))
    raise UnsolvedError(status.label, status.reason + _detail(status, headline.charge), prepared.headline)


def _detail(status: Status, charge: Charge) -> str:
    """Numbers behind a status of the charge, as a further sentence."""
    recipe, T = charge.recipe, float(charge.trapped.T[0])
    if status is Status.VAPOUR_ABOVE_SATURATION:
        wet, fuel = float(charge.water_saturation_ratio[0]), float(charge.saturation_ratio[0])
        name, ratio = ("water", wet) if wet > max(fuel, 1.0) else (recipe.fuel.name, fuel)
        if not T > COLDEST:
            return f". Here evaporation would cool the charge below {COLDEST:.0f} K"
        return f". Here the charge is at {T:.0f} K and {name} vapour at {ratio:.3g} times its saturation pressure"
    if status in (Status.CARBON_OVER_OXYGEN, Status.OXYGEN_BELOW_CARBON_MONOXIDE):
        return f". Here the equivalence ratio is {float(recipe.equivalence_ratio[0]):.4g}"
    return ""


def _second_opinion(prepared: Prepared, charge: Charge) -> float | None:
    if prepared.settings.compression_exponent is not None:
        return None
    return compression_pressure(charge.recipe.table, charge.trapped, prepared.settings.volumes.effective_compression)


def _gather(
    case: Case, prepared: Prepared, engines: Engines, headline: fuel_air.Run, results: dict[str, CycleResult]
) -> Assessment:
    balance = exergy.balance(headline)
    engine = of_model(engines, prepared.headline)
    draft = Assessment(
        case=case,
        fuel=prepared.fuel,
        ambient=ambient(case),
        charge=headline.charge,
        headline=prepared.headline,
        results=results,
        companions=companions(prepared, engines.ideal, headline),
        ladder=tuple(ladder.steps(results, at_rest=at_rest(prepared, engines, headline))),
        overprediction=ladder.overprediction(results),
        exergy=balance,
        engine_figures=_plain(outputs.engine_figures(prepared, headline, engine)),
        exhaust_figures=_plain(outputs.exhaust_figures(prepared, headline, engine)),
        flame_temperature=_number(outputs.stoichiometric_flame_temperature(headline, engine)),
        second_opinion=_second_opinion(prepared, headline.charge),
        swept_volume=_number(prepared.settings.swept_volume),
        engine=engines.ideal.name,
        versions={
            "fuelair": __version__,
            "numpy": np.__version__,
            **data_versions(),
            "species_table": headline.charge.recipe.table.digest,
        },
        warnings=(),
        sources=(),
        verdict="",
    )
    return replace(draft, warnings=tuple(warnings(draft)), sources=tuple(sources(draft)), verdict=verdict(draft))


def _plain(figures: dict[str, Array]) -> dict[str, float | None]:
    return {k: _number(v) for k, v in figures.items()}


def _number(figure: Array) -> float | None:
    """The one case's figure, None where there is none."""
    return float(figure[0]) if np.isfinite(figure[0]) else None
