"""The section [tolerance]: how far the numbers of a case may lie from what is written, and which move together.

A spread belongs to one numeric key and is read in that key's unit. The rules between its keys stand in
`fuelair.case.spreads`.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Annotated, Any, Final, Literal, get_args

from pydantic_core.core_schema import ValidationInfo

from fuelair.case.fields import Choice, Kind, Section, Whole, Within, fail, nearest, needed, optional
from fuelair.errors import InputError
from fuelair.quantities import STANDARD_ATMOSPHERE, parse

Distribution = Literal["normal", "uniform", "triangular"]
Measure = Literal["absolute", "relative"]

ROWS: Final = tuple(2**k for k in range(8, 18))
"""Sizes of a sample: powers of two, on which a Sobol net is balanced."""
USUAL_ROWS, USUAL_SEED, USUAL_COVERAGE = 4096, 0, 2.0
LARGEST_COEFFICIENT = 0.999
_SHARES: Final = ("%", "permille", "ppm", "\u2030")


def numbers() -> dict[str, Within]:
    """Return the keys that may spread, see `fuelair.case.keys.numbers`."""
    from fuelair.case import keys  # only here, for it imports the schema, which imports this module

    return keys.numbers()


@dataclass(frozen=True)
class NumberKey(Kind):
    """The path of a key that is a physical number."""

    def allowed(self) -> str:
        """Return an example."""
        return "the path of a key that is a physical number, such as charge.temperature"

    def check(self, value: object, *, ambient_pressure: float = STANDARD_ATMOSPHERE) -> str:
        """Return the key path."""
        known = numbers()
        if not isinstance(value, str):
            fail("not the path of a key", allowed=self.allowed(), hint='"charge.temperature"')
        if value not in known:
            by_name = {key.rpartition(".")[2]: key for key in known}
            near = by_name.get(value) or nearest(value, known)
            fail("no such numeric key", allowed=self.allowed(), hint=f'"{near}"' if near else "")
        return value

    def schema(self) -> dict[str, Any]:
        """An enumeration of key paths."""
        return {"type": "string", "enum": list(numbers())}


@dataclass(frozen=True)
class OfKey(Kind):
    """A number in the unit of the key named beside it: a place in its range, or (``width``) a positive width."""

    width: bool = False

    def allowed(self) -> str:
        """Return what is allowed for any key."""
        return "a positive width in the unit of its key" if self.width else "a value that its key accepts"

    def check(self, value: object, *, ambient_pressure: float = STANDARD_ATMOSPHERE) -> Any:
        """Return the value as it is: without its key nothing more can be said."""
        return value

    def schema(self) -> dict[str, Any]:
        """A number, or text with a unit."""
        return {"type": ["number", "string"], **({"exclusiveMinimum": 0} if self.width else {})}

    def _validate(self, value: object, info: ValidationInfo) -> Any:
        kind = numbers().get(info.data.get("key", ""))
        if kind is None or (self.width and "measure" not in info.data):  # wrong themselves, which is said there
            return value
        if self.width:
            return _width(value, kind, info.data.get("measure"))
        context = info.context if isinstance(info.context, Mapping) else {}
        zero = float(context.get("ambient_pressure", STANDARD_ATMOSPHERE))
        return replace(kind, words=()).check(value, ambient_pressure=zero)


def _width(value: object, kind: Within, measure: Measure | None) -> float:
    share = isinstance(value, str) and value.strip().endswith(_SHARES)
    if share and measure is None:
        fail("a width in % leaves open whether it is a share of the value", hint='measure = "relative", or "absolute"')
    dimension = "ratio" if measure == "relative" else kind.dimension
    try:
        number = parse(value, dimension, difference=True)
    except InputError as error:
        fail(error.problems[0].message, allowed=error.problems[0].allowed, hint=error.problems[0].hint)
    if not number > 0.0:
        fail("a width must be above zero")
    return number


class Spread(Section):
    """How one number spreads."""

    key: Annotated[str, NumberKey()] = needed("path of the key that spreads, e.g. charge.temperature")
    distribution: Annotated[Distribution, Choice(get_args(Distribution))] = needed("shape of the spread")
    measure: Annotated[Measure | None, Choice(get_args(Measure))] = optional(
        "relative: the width is a share of the centre; default: absolute, in the unit of the key", example="relative"
    )
    standard_deviation: Annotated[float | None, OfKey(width=True)] = optional("width of a normal spread", example="3 K")
    half_width: Annotated[float | None, OfKey(width=True)] = optional(
        "from the centre to either end of a uniform or triangular spread", example="5 K"
    )
    centre: Annotated[float | None, OfKey()] = optional(
        "mean of a normal, middle of a uniform, peak of a triangular spread; default the value of the case", example="335 K"
    )
    low: Annotated[float | None, OfKey()] = optional("lower end; of a normal spread: cut off there", example="325 K")
    high: Annotated[float | None, OfKey()] = optional("upper end; of a normal spread: cut off there", example="345 K")


class Correlation(Section):
    """Two keys that move together, joined by a Gaussian copula."""

    key: Annotated[str, NumberKey()] = needed("one key that spreads")
    other: Annotated[str, NumberKey()] = needed("the other")
    coefficient: Annotated[float, Within("ratio", -LARGEST_COEFFICIENT, LARGEST_COEFFICIENT)] = needed(
        "correlation of the two standard normal variables behind the spreads"
    )


RELATIVE_DEVIATION = Within("ratio", 0.0, 0.5, "%")


class PeakPressureSpread(Section):
    """What scatters peak pressure beside the inputs: relative standard deviations, added as squares."""

    cyclic: Annotated[float, RELATIVE_DEVIATION] = optional("from cycle to cycle", 0.0)
    cylinder_to_cylinder: Annotated[float, RELATIVE_DEVIATION] = optional("between the cylinders", 0.0)
    control: Annotated[float, RELATIVE_DEVIATION] = optional("of the control of the engine", 0.0)
    coverage: Annotated[float, Within("ratio", 0.0, 6.0)] = optional(
        "standard deviations between mean and design peak pressure (2 to 3: common practice)", USUAL_COVERAGE
    )

    @property
    def relative(self) -> float:
        """Root of the sum of squares."""
        return math.sqrt(self.cyclic**2 + self.cylinder_to_cylinder**2 + self.control**2)


class ToleranceSection(Section):
    """Spreads of the inputs, for `fuelair band`."""

    rows: Annotated[int, Whole(ROWS[0], ROWS[-1], choices=ROWS)] = optional("size of the sample", USUAL_ROWS)
    seed: Annotated[int, Whole(0, 2**31 - 1)] = optional("of the random numbers", USUAL_SEED)
    spread: tuple[Spread, ...] = needed("spread of each key that is not certain")
    correlation: tuple[Correlation, ...] | None = optional("keys that move together")
    peak_pressure_spread: PeakPressureSpread | None = optional("scatter of peak pressure beside the inputs")
