"""What a result says in words: the verdict, the warnings, the sources it rests on."""

from __future__ import annotations

from collections.abc import Iterator

from fuelair.assessment import Assessment
from fuelair.cycle.result import REAL_MODEL, REFERENCE_MODEL
from fuelair.gas.engine import Status
from fuelair.gas.graphite import carbon_activity
from fuelair.quantities import QUANTITIES, shown
from fuelair.sources import Source, cite

LIMITS = {
    "peak_pressure": "peak_pressure_Pa",
    "peak_temperature": "peak_temperature_K",
    "compression_pressure": "compression_pressure_Pa",
    "compression_temperature": "compression_temperature_K",
    "release_temperature": "release_temperature_K",
    "release_pressure": "release_pressure_Pa",
    "exhaust_temperature": "exhaust_temperature_K",
}
"""Keys of [limits] -> quantity they bound."""
LIMIT_SLACK = 1e-9
RICH = 1e-10
"""Missing oxygen [kmol/kg] from which a charge counts as rich."""
USUAL_RATIO = {"direct": (12.0, 24.0), "premixed": (6.0, 14.0), "port-liquid": (6.0, 14.0), "early-direct": (6.0, 14.0)}
"""Compression ratios in use, common practice."""
REAL_GAS_MATTERS = 0.01
"""Share of compression pressure from which the real gas is mentioned."""


def verdict(a: Assessment) -> str:
    """One sentence: what to expect, and how far off the constant-k air cycle is."""
    f = a.figures()
    result = a.results[a.headline]
    held = bool(result.flags["limited"][0])
    before, after = (a.exhaust_figures[k] for k in ("exhaust_temperature_before_scavenge_air_K", "exhaust_temperature_K"))
    text = (
        f"Expect a peak of {shown('peak_temperature_K', f['peak_temperature_K'])} (mass mean) and "
        f"{shown('peak_pressure_Pa', f['peak_pressure_Pa'])}{' (held)' if held else ''}, exhaust at "
        f"{shown('exhaust_temperature_K', after)}{'' if before == after else ' after scavenge air'} and "
        f"{shown('imep_gross_Pa', f['imep_gross_Pa'])} gross indicated mean pressure at "
        f"{shown('indicated_efficiency', f['indicated_efficiency'])} gross indicated efficiency"
    )
    if bool(result.flags["back-flow"][0]):
        text += ", with exhaust flowing back into the cylinder"
    return f"{text}; {_against_constant_k(a, f)}."


def _against_constant_k(a: Assessment, f: dict[str, float | None]) -> str:
    """How far off the constant-k air cycle is; for rich charges on the heat that the oxygen allows."""
    limited = a.companions.get("oxygen-limited-heat", {}).get("air-cold")
    name = "the constant-k air cycle" + (" (on the heat that the oxygen allows)" if limited is not None else "")
    cold = a.figures("air-cold")
    if limited is not None:
        solved = limited.status[0] == Status.OK
        cold = {k: float(v[0]) if solved else None for k, v in limited.figures.items()}
    peak, pressure, work = (cold[k] for k in ("peak_temperature_K", "peak_pressure_Pa", "work_J_per_kg"))
    if peak is None or pressure is None or work is None:
        return f"{name} has no solution here ({a.status('air-cold').label})"
    hot = peak - (f["peak_temperature_K"] or 0.0)
    high = pressure / (f["peak_pressure_Pa"] or 1.0) - 1.0
    eager = work / (f["work_J_per_kg"] or 1.0) - 1.0
    words = [f"{abs(hot):.0f} K too {'hot' if hot >= 0.0 else 'cold'}"]
    if abs(high) >= 0.005:
        words.append(f"{100 * abs(high):.0f} % too {'high' if high >= 0.0 else 'low'} in peak pressure")
    words.append(f"{100 * abs(eager):.0f} % too {'efficient' if eager >= 0.0 else 'inefficient'}")
    return f"{name} is {', '.join(words[:-1])} and {words[-1]}"


def warnings(a: Assessment) -> list[str]:
    """Everything a reader should mind, most binding first."""
    return [*_limits(a), *_mixture(a), *_validity(a), *(f"Fuel: {w}" for w in a.fuel.warnings)]


def _limits(a: Assessment) -> Iterator[str]:
    f = a.figures() | {"exhaust_temperature_K": a.exhaust_figures["exhaust_temperature_K"]}
    for key, quantity in LIMITS.items():
        limit, value = getattr(a.case.limits, key), f[quantity]
        if limit is not None and value is not None and value > limit * (1.0 + LIMIT_SLACK):
            yield (
                f"{QUANTITIES[quantity].label} {shown(quantity, value)} exceeds limits.{key} = "
                f"{shown(quantity, limit)} ({a.headline})."
            )


