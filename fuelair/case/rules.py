"""Rules between the keys of a case: which exclude, need or bound each other.

The rules look at a :class:`Draft`, the values that passed their own check, so that a mistake in one key
does not hide a contradiction between two others. Every rule returns Problems; none raises.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import replace
from typing import Any, Final

from fuelair.case import contradictions, spreads
from fuelair.case.fields import nearest
from fuelair.errors import InputError, Problem

AMOUNTS: Final = (
    "charge.equivalence_ratio",
    "charge.excess_air_ratio",
    "charge.air_fuel_ratio",
    "charge.fuel_mass",
    "combustion.cutoff_ratio",
)
TRAPPED_PAIR: Final = ("charge.pressure", "charge.temperature")
INTAKE_PAIR: Final = ("charge.intake_pressure", "charge.intake_temperature")


class Draft:
    """What was written and what of it is sound.

    Parameters
    ----------
    written : key path to raw value, leaves only for plain keys, e.g. ``{"charge.pressure": "2.9 bar"}``.
    sound : key path to checked value; a key that failed its own check is missing here.
    """

    def __init__(self, written: Mapping[str, object], sound: Mapping[str, Any]) -> None:
        self.written, self.sound = written, sound

    def has(self, key: str) -> bool:
        """Say whether the user wrote the key, sound or not."""
        return key in self.written

    def get(self, key: str, default: Any = None) -> Any:
        """Return the checked value, ``default`` if it was not written, None if it is not sound."""
        return self.sound.get(key) if self.has(key) else default

    def pressure(self) -> Any:
        """Return the pressure of the charge before compression, of whichever pair was written; None if it is not known."""
        return self.get("charge.pressure") if self.get("charge.pressure") is not None else self.get("charge.intake_pressure")

    def raw(self, key: str) -> object:
        """Return the value as the user wrote it."""
        return self.written.get(key)

    def given(self, *keys: str) -> list[str]:
        """Return those of the keys that the user wrote."""
        return [key for key in keys if self.has(key)]


Rule = Callable[[Draft], Iterator[Problem]]


def check(draft: Draft) -> list[Problem]:
    """Return every problem between keys, in the order of the rules."""
    return [problem for rule in RULES for problem in rule(draft)]


def _and(keys: list[str] | tuple[str, ...]) -> str:
    return " and ".join(keys) if len(keys) < 3 else ", ".join(keys[:-1]) + " and " + keys[-1]


def _one_amount(draft: Draft) -> Iterator[Problem]:
    if not draft.has("charge"):  # said once, as a missing section
        return
    given = draft.given(*AMOUNTS)
    if len(given) > 1:
        message = f"the amount of fuel is given {len(given)} times: {_and(given)}"
        yield Problem(
            message, given[-1], draft.raw(given[-1]), "exactly one of them", f"remove all but one, e.g. keep {given[0]}"
        )
    elif not given:
        hint = "equivalence_ratio = 0.6 in [charge]"
        yield Problem("the amount of fuel is not given", "charge", None, f"exactly one of {', '.join(AMOUNTS)}", hint)


def _one_pair(draft: Draft) -> Iterator[Problem]:
    if not draft.has("charge"):
        return
    trapped, intake = draft.given(*TRAPPED_PAIR), draft.given(*INTAKE_PAIR)
    choice = f"either {_and(TRAPPED_PAIR)} (trapped charge), or {_and(INTAKE_PAIR)} (receiver)"
    if trapped and intake:
        message = f"the state of the charge is given twice: {_and(trapped)} beside {_and(intake)}"
        yield Problem(message, intake[0], draft.raw(intake[0]), choice, "remove one pair")
    elif not trapped and not intake:
        yield Problem("the state of the charge is not given", "charge", None, choice)
    for pair, given in ((TRAPPED_PAIR, trapped), (INTAKE_PAIR, intake)):
        if len(given) == 1 and not (trapped and intake):
            missing = pair[1 - pair.index(given[0])]
            yield Problem(f"needs {missing} beside it", given[0], draft.raw(given[0]), f"{_and(pair)} together")


def _residual(draft: Draft) -> Iterator[Problem]:
    key = "charge.residual_fraction"
    if draft.get(key) != "solve":
        return
    if draft.get("engine.strokes_per_cycle", 4) == 2:
        message = '"solve" is for four-stroke engines, and engine.strokes_per_cycle is 2'
        yield Problem(message, key, "solve", "a number", "charge.scavenging_efficiency, or the residual fraction itself")
    elif not draft.given(*INTAKE_PAIR):
        message = '"solve" needs the receiver state charge.intake_pressure and charge.intake_temperature'
        beside = f", not {_and(draft.given(*TRAPPED_PAIR))}" if draft.given(*TRAPPED_PAIR) else ""
        yield Problem(message + beside, key, "solve", hint="the intake pair, or the residual fraction as a number")


def _two_stroke(draft: Draft) -> Iterator[Problem]:
    strokes = draft.get("engine.strokes_per_cycle", 4)
    efficiency, ratio, residual = "charge.scavenging_efficiency", "charge.scavenge_ratio", "charge.residual_fraction"
    if strokes == 4:
        for key in draft.given(efficiency, ratio):
            message = "is for two-stroke engines, and engine.strokes_per_cycle is 4"
            yield Problem(message, key, draft.raw(key), hint="engine.strokes_per_cycle = 2, or remove the key")
    elif strokes == 2:
        both = draft.given(efficiency, residual)
        if len(both) == 2:
            message = f"{_and(both)} say the same thing twice (residual = 1 - scavenging efficiency)"
            yield Problem(message, residual, draft.raw(residual), "one of the two", f"remove {residual}")
        elif not both:
            message = "a two-stroke engine (engine.strokes_per_cycle = 2) needs one of charge.scavenging_efficiency, "
            yield Problem(message + "charge.residual_fraction", "charge", None, hint='scavenging_efficiency = "92 %"')
        yield from _delivered(draft, ratio)
        if draft.has(ratio) and draft.get("fuel.admission") in ("premixed", "port-liquid"):
            message = f'would carry fuel straight to the exhaust with fuel.admission = "{draft.get("fuel.admission")}"'
            hint = 'admission = "direct" or "early-direct", or remove the key'
            yield Problem(message, ratio, draft.raw(ratio), hint=hint)


def _delivered(draft: Draft, ratio: str) -> Iterator[Problem]:
    delivered, (kept, words) = draft.get(ratio), contradictions.trapped_share(draft)
    if delivered is not None and kept is not None and contradictions.delivers_too_little(delivered, kept):
        message = f"less is delivered than {words} = {kept:g} says is trapped"
        yield Problem(message, ratio, draft.raw(ratio), f"{kept:g} or more")


def _heat_addition(draft: Draft) -> Iterator[Problem]:
    limit, cutoff, mode_key = "combustion.pressure_limit", "combustion.cutoff_ratio", "combustion.heat_addition"
    mode = draft.get(mode_key)
    if mode == "pressure-limited" and not draft.has(limit):
        yield Problem(f'{mode_key} = "pressure-limited" needs {limit}', mode_key, mode, hint='pressure_limit = "180 bar"')
    if mode in ("constant-volume", "constant-pressure") and draft.has(limit):
        message = f'has no meaning with {mode_key} = "{mode}"'
        hint = 'heat_addition = "pressure-limited"; a limit to be warned of is limits.peak_pressure'
        yield Problem(message, limit, draft.raw(limit), hint=hint)
    if mode == "constant-volume" and draft.has(cutoff):
        message = f'has no meaning with {mode_key} = "constant-volume", which has no constant-pressure part'
        hint = 'heat_addition = "constant-pressure" or "pressure-limited"'
        yield Problem(message, cutoff, draft.raw(cutoff), hint=hint)
    pressure, level = draft.pressure(), draft.get(limit)
    held = mode == "pressure-limited" and level is not None and pressure is not None
    if held and contradictions.limit_too_low(level, pressure):
        message = f"not above the pressure before compression, {pressure / 1e5:g} bar"
        yield Problem(message, limit, draft.raw(limit), "above the compression pressure")


def _gas(draft: Draft) -> Iterator[Problem]:
    key = "gas.freeze_temperature"
    if draft.has(key) and draft.get("gas.expansion") == "frozen":
        message = 'has no meaning with gas.expansion = "frozen", which is frozen from the burned state on'
        yield Problem(message, key, draft.raw(key), hint='expansion = "equilibrium", or remove the key')


def _real_gas(draft: Draft) -> Iterator[Problem]:
    if draft.get("gas.model") != "real":
        return
    for key in draft.given("gas.freeze_temperature", *(["gas.expansion"] if draft.get("gas.expansion") == "frozen" else [])):
        message = 'goes with gas.model = "ideal" only: the real-gas model expands in equilibrium'
        yield Problem(message, key, draft.raw(key), hint='remove it, or model = "ideal"')


def _ambient(draft: Draft) -> Iterator[Problem]:
    altitude, pressure, reference = "charge.altitude", "charge.ambient_pressure", "charge.reference"
    if draft.has(altitude) and draft.has(pressure):
        message = f"sets the ambient pressure, which {pressure} gives too"
        yield Problem(message, altitude, draft.raw(altitude), "one of the two", f"remove {altitude} or {pressure}")
    if draft.has(altitude) and draft.get(reference) not in (None, "isa"):
        message = f'sets the ambient pressure, which {reference} = "{draft.get(reference)}" gives too'
        yield Problem(message, altitude, draft.raw(altitude), 'one of the two; reference "isa" goes with an altitude')


def _evaporation(draft: Draft) -> Iterator[Problem]:
    key, admission = "fuel.evaporated_by_gas", draft.get("fuel.admission")
    if not draft.has(key):
        return
    if admission in ("premixed", "direct"):
        message = f'has no meaning with fuel.admission = "{admission}": no liquid evaporates before compression'
        yield Problem(message, key, draft.raw(key), hint="remove it")
    elif draft.given(*TRAPPED_PAIR) and not draft.given(*INTAKE_PAIR):
        message = "has no meaning with charge.temperature, which is the temperature after evaporation"
        yield Problem(message, key, draft.raw(key), hint="remove it, or give the intake pair")


def _recirculated(draft: Draft) -> Iterator[Problem]:
    key = "charge.egr_temperature"
    if draft.has(key) and not draft.has("charge.egr_fraction"):
        yield Problem("has no meaning without charge.egr_fraction", key, draft.raw(key), hint='egr_fraction = "10 %"')


def _water(draft: Draft) -> Iterator[Problem]:
    for key in draft.given("charge.water_admission", "charge.water_temperature"):
        if not draft.has("charge.water_fuel_ratio"):
            yield Problem("has no meaning without charge.water_fuel_ratio", key, draft.raw(key), hint="water_fuel_ratio = 0.5")


def _geometry(draft: Draft) -> Iterator[Problem]:
    bore, stroke, rod = "engine.bore", "engine.stroke", "engine.rod_length"
    for one, other in ((bore, stroke), (stroke, bore)):
        if draft.has(one) and not draft.has(other):
            yield Problem(f"needs {other} beside it", one, draft.raw(one), f"{bore} and {stroke} together, or neither")
    if draft.has("charge.fuel_mass") and not draft.has(bore) and not draft.has(stroke):
        message = f"needs {bore} and {stroke}: without them the mass of the charge is not known"
        yield Problem(message, "charge.fuel_mass", draft.raw("charge.fuel_mass"))
    timed = draft.given("engine.intake_closing", "engine.exhaust_opening", "engine.exhaust_closing", "engine.pin_offset")
    lacking = [key for key in (stroke, rod) if not draft.has(key)]
    if timed and lacking:
        yield Problem(f"needs {_and(lacking)} to find the volume at an angle", timed[0], draft.raw(timed[0]))
    length, travel, offset = draft.get(rod), draft.get(stroke), draft.get("engine.pin_offset", 0.0)
    if None not in (length, travel, offset) and length <= contradictions.shortest_rod(travel, offset):
        least = 1000 * contradictions.shortest_rod(travel, offset)
        message = f"too short for {stroke}: the crank could not turn"
        yield Problem(message, rod, draft.raw(rod), f"more than half the stroke plus the pin offset, {least:g} mm")


def _timing(draft: Draft) -> Iterator[Problem]:
    key, strokes = "engine.exhaust_closing", draft.get("engine.strokes_per_cycle", 4)
    angle = draft.get(key)
    if angle is None or strokes not in (2, 4):
        return
    if contradictions.out_of_time(angle, strokes):
        low, high = contradictions.EXHAUST_CLOSING[strokes]
        message = f"outside its range with engine.strokes_per_cycle = {strokes}"
        fitting = [turn for turn in (angle - 360.0, angle + 360.0) if low <= turn <= high]
        hint = f'"{fitting[0]:g} deg", the same crank position' if fitting else "0 is the firing dead centre"
        yield Problem(message, key, draft.raw(key), f"{low:g} deg to {high:g} deg", hint)


def _one_fuel(draft: Draft) -> Iterator[Problem]:
    if not draft.has("fuel"):
        return
    kinds = ("fuel.name", "fuel.blend", "fuel.own")
    given = draft.given(*kinds)
    if len(given) > 1:
        yield Problem(f"the fuel is given {len(given)} times: {_and(given)}", given[-1], None, "exactly one of them")
    elif not given:
        yield Problem("the fuel is not given", "fuel", None, f"exactly one of {', '.join(kinds)}", 'name = "diesel"')


def _fuel_name(draft: Draft) -> Iterator[Problem]:
    name = draft.get("fuel.name")
    if name is None:
        return
    from fuelair import fuel

    names = fuel.names()
    if name not in names:
        near = nearest(name.replace(" ", "-").replace("_", "-"), names)
        hint = f'"{near}"' if near else "`fuelair fuels` lists them with their data"
        yield Problem("no such fuel", "fuel.name", name, ", ".join(names), hint)


def _blend(draft: Draft) -> Iterator[Problem]:
    parts = draft.get("fuel.blend")
    if parts is None:
        return
    bases = [(part.mass_fraction is not None, part.volume_fraction is not None) for part in parts]
    for number, (mass, volume) in enumerate(bases):
        if mass == volume:
            message = "needs exactly one of mass_fraction and volume_fraction"
            yield Problem(message, f"fuel.blend[{number}]")
    if any(mass == volume for mass, volume in bases):
        return
    if len({mass for mass, _ in bases}) > 1:
        yield Problem("mass_fraction and volume_fraction are mixed", "fuel.blend", None, "the same kind for all parts")
    else:
        yield from _as_fuel_sees_it(lambda: _fuel_record(draft, "blend"))


def _own(draft: Draft) -> Iterator[Problem]:
    if draft.get("fuel.own") is not None:
        yield from _as_fuel_sees_it(lambda: _fuel_record(draft, "own"))


def _fuel_record(draft: Draft, kind: str) -> object:
    from fuelair.case import fuels

    return fuels.blend(draft.get("fuel.blend")) if kind == "blend" else fuels.own(draft.get("fuel.own"))


def _as_fuel_sees_it(build: Callable[[], object]) -> Iterator[Problem]:
    """Let the fuel room judge; its problems carry the same key paths."""
    try:
        build()
    except InputError as error:
        for problem in error.problems:
            yield replace(problem, key=problem.key.replace("fuel.own.mass_fractions", "fuel.own"))


RULES: Final[tuple[Rule, ...]] = (
    _one_amount, _one_pair, _residual, _two_stroke, _heat_addition, _gas, _real_gas, _ambient, _evaporation, _recirculated,
    _water, _geometry, _timing,
    _one_fuel, _fuel_name, _blend, _own, spreads.rule,
)  # fmt: skip
