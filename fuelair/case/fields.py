"""The kinds of value that a case file may hold, each with its check, its wording and its JSON Schema.

Used as metadata of typed fields: ``bore: Annotated[float, Within("length", 0.02, 1.2, "mm")]``. A value
that does not pass raises a pydantic error of type :data:`OWN_ERROR` whose context carries the parts of a
`fuelair.errors.Problem`, so that no wording but ours reaches the user.
"""

from __future__ import annotations

import difflib
from abc import ABC, abstractmethod
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from numbers import Real
from typing import Any, Final, NoReturn

from pydantic import BaseModel, ConfigDict, Field, GetCoreSchemaHandler, GetJsonSchemaHandler
from pydantic.fields import FieldInfo
from pydantic_core import PydanticCustomError
from pydantic_core.core_schema import CoreSchema, ValidationInfo, with_info_plain_validator_function

from fuelair.errors import InputError
from fuelair.quantities import STANDARD_ATMOSPHERE, UNITS, in_unit, is_gauge, parse, stored_unit

OWN_ERROR: Final = "fuelair"
_STARTS_AS_NUMBER: Final = "^\\s*[-+\u2212]?[0-9.]"
LONGEST_TEXT: Final = 200  # characters of a title or a name


def nearest(name: str, names: Iterable[str]) -> str:
    """Return the name that was most likely meant, or ``""``."""
    by_lower = {known.lower(): known for known in names}
    found = difflib.get_close_matches(name.lower(), by_lower, n=1, cutoff=0.55)
    return by_lower[found[0]] if found else ""


def fail(message: str, *, allowed: str = "", hint: str = "") -> NoReturn:
    """Raise the error that becomes a Problem with this message, allowed range and hint."""
    raise PydanticCustomError(OWN_ERROR, "{message}", {"message": message, "allowed": allowed, "hint": hint})


