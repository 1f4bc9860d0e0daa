"""Columns of a study: the values of one key over many rows, checked against the key's own range."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, NoReturn, cast

import numpy as np
import numpy.typing as npt
from pydantic_core import PydanticCustomError

from fuelair import fuel
from fuelair.case import keys
from fuelair.case.fields import Kind, Whole, Within
from fuelair.errors import InputError, Problem
from fuelair.gas.engine import Array
from fuelair.quantities import STANDARD_ATMOSPHERE, is_gauge, stored_unit

Values = Sequence[float] | Sequence[str] | Array
Labels = npt.NDArray[Any]


@dataclass(frozen=True, slots=True)
class Column:
    """Values of one key over N rows.

    Attributes
    ----------
    key : dotted key.
    numbers : values in stored units (N,), NaN where a label stands instead; None if there are only labels.
    labels : names, words, or numbers that change what a case is made of (N,), ``""`` where a number stands;
        None if there are only numbers.
    """

    key: str
    numbers: Array | None
    labels: Labels | None

    def __len__(self) -> int:
        return len(self.numbers) if self.numbers is not None else len(cast("Labels", self.labels))

    @property
    def values(self) -> Array | list[str]:
        """The column as a table holds it: numbers where all are numbers, else text."""
        if self.labels is None:
            return cast("Array", self.numbers)
        if self.numbers is None:
            return self.labels.tolist() if self.labels.dtype.kind in "UO" else self.labels.astype(float)
        return [label or repr(number) for label, number in zip(self.labels.tolist(), self.numbers.tolist(), strict=True)]


def heading(key: str) -> str:
    """Name of a key's column: the key, with the stored unit where it has one, e.g. ``charge.pressure [Pa]``."""
    kind = keys.kind(key)
    return f"{key} [{stored_unit(kind.dimension)}]" if isinstance(kind, Within) and kind.dimension != "ratio" else key


def read(key: str, values: Values, *, ambient_pressure: float | None = STANDARD_ATMOSPHERE) -> Column:
    """Check the values of a key.

    Parameters
    ----------
    values : numbers in stored units, names, or text with a unit.
    ambient_pressure : [Pa] from which gauge units count; None: it varies, so they are refused.

    Raises
    ------
    InputError : a value that the key cannot hold; names key, value, row and what is allowed.
    """
    kind = keys.kind(key)
    array = np.asarray(values) if not isinstance(values, (list, tuple)) or _all_numbers(values) else None
    if array is not None and array.dtype.kind in "fiu" and array.ndim == 1:
        return _from_numbers(key, kind, array.astype(float))
    checked: dict[object, Any] = {}
    for row, value in enumerate(values):
        if value not in checked:
            if ambient_pressure is None and is_gauge(value):
                _refuse(key, "must be an absolute pressure, for the ambient pressure varies", value, row)
            checked[value] = check(key, kind, value, row, ambient_pressure=ambient_pressure or STANDARD_ATMOSPHERE)
    accepted = [checked[value] for value in values]
    if not keys.is_number(key):
        return Column(key, None, np.array(accepted))
    numbers = np.array([np.nan if isinstance(one, str) else one for one in accepted], float)
    labels = np.array([one if isinstance(one, str) else "" for one in accepted])
    return Column(key, numbers, labels if (labels != "").any() else None)


def _all_numbers(values: Sequence[Any]) -> bool:
    return all(isinstance(one, (int, float)) and not isinstance(one, bool) for one in values)


def _from_numbers(key: str, kind: Kind, numbers: Array) -> Column:
    if isinstance(kind, (Within, Whole)):
        good = (numbers >= kind.low) & (numbers <= kind.high)
        if isinstance(kind, Whole):
            good &= (numbers == np.floor(numbers)) & np.isin(numbers, kind.choices or numbers)
    else:
        good = np.zeros(len(numbers), np.bool_)
    if not good.all():
        row = int(np.argmin(good))
        check(key, kind, float(numbers[row]), row)
        _refuse(key, "not accepted", float(numbers[row]), row)
    return Column(key, numbers, None) if keys.is_number(key) else Column(key, None, numbers)


def check(key: str, kind: Kind, value: object, row: int, *, ambient_pressure: float = STANDARD_ATMOSPHERE) -> Any:
    """Return one value of a key in stored units, or its name; ``row`` counts from 0.

    Raises
    ------
    InputError : the key cannot hold it.
    """
    try:
        accepted = kind.check(value, ambient_pressure=ambient_pressure)
        if key == "fuel.name":
            fuel.load(accepted)
    except PydanticCustomError as error:
        about = error.context or {}
        _refuse(key, about.get("message", "not accepted"), value, row, about.get("allowed", ""), about.get("hint", ""))
    except InputError as error:
        one = error.problems[0]
        _refuse(key, one.message, value, row, one.allowed, one.hint)
    return accepted


def _refuse(key: str, message: str, value: object, row: int, allowed: str = "", hint: str = "") -> NoReturn:
    raise InputError(Problem(f"value {row + 1}: {message}", key, value, allowed, hint))
