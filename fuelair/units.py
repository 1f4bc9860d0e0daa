"""Units at the edges of fuelair: one table of some sixty units, and the reading of what a person writes.

Inside, everything is SI, with three conventions of the trade: angles are degrees, speed is
revolutions per second (rev/s, that is 1/s), molar mass is kg/kmol. :func:`parse` turns text or a plain number into such a
number. Other rooms import these names from `fuelair.quantities`.

Units are converted in exact rational arithmetic and rounded once, so ``"86 mm"`` is exactly
``0.086`` and ``"2.9 bar"`` exactly ``290000.0``.
"""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from numbers import Real
from types import MappingProxyType
from typing import Final, NoReturn

from fuelair.errors import InputError, Problem

STANDARD_ATMOSPHERE: Final = 101325.0
"""Pressure [Pa] that gauge units add when no ambient pressure is stated (ISO 2533, sea level)."""

_LONGEST = 60  # characters of a value with its unit; longer text is a mistake, not a number


@dataclass(frozen=True, slots=True)
class Unit:
    """One unit: ``SI = number * factor + offset``, and plus the ambient pressure if ``gauge``."""

    name: str
    dimension: str
    factor: Fraction
    offset: Fraction = Fraction(0)
    gauge: bool = False

    def to_si(self, number: Fraction | float, *, ambient_pressure: float = STANDARD_ATMOSPHERE) -> float:
        """Return ``number`` of this unit in SI, rounded once."""
        ambient = Fraction(ambient_pressure) if self.gauge else Fraction(0)
        return _rounded(_exact(number) * self.factor + self.offset + ambient)

    def from_si(self, value: float, *, ambient_pressure: float = STANDARD_ATMOSPHERE) -> float:
        """Return the SI ``value`` in this unit, rounded once."""
        ambient = Fraction(ambient_pressure) if self.gauge else Fraction(0)
        return _rounded((_exact(value) - self.offset - ambient) / self.factor)


def _rounded(number: Fraction) -> float:
    try:
        return float(number)
    except OverflowError:
        return math.inf if number > 0 else -math.inf


def _exact(number: Fraction | float) -> Fraction:
    """The decimal that a person sees: 0.1 is one tenth, not its binary neighbour."""
    return number if isinstance(number, Fraction) else Fraction(repr(float(number)))


_POUND_FORCE = Fraction("4.4482216152605")  # N, exact by definition
_INCH = Fraction(254, 10000)  # m, exact by definition
_HORSEPOWER = 550 * Fraction("0.3048") * _POUND_FORCE  # W
_KELVIN = Fraction("273.15")
_TURN = Fraction(math.pi) * 2

# One line a dimension. The first unit is the one stored; a plain number is in it.
_FACTORS: Final[dict[str, dict[str, Fraction | int | str]]] = {
    "pressure": {"Pa": 1, "hPa": 100, "kPa": 1000, "MPa": 10**6, "bar": 10**5, "mbar": 100,
                 "psi": _POUND_FORCE / _INCH**2, "atm": 101325, "mmHg": "133.322387415"},
    "temperature": {"K": 1, "degC": 1, "degF": Fraction(5, 9)},
    "ratio": {"1": 1, "%": "0.01", "permille": "0.001", "ppm": "0.000001"},
    "length": {"m": 1, "mm": "0.001", "cm": "0.01", "um": "0.000001", "km": 1000, "in": _INCH, "ft": 12 * _INCH},
    "speed": {"rev/s": 1, "1/s": 1, "rpm": Fraction(1, 60), "1/min": Fraction(1, 60), "rev/min": Fraction(1, 60),
              "rad/s": 1 / _TURN},
    "angle": {"deg": 1, "rad": 360 / _TURN},
    "area": {"m2": 1, "cm2": "0.0001", "mm2": "0.000001"},
    "volume": {"m3": 1, "L": "0.001", "l": "0.001", "dm3": "0.001", "cm3": "0.000001", "mm3": "0.000000001"},
    "mass": {"kg": 1, "g": "0.001", "mg": "0.000001", "t": 1000},
    "time": {"s": 1, "ms": "0.001", "h": 3600},
    "energy": {"J": 1, "kJ": 1000, "MJ": 10**6, "kWh": 3600000},
    "power": {"W": 1, "kW": 1000, "MW": 10**6, "hp": _HORSEPOWER},
    "specific energy": {"J/kg": 1, "kJ/kg": 1000, "MJ/kg": 10**6, "J/g": 1000, "kWh/kg": 3600000},
    "specific heat capacity": {"J/(kg K)": 1, "J/kgK": 1, "kJ/(kg K)": 1000, "kJ/kgK": 1000},
    "density": {"kg/m3": 1, "g/cm3": 1000, "kg/L": 1000, "kg/l": 1000, "g/L": 1},
    "specific volume": {"m3/kg": 1, "L/kg": "0.001"},
    "molar mass": {"kg/kmol": 1, "g/mol": 1, "kg/mol": 1000},
    "expansivity": {"1/K": 1},
    "mass flow": {"kg/s": 1, "g/s": "0.001", "kg/h": Fraction(1, 3600), "t/h": Fraction(1000, 3600)},
    "mass per energy": {"kg/J": 1, "g/kWh": Fraction(1, 3600000000), "g/MJ": Fraction(1, 10**9)},
    "torque": {"Nm": 1, "kNm": 1000},
}  # fmt: skip
_OFFSETS: Final = {"degC": _KELVIN, "degF": Fraction("459.67") * Fraction(5, 9)}
_GAUGED: Final = ("bar", "mbar", "kPa", "MPa", "psi")


