"""Which rows a study has: grids, random designs, sample files.

``KEY=START:STOP:COUNT`` is a range with both ends (``:log`` after it for equal ratios), ``KEY=a,b,c`` a list.
Plain numbers are in stored units as in the case file; others carry their unit. A design gives any of its
rows without the others, so that a study may stop, go on, or be spread.
"""

from __future__ import annotations

import hashlib
import json
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Any, Final, Literal, Protocol

import numpy as np
import numpy.typing as npt

from fuelair.case import Case, keys
from fuelair.case.fields import Whole
from fuelair.errors import InputError, Problem
from fuelair.gas.engine import Array
from fuelair.study.columns import Column, Values, read

Method = Literal["grid", "latin-hypercube", "sobol"]
METHODS: Final[tuple[Method, ...]] = ("grid", "latin-hypercube", "sobol")
MOST_ROWS: Final = 10**9
EXACT_UP_TO: Final = 10_000
"""Length of a range up to which its values are the decimals that a person would write."""
HELP: Final = "KEY=START:STOP:COUNT, KEY=START:STOP:COUNT:log, or KEY=a,b,c"
HELP_RANDOM: Final = "KEY=START:STOP, KEY=START:STOP:log, or KEY=a,b,c"


class Design(Protocol):
    """Rows of a study: the keys that vary and their values."""

    @property
    def keys(self) -> tuple[str, ...]:
        """Varied keys, in the order of the columns."""
        ...

    @property
    def rows(self) -> int:
        """Number of rows."""
        ...

    def columns(self, start: int, stop: int) -> dict[str, Values]:
        """Values of the rows from ``start`` to before ``stop``, in stored units."""
        ...

    def describe(self) -> dict[str, Any]:
        """What the design is, for a manifest: equal descriptions have equal rows."""
        ...


@dataclass(frozen=True)
class Axis:
    """One key of a design: a list of values, or the ends of a range.

    Attributes
    ----------
    key : dotted key.
    values : values of a list or a range in stored units, or names.
    ends : both ends of a range without a count [stored units], None for a list.
    log : whether the range goes by equal ratios.
    """

    key: str
    values: Values
    ends: tuple[float, float] | None = None
    log: bool = False

    def __len__(self) -> int:
        return len(self.values)

    def take(self, index: npt.NDArray[np.intp]) -> Values:
        """Values at some places of the list."""
        return np.asarray(self.values)[index]

    def at(self, share: Array) -> Values:
        """Values at a share from 0 to 1 of the range, or of the list."""
        if self.ends is None:
            return self.take((share * len(self)).astype(np.intp))
        low, high = self.ends
        if isinstance(keys.kind(self.key), Whole):
            return np.minimum(np.floor(low + share * (high - low + 1.0)), high)
        value = low * (high / low) ** share if self.log else low + share * (high - low)
        return np.clip(value, min(low, high), max(low, high))


@dataclass(frozen=True)
class Grid:
    """Every combination of the axes' values; the last axis varies fastest."""

    axes: tuple[Axis, ...]

    @property
    def keys(self) -> tuple[str, ...]:
        """Varied keys."""
        return tuple(axis.key for axis in self.axes)

    @property
    def rows(self) -> int:
        """Number of combinations."""
        return math.prod(len(axis) for axis in self.axes)

    def columns(self, start: int, stop: int) -> dict[str, Values]:
        """Values of some rows."""
        places = np.unravel_index(np.arange(start, stop), tuple(len(axis) for axis in self.axes))
        return {axis.key: axis.take(place) for axis, place in zip(self.axes, places, strict=True)}

    def describe(self) -> dict[str, Any]:
        """Kind, keys and a hash of every value."""
        return {"method": "grid", "rows": self.rows, "axes": {axis.key: _digest(axis.values) for axis in self.axes}}