class Kind(ABC):
    """Base of the field kinds: hooks a check and a JSON Schema into pydantic."""

    @abstractmethod
    def check(self, value: object, *, ambient_pressure: float = STANDARD_ATMOSPHERE) -> Any:
        """Return the accepted value in stored units or raise a pydantic error."""

    @abstractmethod
    def allowed(self) -> str:
        """Return what is allowed, as text."""

    @abstractmethod
    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of what may be written."""

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return with_info_plain_validator_function(self._validate)

    def __get_pydantic_json_schema__(self, core: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        return self.schema()

    def _validate(self, value: object, info: ValidationInfo) -> Any:
        context = info.context if isinstance(info.context, Mapping) else {}
        return self.check(value, ambient_pressure=float(context.get("ambient_pressure", STANDARD_ATMOSPHERE)))


@dataclass(frozen=True)
class Within(Kind):
    """A physical number between ``low`` and ``high`` (stored units, both included).

    Attributes
    ----------
    dimension : key of `fuelair.quantities.UNITS`.
    low, high : allowed range in stored units.
    unit : unit in which messages state the range.
    words : words allowed instead of a number, e.g. ``("solve",)``.
    absolute : refuse gauge units.
    """

    dimension: str
    low: float
    high: float
    unit: str = "1"
    words: tuple[str, ...] = ()
    absolute: bool = False

    def allowed(self) -> str:
        """Return the allowed range as text with its unit."""
        low, high = (in_unit(end, self.unit, self.dimension) for end in (self.low, self.high))
        words = "".join(f', or "{word}"' for word in self.words)
        return f"{low} to {high}{words}"

    def check(self, value: object, *, ambient_pressure: float = STANDARD_ATMOSPHERE) -> float | str:
        """Return the number in stored units, or the word."""
        if isinstance(value, str) and value in self.words:
            return value
        if self.absolute and is_gauge(value):
            fail("must be an absolute pressure", allowed=self.allowed(), hint="a unit without (g)")
        try:
            number = parse(value, self.dimension, ambient_pressure=ambient_pressure)
        except InputError as error:
            problem = error.problems[0]
            hint = self._word_hint(value) or problem.hint
            fail(problem.message, allowed=f"{self.allowed()} ({problem.allowed})", hint=hint)
        if not self.low <= number <= self.high:
            fail(self._outside(value, number), allowed=self.allowed(), hint=self._range_hint(value, number))
        return number

    def schema(self) -> dict[str, Any]:
        """A number in stored units with its range, or text with a unit."""
        return {
            "type": ["number", "string"],
            "minimum": self.low,
            "maximum": self.high,
            "pattern": "|".join([_STARTS_AS_NUMBER, *(f"^{word}$" for word in self.words)]),
            "x-dimension": self.dimension,
            "x-stored-unit": stored_unit(self.dimension),
            "x-shown-unit": self.unit,
            "x-units": list(UNITS[self.dimension]),
            **({"x-words": list(self.words)} if self.words else {}),
        }

    def _outside(self, value: object, number: float) -> str:
        if isinstance(value, str) or self.dimension == "ratio":
            return "outside its range"
        unit = stored_unit(self.dimension)
        if unit == self.unit:
            return f"outside its range (a plain number is in {unit})"
        return f"outside its range (a plain number is in {unit}: {in_unit(number, self.unit, self.dimension)})"

    def _range_hint(self, value: object, number: float) -> str:
        """For a plain number that fits in another unit: that unit; for an angle: the same crank position."""
        if self.dimension == "angle":
            turned = [number + turn for turn in (-720.0, 720.0, -360.0, 360.0) if self.low <= number + turn <= self.high]
            return f'"{turned[0]:g} deg" (0 is the firing dead centre)' if turned else "0 is the firing dead centre"
        if self.dimension == "ratio" or not isinstance(value, Real):
            return ""
        preferred = [self.unit, *UNITS[self.dimension]]
        for name in preferred:
            unit = UNITS[self.dimension][name]
            if not unit.gauge and self.low <= unit.to_si(float(value)) <= self.high:
                return f'"{float(value):g} {name}", if that is meant'
        return ""

    def _word_hint(self, value: object) -> str:
        word = nearest(value, self.words) if isinstance(value, str) else ""
        return f'"{word}"' if word else ""


@dataclass(frozen=True)
class Whole(Kind):
    """A whole number of things: one of ``choices``, or between ``low`` and ``high``."""

    low: int
    high: int
    choices: tuple[int, ...] = ()

    def allowed(self) -> str:
        """Return the allowed numbers as text."""
        return " or ".join(map(str, self.choices)) if self.choices else f"whole number, {self.low} to {self.high}"

    def check(self, value: object, *, ambient_pressure: float = STANDARD_ATMOSPHERE) -> int:
        """Return the whole number; 6.0 counts as 6."""
        if isinstance(value, bool) or not isinstance(value, Real) or not float(value).is_integer():
            fail("not a whole number", allowed=self.allowed())
        number = int(float(value))
        if not self.low <= number <= self.high or (self.choices and number not in self.choices):
            fail("outside its range", allowed=self.allowed())
        return number

    def schema(self) -> dict[str, Any]:
        """An integer with its range, or an enumeration."""
        if self.choices:
            return {"type": "integer", "enum": list(self.choices)}
        return {"type": "integer", "minimum": self.low, "maximum": self.high}


@dataclass(frozen=True)
class Choice(Kind):
    """One of some names. ``later`` holds names that exist but not in this release, with the reason."""

    names: tuple[str, ...]
    later: tuple[tuple[str, str], ...] = ()

    def allowed(self) -> str:
        """Return the names in quotes."""
        return ", ".join(f'"{name}"' for name in self.names)

    def check(self, value: object, *, ambient_pressure: float = STANDARD_ATMOSPHERE) -> str:
        """Return the name."""
        allowed = self.allowed()
        if not isinstance(value, str):
            fail("not a name", allowed=allowed)
        for name, reason in self.later:
            if value == name:
                fail(reason, allowed=allowed)
        if value not in self.names:
            near = nearest(value, self.names)
            fail("no such choice", allowed=allowed, hint=f'"{near}"' if near else "")
        return value

    def schema(self) -> dict[str, Any]:
        """An enumeration of names."""
        return {"type": "string", "enum": list(self.names)}


@dataclass(frozen=True)
class Text(Kind):
    """Free text of one line, such as a title or the name of a fuel."""

    empty: bool = False

    def allowed(self) -> str:
        """Return the allowed length."""
        return f"text of one line, up to {LONGEST_TEXT} characters"

    def check(self, value: object, *, ambient_pressure: float = STANDARD_ATMOSPHERE) -> str:
        """Return the text."""
        allowed = self.allowed()
        if not isinstance(value, str):
            fail("not text", allowed=allowed, hint='"..." in quotes')
        if len(value) > LONGEST_TEXT or not value.isprintable():
            fail("too long, or more than one line", allowed=allowed)
        if not value.strip() and not self.empty:
            fail("empty", allowed=allowed)
        return value

    def schema(self) -> dict[str, Any]:
        """A short string."""
        return {"type": "string", "maxLength": LONGEST_TEXT, **({} if self.empty else {"minLength": 1})}


def kind_of(field: FieldInfo) -> Kind | None:
    """Return the kind of a field, or None for a nested table or list."""
    return next((item for item in field.metadata if isinstance(item, Kind)), None)


class Section(BaseModel):
    """Base of all sections: frozen, unknown keys are errors."""

    model_config = ConfigDict(extra="forbid", frozen=True)


def optional(meaning: str, default: Any = None, *, example: object = None) -> Any:
    """A key that may be left out; ``example`` is what a template shows if there is no default."""
    return Field(default=default, description=meaning, examples=None if example is None else [example])


def needed(meaning: str) -> Any:
    """A key that must be there."""
    return Field(description=meaning)
