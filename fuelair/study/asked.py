"""Reading what a study is asked: a key with its range, a quantity with its value or limit; and saying values in words."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, replace
from importlib.metadata import version
from typing import Any, Final

import numpy as np
from pydantic_core import PydanticCustomError

from fuelair.case import Case, contradictions, fuels, keys
from fuelair.case.fields import Within
from fuelair.errors import InputError, Problem
from fuelair.gas.engine import Status
from fuelair.gas.engines import EngineName
from fuelair.gas.species import build, data_versions
from fuelair.quantities import QUANTITIES, STANDARD_ATMOSPHERE, UNITS, in_unit, parse, shown, stored_unit
from fuelair.study import figures
from fuelair.study.sampling import plain
from fuelair.version import __version__

FORMAT = 1
"""Version of the JSON layouts of the studies."""
DIGITS = 9
"""Of a number of the case in words."""
_DIMENSIONS: Final = {
    "J_per_kg": "specific energy",
    "kg_per_J": "mass per energy",
    "kg_per_s": "mass flow",
    "Pa": "pressure",
    "kg": "mass",
    "K": "temperature",
    "W": "power",
}
_LIMIT = re.compile(r"([^<>=]+)(<=|>=)(.+)")


@dataclass(frozen=True, slots=True)
class Varied:
    """A number of the case and the range in which it varies, in stored units."""

    key: str
    kind: Within
    low: float
    high: float

    def words(self, value: float) -> str:
        """A value with its unit."""
        return in_unit(value, self.kind.unit, self.kind.dimension, digits=DIGITS)

    @property
    def unit(self) -> str:
        """Unit in which people see the key, "" for a pure number."""
        return "" if self.kind.unit == "1" else self.kind.unit

    @property
    def one_unit(self) -> float:
        """Stored units in one of that unit."""
        return float(UNITS[self.kind.dimension][self.kind.unit].factor)

    def to_dict(self) -> dict[str, Any]:
        """For JSON."""
        return {"key": self.key, "unit": stored_unit(self.kind.dimension), "low": self.low, "high": self.high}


@dataclass(frozen=True, slots=True)
class Hold:
    """A limit on a quantity, in SI: at most ``bound`` if ``upper``, else at least."""

    quantity: str
    upper: bool
    bound: float

    def words(self) -> str:
        """The limit as a person writes it."""
        return f"{label(self.quantity)} {'<=' if self.upper else '>='} {worded(self.quantity, self.bound)}"


def varied(case: Case, key: str, low: object = None, high: object = None) -> Varied:
    """A key of the case and its range; an end that is None is that of the key's allowed range.

    Raises
    ------
    InputError : no such key, not a physical number, or a range that the key does not allow.
    """
    kind = keys.kind(key)
    if not isinstance(kind, Within) or key.startswith(keys.NO_EFFECT):
        what = "has no effect on any figure" if key.startswith(keys.NO_EFFECT) else "is not a physical number"
        raise InputError(
            Problem(what, key, allowed="a key such as charge.pressure", hint="`fuelair sweep` varies names and counts")
        )
    least, most = kind.low, kind.high
    if key == "engine.exhaust_closing":
        least, most = contradictions.EXHAUST_CLOSING[case.engine.strokes_per_cycle]
    ends = [_end(case, key, kind, value, usual) for value, usual in ((low, least), (high, most))]
    if not ends[0] < ends[1]:
        raise InputError(Problem("the range has no width", key, f"{low}:{high}", "LOW:HIGH with LOW below HIGH"))
    return Varied(key, kind, *ends)


def _end(case: Case, key: str, kind: Within, value: object, usual: float) -> float:
    if value is None:
        return usual
    try:
        return float(replace(kind, words=()).check(value, ambient_pressure=_zero(case)))
    except PydanticCustomError as error:
        about = error.context or {}
        raise InputError(Problem(about["message"], key, value, about["allowed"], about["hint"])) from None


def read_varied(case: Case, text: str) -> Varied:
    """``KEY`` or ``KEY=LOW:HIGH``, each end a plain number in stored units or with its unit, as in `sampling`."""
    key, given, span = text.partition("=")
    if not given:
        return varied(case, key.strip())
    ends = [plain(end.strip()) for end in span.split(":")]
    if len(ends) != 2:
        hint = f"{key.strip()}=LOW:HIGH, e.g. charge.equivalence_ratio=0.3:1.2"
        raise InputError(Problem("not a range", key.strip(), span, "LOW:HIGH", hint))
    return varied(case, key.strip(), *ends)


def read_target(case: Case, text: str) -> tuple[str, float]:
    """``QUANTITY=VALUE`` as the quantity's key and the value in SI."""
    name, given, value = text.partition("=")
    if not given or name.endswith(("<", ">")):
        raise InputError(Problem("not a target", "--target", text, "QUANTITY=VALUE", '"peak_pressure=200 bar"'))
    quantity = figures.resolve(name.strip())
    return quantity, value_of(case, quantity, value.strip())