@dataclass(frozen=True)
class Random:
    """A space-filling design over ranges and lists: Latin hypercube, or scrambled Sobol sequence."""

    axes: tuple[Axis, ...]
    method: Method
    rows: int
    seed: int

    @property
    def keys(self) -> tuple[str, ...]:
        """Varied keys."""
        return tuple(axis.key for axis in self.axes)

    @cached_property
    def shares(self) -> Array:
        """Points of the unit cube, (rows, axes)."""
        from scipy.stats import qmc

        if self.method == "latin-hypercube":
            return np.asarray(qmc.LatinHypercube(len(self.axes), seed=self.seed).random(self.rows))
        points = qmc.Sobol(len(self.axes), scramble=True, seed=self.seed).random_base2((self.rows - 1).bit_length())
        return np.asarray(points)[: self.rows]

    def columns(self, start: int, stop: int) -> dict[str, Values]:
        """Values of some rows."""
        return {axis.key: axis.at(self.shares[start:stop, i]) for i, axis in enumerate(self.axes)}

    def describe(self) -> dict[str, Any]:
        """Method, seed, ranges and lists, and the library that drew the points."""
        import scipy

        axes = {a.key: [*a.ends, "log" if a.log else "linear"] if a.ends else _digest(a.values) for a in self.axes}
        return {"method": self.method, "rows": self.rows, "seed": self.seed, "axes": axes, "scipy": scipy.__version__}


@dataclass(frozen=True)
class Table:
    """Rows given one by one, as columns in stored units or names."""

    given: Mapping[str, Values]

    @property
    def keys(self) -> tuple[str, ...]:
        """Varied keys."""
        return tuple(self.given)

    @property
    def rows(self) -> int:
        """Number of rows."""
        return len(next(iter(self.given.values())))

    def columns(self, start: int, stop: int) -> dict[str, Values]:
        """Values of some rows."""
        return {key: values[start:stop] for key, values in self.given.items()}

    def describe(self) -> dict[str, Any]:
        """A hash of every column."""
        return {"method": "samples", "rows": self.rows, "columns": {k: _digest(v) for k, v in self.given.items()}}


def design(
    case: Case, over: Mapping[str, Any], *, method: Method = "grid", rows: int | None = None, seed: int | None = None
) -> Design:
    """Make a design from the ranges and lists of its keys.

    Parameters
    ----------
    case : the template; gauge pressures count from its ambient pressure.
    over : key -> text as in :data:`HELP`, or a sequence of values.
    method : one of :data:`METHODS`.
    rows, seed : of a random design; seed default 0.

    Raises
    ------
    InputError : no such key, text that is no range or list, a value outside the key's range, too many rows.
    """
    method = method_named(method)
    axes = tuple(_axis(case, key, given, method) for key, given in over.items())
    if not axes:
        raise InputError(Problem("nothing is varied", "--over", allowed=HELP, hint="--over charge.equivalence_ratio=0.3:1.2:10"))
    if method == "grid":
        for name, value in (("--rows", rows), ("--seed", seed)):
            if value is not None:
                raise InputError(Problem("goes with a random design", name, value, hint="--design latin-hypercube or sobol"))
        made: Design = Grid(axes)
    else:
        if rows is None or rows < 1:
            raise InputError(Problem(f"a {method} design needs the number of rows", "--rows", rows, "1 or more", "--rows 1000"))
        if seed is not None and seed < 0:
            raise InputError(Problem("a seed is a whole number", "--seed", seed, "0 or more"))
        made = Random(axes, method, rows, 0 if seed is None else seed)
    if made.rows > MOST_ROWS:
        raise InputError(Problem("too many rows", "--over", made.rows, f"up to {MOST_ROWS}", "fewer values a key"))
    return made


def method_named(text: str) -> Method:
    """Return the method of that name; raises InputError if there is none."""
    for name in METHODS:
        if name == text:
            return name
    raise InputError(Problem("no such design", "--design", text, ", ".join(METHODS)))


def split(text: str) -> tuple[str, str]:
    """Return key and values of ``KEY=VALUES``; raises InputError without an equals sign."""
    key, sign, rest = text.partition("=")
    if not sign or not key.strip() or not rest.strip():
        raise InputError(Problem("not of the form KEY=VALUES", "--over", text, HELP))
    return key.strip(), rest.strip()