def _mixture(a: Assessment) -> Iterator[str]:
    oxygen = float(a.charge.oxygen_excess_ratio()[0])
    if float(a.charge.oxygen_left()[0]) < -RICH:
        yield (
            f"Rich: the trapped oxygen burns only {100 * oxygen:.1f} % of the fuel; {_unburned(a)} with the "
            "exhaust. Air-standard companions with oxygen-limited heat are in the results."
        )
    result = a.results[a.headline]
    if result.table is not None:
        activity = float(carbon_activity(result.table, result.point("burned").state)[0])
        released = float(carbon_activity(result.table, result.point("release").state)[0])
        if max(activity, released) > 1.0 - 1e-3:
            yield (
                "Solid carbon would form in equilibrium during expansion; composition is frozen from where it would begin. "
                "Expect soot."
            )
    if bool(result.flags["back-flow"][0]):
        yield "Release pressure is below exhaust pressure: exhaust flows back into the cylinder when the valve opens."
    drained = float(a.charge.drained_water[0])
    if drained > 1e-9:
        yield (
            f"{drained * 1e3:.1f} g of water per kg of dry air condense in the receiver or the exhaust cooler and are drained; "
            f"dew point after that {float(a.charge.receiver_dew_point[0]) - 273.15:.0f} degC."
        )
    ratio = float(a.charge.saturation_ratio[0])
    if ratio > 0.9:
        yield f"The fuel vapour is at {100 * ratio:.0f} % of saturation in the trapped charge: a little colder and it condenses."
    injector, compressed = float(a.charge.recipe.fuel_pressure[0]), a.figures()["compression_pressure_Pa"]
    if a.case.fuel.admission == "direct" and compressed is not None and injector <= compressed:
        yield (
            f"Fuel pressure {injector / 1e5:.4g} bar is not above the compression pressure: nothing could be injected. "
            "Give fuel.pressure; its enthalpy moves the peak temperature."
        )
    if a.exergy.from_correlation:
        yield "The fuel's exergy rests on the Szargut-Styrylo ratio, not on species data."


def _unburned(a: Assessment) -> str:
    return "carbon monoxide and hydrogen leave" if a.fuel.mass_fractions.get("C") else "hydrogen leaves"


def _validity(a: Assessment) -> Iterator[str]:
    low, high = USUAL_RATIO[a.case.fuel.admission]
    r = a.case.engine.compression_ratio
    if not low <= r <= high:
        yield f"Compression ratio {r:g} is outside the usual {low:g} to {high:g} for this admission (common practice)."
    yield from _real_gas(a)
    for model, result in a.results.items():
        status = Status(int(result.status[0]))
        if status is not Status.OK:
            yield f"{model}: {status.label}: {status.reason}."
    walls = "no heat to the walls" + (" but that of polytropic compression" if a.case.gas.compression_exponent else "")
    yield (
        f"Ideal cycle: instant adiabatic combustion, {walls}, no flow losses. It is a ceiling for work and "
        "efficiency; common practice puts real indicated efficiency at 0.80 to 0.90 of it."
    )


def _real_gas(a: Assessment) -> Iterator[str]:
    """What the ideal-gas law hides, and how far two real-gas models are apart."""
    real, ideal = a.figures(REAL_MODEL), a.figures(REFERENCE_MODEL)
    pressure, peak = real["compression_pressure_Pa"], real["peak_pressure_Pa"]
    base, ideal_peak = ideal["compression_pressure_Pa"], ideal["peak_pressure_Pa"]
    if pressure is None or peak is None or base is None or ideal_peak is None:
        return
    share, share_peak = pressure / base - 1.0, peak / ideal_peak - 1.0
    follows = f", peak pressure {100 * share_peak:.1f} %" if share_peak > 5e-4 else ""
    if a.headline != REAL_MODEL and share > REAL_GAS_MATTERS:
        yield (
            f"Real gas: compression pressure is {100 * share:.1f} % above the ideal gas "
            f"({shown('compression_pressure_Pa', pressure)}){follows}. "
            '[gas] model = "real" makes that model the headline.'
        )
    if a.second_opinion is not None and share > REAL_GAS_MATTERS:
        yield (
            f"Second opinion: Peng-Robinson puts compression pressure at {shown('compression_pressure_Pa', a.second_opinion)}, "
            f"{100 * (a.second_opinion / pressure - 1.0):+.1f} % against {REAL_MODEL}."
        )


def sources(a: Assessment) -> list[Source]:
    """Sources that this result rests on."""
    keys = ["cantera-data", "iso2533", "first-law", "freeze1740", "szargut"]
    if a.exergy.from_correlation:
        keys.append("styrylo1964")
    if float(a.charge.recipe.humidity[0]) > 0.0 or float(a.charge.recipe.egr_fraction[0]) > 0.0:
        keys.append("wagner1993")
    reference = {"iso-3046": "iso3046", "iso-1585": "iso1585", "iacs-m28": "iacsm28"}.get(a.case.charge.reference or "")
    if reference:
        keys.append(reference)
    if a.status(REAL_MODEL) is Status.OK:
        keys += ["virial", "lemmon2000"]
    if a.second_opinion is not None:
        keys.append("pengrobinson1976")
    return cite(*keys)
