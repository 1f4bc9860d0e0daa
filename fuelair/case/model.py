"""What the user writes: the case, checked as a whole, in SI, with every default visible.

A :class:`Case` is built from a file, from TOML text or from a dictionary. Every mistake found goes into
one `fuelair.errors.InputError`, each with its file, line, the line quoted, key, value and allowed range.
Sections and keys are described in `fuelair.case.schema`, rules between keys in `fuelair.case.rules`.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from pathlib import Path
from typing import Annotated, Any, Self

from pydantic import BaseModel, ConfigDict, Field, PrivateAttr, ValidationError

from fuelair.case import defaults, problems, rules, toml_text
from fuelair.case.fields import Text
from fuelair.case.schema import (
    SECTIONS,
    ChargeSection,
    CombustionSection,
    EngineSection,
    FuelSection,
    GasSection,
    LimitsSection,
)
from fuelair.case.tolerance import ToleranceSection
from fuelair.errors import InputError, Problem
from fuelair.quantities import STANDARD_ATMOSPHERE, is_gauge

SCHEMA_DIALECT = "https://json-schema.org/draft/2020-12/schema"


class Case(BaseModel):
    """One engine, fuel, charge and way of burning: everything that one assessment needs.

    Attributes are the sections of the case file with values in stored units: SI, angles in degrees with
    0 = firing dead centre, speed in rev/s, molar mass in kg/kmol. A key that was left out and has no
    default is None.

    Raises
    ------
    InputError : on building, with every mistake found.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    title: Annotated[str, Text(empty=True)] = Field(default="", description="what this case is")
    engine: EngineSection
    fuel: FuelSection
    charge: ChargeSection
    combustion: CombustionSection
    gas: GasSection = Field(default_factory=GasSection)
    limits: LimitsSection = Field(default_factory=LimitsSection)
    tolerance: ToleranceSection | None = None

    _written: frozenset[str] = PrivateAttr(default=frozenset())
    _raw: dict[str, object] = PrivateAttr(default_factory=dict)
    _text: str = PrivateAttr(default="")
    _file: str = PrivateAttr(default="")

    def __init__(self, **data: Any) -> None:
        data = {key: _plain(value) for key, value in data.items()}
        written = dict(_leaves(data))
        zero = _gauge_zero(data)
        draft = rules.Draft(written, problems.sound(written, zero))
        mistakes = rules.check(draft)
        following = {} if mistakes else defaults.follow(draft)
        for path, value in following.items():
            section, _, key = path.partition(".")
            if isinstance(data.get(section), dict):
                data[section][key] = value
        try:
            self.__pydantic_validator__.validate_python(data, self_instance=self, context={"ambient_pressure": zero})
        except ValidationError as error:
            mistakes = problems.translate(error, data, type(self)) + mistakes
        if mistakes:
            raise InputError(*mistakes)
        for path in following:
            section, _, key = path.partition(".")
            getattr(self, section).model_fields_set.discard(key)  # a default, though it came as a value
        self._written, self._raw = frozenset(written), written

    def __eq__(self, other: object) -> bool:
        """Equal values and the same keys written; spelling, file and comments do not count."""
        if not isinstance(other, Case):
            return NotImplemented
        return self.__dict__ == other.__dict__ and self._written == other._written

    def __hash__(self) -> int:
        return hash((*self.__dict__.values(), self._written))

    @classmethod
    def read(cls, path: str | Path) -> Self:
        """Return the case in a TOML file.

        Raises
        ------
        InputError : the file cannot be read, is not TOML, or the case is wrong.
        """
        place = Path(path)
        return cls.from_toml(toml_text.read_text(place), name=str(path))

    @classmethod
    def from_toml(cls, text: str, name: str = "<text>") -> Self:
        """Return the case in TOML text; ``name`` is the file that errors name."""
        data = toml_text.load(text, name)
        try:
            case = cls.from_dict(data)
        except InputError as error:
            mistakes = problems.place(error.problems, text, name)
        else:
            case._text, case._file = text, name
            return case
        raise InputError(*mistakes)

    @classmethod
    def from_dict(cls, data: Mapping[str, Any]) -> Self:
        """Return the case in nested dictionaries, as TOML would give them."""
        if not isinstance(data, Mapping) or not all(isinstance(key, str) for key in data):
            raise InputError(Problem("a case is a table of sections", allowed=", ".join(SECTIONS)))
        return cls(**data)

    def replace(self, changes: Mapping[str, Any]) -> Self:
        """Return the case with some keys changed and checked again, e.g. ``{"charge.equivalence_ratio": 0.5}``.

        A value of None takes the key out, so that another may stand in its place.
        """
        data = self._as_written()
        for key, value in changes.items():
            *path, last = problems.split(key)
            table: Any = data
            for part in path:
                listed = isinstance(table, list) and isinstance(part, int) and part < len(table)
                table = table[part] if listed else table.setdefault(part, {}) if isinstance(table, dict) else None
                if not isinstance(table, (dict, list)):
                    raise InputError(Problem(f"no such key: {part} is not a table", key))
            if not isinstance(table, dict):
                raise InputError(Problem(f"no such key: {path[-1]} is not a table", key))
            if value is None:
                table.pop(last, None)
            else:
                table[last] = value
        return type(self).from_dict(data)

    def values(self, columns: Mapping[str, Any] | None = None) -> Callable[[str], Any]:
        """Return a function from key path to value in stored units, with ``columns`` in place of what the case says.

        Columns are arrays of N rows. Defaults that follow from a column are columns too.
        """
        given = dict(columns or {})
        if given:
            written = self.given() | given
            given = defaults.follow(rules.Draft(written, written)) | given
        return lambda key: given[key] if key in given else _value(self, key)

    def given(self) -> dict[str, Any]:
        """Return what the user wrote as key path to value in stored units; sections and tables under their own name too."""
        return {key: _value(self, key) for key in self._written}

    def written(self, key: str) -> object:
        """Return the value of a key path as the user wrote it, None if it was not written."""
        return self._raw.get(key)

    def place(self, problem: Problem) -> Problem:
        """Return a problem found later with file, line and the line quoted, if this case came from a text."""
        return problems.place((problem,), self._text, self._file)[0] if self._text else problem

    def resolved(self) -> dict[str, Any]:
        """Return every key that has a value, written or default, in stored units.

        For reading and reports; :meth:`to_toml` is what reads back, for it keeps defaults apart.
        """
        return self.model_dump(mode="json", exclude_none=True)

    @property
    def defaulted(self) -> frozenset[str]:
        """Key paths that have a value which the user did not write, e.g. ``charge.exhaust_pressure``."""
        leaves = (key for key, value in _leaves(self.resolved()) if "." in key or not isinstance(value, dict))
        return frozenset(leaves) - self._written

    def to_toml(self) -> str:
        """Return TOML that reads back to the same case; defaults stand in it as comments."""
        return toml_text.dump(self._as_written(), self.resolved(), self.defaulted)

    @classmethod
    def json_schema(cls) -> dict[str, Any]:
        """Return the JSON Schema of the case file as written (units as text, or plain numbers)."""
        schema = cls.model_json_schema(mode="validation")
        return {"$schema": SCHEMA_DIALECT, **problems.without_nulls(schema), "title": "fuelair case"}

    def _as_written(self) -> dict[str, Any]:
        everything, kept = self.resolved(), self._written
        data: dict[str, Any] = {}
        for name, value in everything.items():
            if not isinstance(value, dict):
                if name in kept:
                    data[name] = value
                continue
            table = {key: item for key, item in value.items() if f"{name}.{key}" in kept}
            if table or name in kept:
                data[name] = table
        return data