def read_holds(case: Case, text: str) -> list[Hold]:
    """``QUANTITY<=VALUE``, ``QUANTITY>=VALUE``, or ``limits`` for those of the case's [limits]."""
    if text.strip() == "limits":
        written = case.limits.model_dump(exclude_none=True)
        if not written:
            raise InputError(Problem("the case has no [limits]", "--hold", text, hint='[limits] peak_pressure = "200 bar"'))
        return [Hold(figures.resolve(name), True, bound) for name, bound in written.items()]
    match = _LIMIT.fullmatch(text)
    if match is None:
        raise InputError(
            Problem("not a limit", "--hold", text, "QUANTITY<=VALUE or QUANTITY>=VALUE, or limits", '"peak_pressure<=200 bar"')
        )
    quantity = figures.resolve(match[1].strip())
    return [Hold(quantity, match[2] == "<=", value_of(case, quantity, match[3].strip()))]


def value_of(case: Case, quantity: str, value: object) -> float:
    """A value of a quantity in SI: a number, or text with a unit; plain text of a number is in SI.

    Raises
    ------
    InputError : not a number with a unit of this quantity.
    """
    try:
        return parse(plain(value), dimension(quantity), ambient_pressure=_zero(case))
    except InputError as error:
        raise InputError(*(replace(problem, key=quantity) for problem in error.problems)) from None


def _zero(case: Case) -> float:
    outside = case.charge.ambient_pressure
    return STANDARD_ATMOSPHERE if outside is None else outside


def dimension(quantity: str) -> str:
    """Dimension of a quantity by the unit that its key ends in, see `fuelair.units.UNITS`."""
    name = quantity.removesuffix("_fuel")
    return next((kind for unit, kind in _DIMENSIONS.items() if name.endswith(f"_{unit}")), "ratio")


def label(quantity: str) -> str:
    """Plain name of a quantity."""
    return QUANTITIES[quantity].label if quantity in QUANTITIES else quantity


def within(quantity: str) -> str:
    """Plain name of a quantity inside a sentence."""
    name = label(quantity)
    return name[0].lower() + name[1:] if name[1:2].islower() else name


def worded(quantity: str, value: float) -> str:
    """A value of a quantity as people see it."""
    if quantity in QUANTITIES:
        return shown(quantity, value)
    return in_unit(value, stored_unit(dimension(quantity)), dimension(quantity), digits=5)


def number(value: float) -> float | None:
    """A number for JSON, None for NaN and infinity."""
    return float(value) if np.isfinite(value) else None


def record(values: Mapping[str, float]) -> dict[str, float | None]:
    """Numbers by name for JSON."""
    return {name: number(value) for name, value in values.items()}


def versions(case: Case, engine: EngineName) -> dict[str, str]:
    """Versions and data that a study's figures rest on."""
    found = {"fuelair": __version__, "numpy": np.__version__, "scipy": version("scipy"), **data_versions()}
    if engine == "compiled":
        found["numba"] = version("numba")
    return found | {"species_table": build(fuels.record(case.fuel).vapour).digest}


def failures(status: Any) -> dict[str, int]:
    """Failed rows by status label, most first."""
    codes, counts = np.unique(np.asarray(status), return_counts=True)
    found = {Status(int(code)).label: int(n) for code, n in zip(codes, counts, strict=True) if code != Status.OK}
    return dict(sorted(found.items(), key=lambda item: -item[1]))
