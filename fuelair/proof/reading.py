"""Reads the files of the validation book: ``validation/published/NameYear_topic.toml``.

A file holds ``format = 1``, ``[source]`` (key, reference, standing, note), and rows. ``[[row]]`` is one
published figure; ``[[table]]`` is a printed table: ``keys`` names the leading cells of each of its
``rows`` as inputs, each ``[[table.column]]`` after that is one published figure per row (an empty
string in a cell means that nothing is printed there).
"""

from __future__ import annotations

import tomllib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from fuelair import resources
from fuelair.errors import DataError

FORMAT = 1
STANDINGS = ("read", "from memory", "computed")
FACTORS: Mapping[str, float] = {
    "1": 1.0,
    "%": 1e-2,
    "dex": 1.0,
    "mol": 1.0,
    "kmol": 1.0,
    "K": 1.0,
    "Pa": 1.0,
    "kPa": 1e3,
    "bar": 1e5,
    "atm": 101325.0,
    "kJ/kg": 1e3,
    "MJ/kg": 1e6,
    "kJ/mol": 1e3,
    "J/(mol K)": 1.0,
    "kJ/(kg K)": 1e3,
    "g/kg": 1e-3,
    "kg/kg": 1.0,
    "kg/m3": 1.0,
}
"""SI (molar quantities per mol) for one of each unit that the book uses."""

_SOURCE_KEYS = {"key", "reference", "standing", "note"}
_SHARED = {"standing", "tolerance", "expected_difference", "explained", "needs", "own", "quantity", "inputs", "compute"}
_ROW_KEYS = _SHARED | {"id", "published"}
_TABLE_KEYS = _SHARED | {"id", "keys", "rows", "column"}
_COLUMN_KEYS = _SHARED | {"name", "unit", "lookup"}


@dataclass(frozen=True, slots=True)
class Published:
    """The published figure: a value, a range, or the name of a lookup in a package's data; with its unit."""

    unit: str
    value: float | None = None
    range: tuple[float, float] | None = None
    lookup: str = ""


@dataclass(frozen=True, slots=True)
class Tolerance:
    """Allowed deviation and why: absolute in the published unit, or relative to the published figure."""

    reason: str
    absolute: float | None = None
    relative: float | None = None


@dataclass(frozen=True, slots=True)
class Expected:
    """A known difference, computed less published, and its cause.

    A ``value`` in the published unit, a share ``relative`` to the published figure, or a ``lookup`` with the
    row's inputs and further ``inputs`` of its own.
    """

    reason: str
    value: float | None = None
    relative: float | None = None
    lookup: str = ""
    inputs: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Row:
    """One published figure and how it is computed here.

    Attributes
    ----------
    file, id : where it stands.
    source, reference, standing : key, full reference, and ``read``, ``from memory`` or ``computed``.
    compute, inputs : name of the computation and its keywords.
    quantity : what is compared, in words.
    published, tolerance, expected : the figure, the allowed deviation, the known difference or None.
    explained : remark on what separates the two, may be empty.
    needs : packages without which the row is skipped.
    own : an independent second computation, not a publication.
    """

    file: str
    id: str
    source: str
    reference: str
    standing: str
    compute: str
    inputs: Mapping[str, Any]
    quantity: str
    published: Published
    tolerance: Tolerance
    expected: Expected | None
    explained: str
    needs: tuple[str, ...]
    own: bool


def read_book(folder: Path | None = None) -> list[Row]:
    """All rows of the book, files in the order of their names.

    Parameters
    ----------
    folder : of the files; default the folder that comes with the package.

    Raises
    ------
    DataError : a file or a row of it is not as it must be; the message names both.
    """
    place = resources.folder("validation/published") if folder is None else folder
    rows: list[Row] = []
    seen: dict[str, str] = {}
    for path in sorted(place.glob("*.toml")):
        for row in read_file(path):
            if row.id in seen:
                raise DataError(f"{path.name}, row {row.id!r}: the id is taken by {seen[row.id]}")
            seen[row.id] = path.name
            rows.append(row)
    if not rows:
        raise DataError(f"no file of the validation book in {place}")
    return rows