def _axis(case: Case, key: str, given: Any, method: Method) -> Axis:
    keys.kind(key)
    if not isinstance(given, str):
        return Axis(key, _listed(case, key, given))
    parts = [part.strip().strip("\"'").strip() for part in given.split(":")]
    if "," in given or len(parts) == 1:
        return Axis(key, _listed(case, key, _items(key, given)))
    log = parts[-1].lower() in ("log", "linear") and parts.pop().lower() == "log"
    if method == "grid" and len(parts) == 3 and parts[2].isdigit() and int(parts[2]) >= 2:
        return Axis(key, _range(case, key, parts, log=log))
    if method != "grid" and len(parts) == 2:
        ends = _ends(case, key, parts)
        return Axis(key, np.array(ends), ends if not log else _positive(key, given, ends), log)
    hint = "a COUNT of 2 or more" if method == "grid" else "START:STOP; --rows says how many"
    raise InputError(Problem("not a range or list", key, given, HELP if method == "grid" else HELP_RANDOM, hint))


def _items(key: str, text: str) -> list[str]:
    """Items of a list; a colon in some of them means a range with a decimal comma."""
    items = [item.strip().strip("\"'").strip() for item in text.split(",")]
    if "" in items:
        raise InputError(Problem("an empty item in the list", key, text, HELP))
    if len(items) > 1 and any(":" in item for item in items) and not all(":" in item for item in items):
        raise InputError(Problem("neither a list nor a range", key, text, HELP, "a decimal point, not a comma"))
    return items


def _listed(case: Case, key: str, items: Sequence[Any] | Array) -> Values:
    """Checked values of a list, in stored units."""
    values = items if isinstance(items, np.ndarray) else [plain(item) for item in items]
    if not len(values):
        raise InputError(Problem("an empty list", key))
    return _checked(case, key, values).values


def _checked(case: Case, key: str, values: Any) -> Column:
    return read(key, values, ambient_pressure=case.charge.ambient_pressure)


def plain(item: Any) -> Any:
    """Text of a plain number as the number."""
    if not isinstance(item, str):
        return item
    try:
        return float(item) if "_" not in item else item
    except ValueError:
        return item


def _ends(case: Case, key: str, parts: Sequence[str]) -> tuple[float, float]:
    column = _checked(case, key, [plain(part) for part in parts[:2]])
    if column.numbers is None or column.labels is not None:
        raise InputError(Problem("is not a number that a range may run over", key, ":".join(parts), hint=f"a list: {key}=a,b,c"))
    return float(column.numbers[0]), float(column.numbers[1])


def _positive(key: str, given: str, ends: tuple[float, float]) -> tuple[float, float]:
    if min(ends) <= 0.0:
        raise InputError(Problem("equal ratios need ends above zero", key, given, hint="leave out :log"))
    return ends


def _range(case: Case, key: str, parts: Sequence[str], *, log: bool) -> Array:
    """Values of a range, both ends included, each the decimal that a person would write where that is exact."""
    start, stop = _ends(case, key, parts)
    count = int(parts[2])
    if count > MOST_ROWS:
        raise InputError(Problem("too many rows", key, count, f"up to {MOST_ROWS}"))
    if log:
        low, high = _positive(key, ":".join(parts), (start, stop))
        out = low * (high / low) ** (np.arange(count) / (count - 1))
        out[-1] = high
    elif count <= EXACT_UP_TO:
        first, last = Fraction(repr(start)), Fraction(repr(stop))
        out = np.array([float(first + (last - first) * i / (count - 1)) for i in range(count)])
    else:
        out = np.linspace(start, stop, count)
    return np.asarray(_checked(case, key, out).numbers)


def _digest(values: Values) -> str:
    data = np.ascontiguousarray(values).tobytes() if isinstance(values, np.ndarray) else json.dumps(list(values)).encode()
    return hashlib.sha256(data).hexdigest()[:16]