def _build_units() -> dict[str, dict[str, Unit]]:
    units = {
        dimension: {n: Unit(n, dimension, Fraction(f), _OFFSETS.get(n, Fraction(0))) for n, f in factors.items()}
        for dimension, factors in _FACTORS.items()
    }
    for name in _GAUGED:
        units["pressure"][f"{name}(g)"] = Unit(f"{name}(g)", "pressure", Fraction(_FACTORS["pressure"][name]), gauge=True)
    return units


UNITS: Final[Mapping[str, Mapping[str, Unit]]] = MappingProxyType(_build_units())
"""Dimension to its units by name; the first unit of each is the stored one."""

_NUMBER = r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,3})?"
_WITH_UNIT = re.compile(rf"({_NUMBER})\s*(.*)")
_PROPORTION = re.compile(rf"({_NUMBER})\s*:\s*({_NUMBER})")
_COMMA = re.compile(r"[0-9],[0-9]")


def stored_unit(dimension: str) -> str:
    """Return the name of the unit in which fuelair stores a dimension, e.g. ``"Pa"``."""
    return next(iter(UNITS[dimension]))


def parse(value: object, dimension: str, *, ambient_pressure: float = STANDARD_ATMOSPHERE, difference: bool = False) -> float:
    """Read a plain number, or text with number and unit.

    Parameters
    ----------
    value : a plain number, taken as stored units already, or text with number and unit, e.g.
        ``"2.9 bar"``, ``"47 degC"``, ``"35 %"``; for the dimension ``ratio`` also ``"0.6"`` and ``"17:1"``.
    dimension : a key of :data:`UNITS`.
    ambient_pressure : [Pa] added to gauge units such as ``bar(g)``.
    difference : the value is a width, so that ``"3 degC"`` is 3 K and ``"0.2 bar(g)"`` 0.2 bar.

    Returns
    -------
    The number in stored units: SI; angles in degrees, speed in rev/s, molar mass in kg/kmol.

    Raises
    ------
    InputError : not a finite number, no unit, a unit of another dimension, anything else in the text.

    >>> parse("86 mm", "length"), parse("2.9 bar", "pressure"), parse("17:1", "ratio")
    (0.086, 290000.0, 17.0)
    """
    if isinstance(value, bool) or not isinstance(value, (Real, str)):
        _refuse("neither a number nor text with a unit", value, dimension, _example(dimension))
    if not isinstance(value, str):
        return _plain(value, dimension)
    if len(value) > _LONGEST:
        _refuse("text far too long for a number with a unit", value[:_LONGEST] + " ...", dimension, _example(dimension))
    text = _normal(value)
    if dimension == "ratio" and (pair := _PROPORTION.fullmatch(text)):
        return _proportion(value, pair[1], pair[2])
    match = _WITH_UNIT.fullmatch(text)
    if match is None:
        _refuse_text(value, text, dimension)
    number, name = match[1], match[2]
    if _COMMA.match(text[len(number) - 1 :]):
        point, none = text.replace(",", "."), text.replace(",", "")
        hint = f'"{point}" with a decimal point, or "{none}" without a thousands separator'
        _refuse("comma in a number", value, dimension, hint)
    if not name and dimension != "ratio":
        _refuse("number in text without a unit", value, dimension, f'"{number} {_common(dimension)}"')
    unit = UNITS[dimension].get(name or "1")
    if unit is None:
        _refuse_unit(value, number, name, dimension)
    if not math.isfinite(float(number)):
        _refuse("not a finite number", value, dimension, _example(dimension))
    exact = Fraction(number)
    result = _rounded(exact * unit.factor) if difference else unit.to_si(exact, ambient_pressure=ambient_pressure)
    if not math.isfinite(result):
        _refuse("number too large", value, dimension, _example(dimension))
    return result