def read_file(path: Path) -> list[Row]:
    """Rows of one file; DataError names file and row."""
    try:
        data = tomllib.loads(path.read_text(encoding="utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError, OSError) as error:
        raise DataError(f"{path.name}: {error}") from error
    _only(data, {"format", "source", "row", "table"}, path.name)
    if data.get("format") != FORMAT:
        raise DataError(f"{path.name}: format must be {FORMAT}, found {data.get('format')!r}")
    source = data.get("source", {})
    _only(source, _SOURCE_KEYS, f"{path.name}, [source]")
    for key in ("key", "reference", "standing"):
        _text(source, key, f"{path.name}, [source]")
    rows = [_row(path.name, source, entry) for entry in data.get("row", [])]
    for table in data.get("table", []):
        rows += [_row(path.name, source, entry) for entry in _expand(path.name, table)]
    if not rows:
        raise DataError(f"{path.name}: holds no row")
    return rows


def _expand(file: str, table: dict[str, Any]) -> Iterator[dict[str, Any]]:
    """Rows as dictionaries from a printed table."""
    where = f"{file}, table {table.get('id')!r}"
    _only(table, _TABLE_KEYS, where)
    name, keys, columns = _text(table, "id", where), table.get("keys", []), table.get("column", [])
    printed = [c for c in columns if "lookup" not in c]
    if not columns or not table.get("rows"):
        raise DataError(f"{where}: needs rows and at least one column")
    common = {k: table[k] for k in _SHARED - {"inputs"} if k in table}
    for cells in table["rows"]:
        if len(cells) != len(keys) + len(printed):
            raise DataError(f"{where}: row {cells} must have {len(keys) + len(printed)} cells")
        place = dict(zip(keys, cells, strict=False))
        values = iter(cells[len(keys) :])
        for column in columns:
            _only(column, _COLUMN_KEYS, where)
            _text(column, "name", where)
            published: dict[str, Any] = {"unit": _text(column, "unit", where)}
            if "lookup" in column:
                published["lookup"] = column["lookup"]
            else:
                published["value"] = next(values)
            if published.get("value") == "":
                continue
            own = {k: v for k, v in column.items() if k in _SHARED - {"inputs"}}
            inputs = {**table.get("inputs", {}), **place, **column.get("inputs", {})}
            label = "-".join(str(v) for v in (name, *place.values(), column["name"]))
            yield {**common, **own, "id": label, "inputs": inputs, "published": published}


def _row(file: str, source: dict[str, Any], entry: dict[str, Any]) -> Row:
    where = f"{file}, row {entry.get('id')!r}"
    _only(entry, _ROW_KEYS, where)
    standing = entry.get("standing", source["standing"])
    if standing not in STANDINGS:
        raise DataError(f"{where}: standing {standing!r} must be one of {', '.join(STANDINGS)}")
    needs, inputs = entry.get("needs", []), entry.get("inputs", {})
    if not isinstance(inputs, dict):
        raise DataError(f"{where}: inputs must be a table")
    return Row(
        file=file,
        id=_text(entry, "id", where),
        source=source["key"],
        reference=source["reference"],
        standing=standing,
        compute=_text(entry, "compute", where),
        inputs=inputs,
        quantity=_text(entry, "quantity", where),
        published=_published(entry.get("published"), where),
        tolerance=_tolerance(entry.get("tolerance"), where),
        expected=_expected(entry["expected_difference"], where) if "expected_difference" in entry else None,
        explained=entry.get("explained", ""),
        needs=(needs,) if isinstance(needs, str) else tuple(needs),
        own=bool(entry.get("own", False)),
    )


def _published(data: Any, where: str) -> Published:
    data = _only(data, {"unit", "value", "range", "lookup"}, f"{where}: published")
    unit = _text(data, "unit", f"{where}: published")
    if unit not in FACTORS:
        raise DataError(f"{where}: unit {unit!r} must be one of {', '.join(FACTORS)}")
    if sum(k in data for k in ("value", "range", "lookup")) != 1:
        raise DataError(f"{where}: published needs one of value, range, lookup")
    span = data.get("range")
    if span is not None and (len(span) != 2 or not span[0] < span[1]):
        raise DataError(f"{where}: range must be [low, high], found {span}")
    return Published(
        unit=unit,
        value=_number(data, "value", where),
        lookup=data.get("lookup", ""),
        range=None if span is None else (float(span[0]), float(span[1])),
    )


def _tolerance(data: Any, where: str) -> Tolerance:
    data = _only(data, {"absolute", "relative", "reason"}, f"{where}: tolerance")
    absolute, relative = _number(data, "absolute", where), _number(data, "relative", where)
    if (absolute is None) == (relative is None) or not (absolute or relative or 0.0) > 0.0:
        raise DataError(f"{where}: tolerance needs one of absolute, relative, above zero")
    return Tolerance(_text(data, "reason", f"{where}: tolerance"), absolute, relative)


def _expected(data: Any, where: str) -> Expected:
    data = _only(data, {"value", "relative", "lookup", "inputs", "reason"}, f"{where}: expected_difference")
    if sum(k in data for k in ("value", "relative", "lookup")) != 1:
        raise DataError(f"{where}: expected_difference needs one of value, relative, lookup")
    return Expected(
        _text(data, "reason", f"{where}: expected_difference"),
        _number(data, "value", where),
        _number(data, "relative", where),
        data.get("lookup", ""),
        data.get("inputs", {}),
    )


def _only(data: Any, keys: set[str], where: str) -> dict[str, Any]:
    if not isinstance(data, dict):
        raise DataError(f"{where}: missing or not a table")
    unknown = sorted(set(data) - keys)
    if unknown:
        raise DataError(f"{where}: unknown key {', '.join(unknown)}; known are {', '.join(sorted(keys))}")
    return data


def _text(data: dict[str, Any], key: str, where: str) -> str:
    value = data.get(key)
    if not isinstance(value, str) or not value.strip():
        raise DataError(f"{where}: {key} must be a text that says something, found {value!r}")
    return value


def _number(data: dict[str, Any], key: str, where: str) -> float | None:
    value = data.get(key)
    if value is None:
        return None
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise DataError(f"{where}: {key} must be a number, found {value!r}")
    return float(value)