def _value(case: Case, key: str) -> Any:
    section, _, name = key.partition(".")
    return getattr(getattr(case, section), name) if name else getattr(case, section)


def _plain(value: Any) -> Any:
    """Sections as dictionaries, whether they came as models or as tables; None counts as not written."""
    if isinstance(value, BaseModel):
        return value.model_dump(exclude_unset=True, exclude_none=True)
    if isinstance(value, Mapping):
        return {key: item for key, item in value.items() if item is not None}
    return value


def _leaves(data: Mapping[str, Any]) -> Iterator[tuple[str, Any]]:
    """Key paths and values: sections themselves, and the keys of each section."""
    for name, value in data.items():
        yield name, value
        if isinstance(value, Mapping):
            yield from ((f"{name}.{key}", item) for key, item in value.items())


def _gauge_zero(data: Mapping[str, Any]) -> float:
    """Return the pressure [Pa] from which gauge units count: the ambient pressure of the case."""
    charge = data.get("charge")
    if not isinstance(charge, Mapping) or not _holds_gauge(data):
        return STANDARD_ATMOSPHERE
    keys = ("ambient_pressure", "altitude", "reference")
    found = problems.sound({f"charge.{key}": charge[key] for key in keys if key in charge}, STANDARD_ATMOSPHERE)
    outside = defaults.ambient(found.get("charge.altitude"), found.get("charge.reference"))
    return float(found.get("charge.ambient_pressure", outside[0]))


def _holds_gauge(data: Any) -> bool:
    if isinstance(data, Mapping):
        return any(map(_holds_gauge, data.values()))
    return any(map(_holds_gauge, data)) if isinstance(data, (list, tuple)) else is_gauge(data)