def is_gauge(value: object) -> bool:
    """Say whether ``value`` is text that ends in a gauge unit such as ``bar(g)``."""
    return isinstance(value, str) and _normal(value).endswith("(g)")


def _plain(value: Real, dimension: str) -> float:
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        _refuse("not a finite number", str(number), dimension, _example(dimension))
    return number


def _proportion(value: str, above: str, below: str) -> float:
    top, bottom = float(above), float(below)
    if not (math.isfinite(top) and math.isfinite(bottom)) or bottom <= 0:
        _refuse("not a proportion of two positive numbers", value, "ratio", '"17:1"')
    result = _rounded(Fraction(above) / Fraction(below))
    if not math.isfinite(result):
        _refuse("number too large", value, "ratio", '"17:1"')
    return result


_LOOKALIKES: Final = str.maketrans({"\u00b5": "u", "\u03bc": "u", "\u00b0": "deg", "\u2212": "-", "\u2030": "permille"})


def _normal(text: str) -> str:
    """Bring signs that look alike to one spelling: degree, micro, minus, middle dot, raised 2 and 3, spaces."""
    plain = text.translate(_LOOKALIKES)
    plain = re.sub("(?<=[A-Za-z])[\u00b7\u22c5](?=[A-Za-z])", " ", plain)
    plain = re.sub("(?<=[A-Za-z])\u00b2", "2", re.sub("(?<=[A-Za-z])\u00b3", "3", plain))
    return " ".join(plain.split())


def _common(dimension: str) -> str:
    """The unit that a person would most likely write."""
    likely = {"pressure": "bar", "length": "mm", "speed": "rpm", "specific energy": "MJ/kg", "mass": "g", "ratio": "%"}
    return likely.get(dimension, stored_unit(dimension))


def _example(dimension: str) -> str:
    numbers = {"pressure": "2.9", "temperature": "335", "length": "86", "speed": "1500", "angle": "-120", "ratio": "35"}
    return f'"{numbers.get(dimension, "1.5")} {_common(dimension)}"'


def _refuse(message: str, value: object, dimension: str, hint: str) -> NoReturn:
    what = "a plain number or text with one of" if dimension == "ratio" else "number with unit, one of"
    raise InputError(Problem(message, value=value, allowed=f"{what} {', '.join(UNITS[dimension])}", hint=hint))


def _refuse_text(value: str, text: str, dimension: str) -> NoReturn:
    if text.lower().lstrip("+-").startswith(("nan", "inf")):
        _refuse("not a finite number", value, dimension, _example(dimension))
    if text in UNITS[dimension]:
        _refuse(f"unit {text} without a number", value, dimension, f'"1.5 {text}"')
    _refuse("not a number with a unit", value, dimension, _example(dimension))


def _refuse_unit(value: str, number: str, name: str, dimension: str) -> NoReturn:
    own = UNITS[dimension]
    if name.startswith(":"):
        hint = _example(dimension) if dimension != "ratio" else '"17:1"'
        _refuse("a proportion such as 17:1 carries no unit", value, dimension, hint)
    known = next((other for other, units in UNITS.items() if name in units), None)
    if known is not None:
        _refuse(f"{name} is a unit of {known}, not of {dimension}", value, dimension, f'"{number} {_common(dimension)}"')
    by_lower = {unit.lower(): unit for unit in reversed(list(own))} | _ALIASES.get(dimension, {})
    near = difflib.get_close_matches(name.lower(), by_lower, n=1, cutoff=0.5)
    hint = f'"{number} {by_lower[near[0]]}"' if near else _example(dimension)
    _refuse(f"unknown unit {name!r}", value, dimension, hint)


# What people write that is not accepted because it is ambiguous or sloppy, and the unit it points to.
_ALIASES: Final[dict[str, dict[str, str]]] = {
    "temperature": {"c": "degC", "celsius": "degC", "f": "degF", "kelvin": "K", "degk": "K"},
    "pressure": {"barg": "bar(g)", "psig": "psi(g)", "bara": "bar", "psia": "psi", "torr": "mmHg"},
    "ratio": {"percent": "%", "pct": "%"},
    "speed": {"hz": "1/s", "r/min": "rpm", "u/min": "rpm"},
    "angle": {"degrees": "deg", "degca": "deg", "ca": "deg"},
    "length": {"inch": "in", '"': "in", "meter": "m", "metre": "m"},
}


def in_unit(value: float, unit: str, dimension: str, *, digits: int = 6) -> str:
    """Return an SI value as text in a unit, e.g. ``in_unit(290000.0, "bar", "pressure")`` is ``"2.9 bar"``."""
    number = UNITS[dimension][unit].from_si(value)
    return f"{number:.{digits}g}" if unit == "1" else f"{number:.{digits}g} {unit}"
