"""Turns what pydantic found into Problems in our words, and finds the line of each."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace
from typing import Any

from pydantic import BaseModel, TypeAdapter, ValidationError

from fuelair.case import toml_text
from fuelair.case.fields import OWN_ERROR, kind_of, nearest
from fuelair.case.schema import LATER_SECTIONS, LEAST, SECTIONS, BlendPart, OwnFuel
from fuelair.case.tolerance import Correlation, PeakPressureSpread, Spread
from fuelair.errors import Problem

Path = tuple[str | int, ...]

INNER: dict[Path, type[BaseModel]] = {
    ("fuel", "own"): OwnFuel,
    ("fuel", "blend"): BlendPart,
    ("tolerance", "spread"): Spread,
    ("tolerance", "correlation"): Correlation,
    ("tolerance", "peak_pressure_spread"): PeakPressureSpread,
}
"""Tables and lists of tables inside a section."""
LISTS: dict[Path, str] = {
    ("fuel", "blend"): 'blend = [{ name = "diesel", mass_fraction = 0.9 }, { name = "fame", mass_fraction = 0.1 }]',
    ("tolerance", "spread"): 'spread = [{ key = "charge.temperature", distribution = "normal", standard_deviation = "3 K" }]',
    ("tolerance", "correlation"): 'correlation = [{ key = "charge.temperature", other = "charge.pressure", coefficient = 0.5 }]',
}
"""How each list of tables is written."""


def translate(error: ValidationError, data: Mapping[str, Any], model: type[BaseModel]) -> list[Problem]:
    """Return one Problem for each error that pydantic found in ``data``."""
    return [_one(item, data, model) for item in error.errors(include_url=False)]


def sound(written: Mapping[str, Any], ambient_pressure: float) -> dict[str, Any]:
    """Return the values that pass their own check, by key path."""
    found: dict[str, Any] = {}
    for key, value in written.items():
        section, _, name = key.partition(".")
        model = SECTIONS.get(section)
        if model is None or name not in model.model_fields:
            continue
        field = model.model_fields[name]
        kind = kind_of(field)
        try:
            if kind is not None:
                found[key] = kind.check(value, ambient_pressure=ambient_pressure)
            else:
                adapter: TypeAdapter[Any] = TypeAdapter(field.annotation or object)
                found[key] = adapter.validate_python(value, context={"ambient_pressure": ambient_pressure})
        except ValueError:  # reported where the section is built
            continue
    return found


def _one(item: Any, data: Mapping[str, Any], model: type[BaseModel]) -> Problem:
    path: Path = item["loc"]
    key, kind, value = dotted(path), item["type"], item["input"]
    shown = value if isinstance(value, (str, int, float, bool)) else None
    if kind == OWN_ERROR:
        context = item["ctx"]
        return Problem(context["message"], key, shown, context["allowed"], context["hint"])
    if kind == "extra_forbidden":
        return _unknown(path, key, shown, model)
    if kind == "missing":
        return _missing(path, key, model)
    if kind in ("model_type", "model_attributes_type", "dict_type"):
        hint = f"[{path[0]}] on a line of its own" if len(path) == 1 else ""
        return Problem("must be a table of keys", key, shown, ", ".join(_names(path, model)), hint)
    if kind in ("tuple_type", "list_type"):
        return Problem("must be a list of parts", key, shown, hint=LISTS.get(path, ""))
    return Problem("not accepted", key, shown)


def _unknown(path: Path, key: str, value: object, model: type[BaseModel]) -> Problem:
    name, top = str(path[-1]), len(path) == 1
    names = _names(path[:-1], model)
    if top and name in LATER_SECTIONS:
        message = f"this release has no [{name}] section"
        return Problem(message, key, None, _sections(), "remove it; the cycle is computed without it")
    homes = [section for section, keys in SECTIONS.items() if name in keys.model_fields]
    near = nearest(name, names)
    belongs = f"it belongs in {' or '.join(f'[{section}]' for section in homes)}" if homes else ""
    hint = ", or ".join(text for text in (near, belongs) if text)
    if top:
        return Problem("no such section or key", key, value, _sections(), f"[{near}]" if near in SECTIONS else hint)
    return Problem("no such key", key, value, ", ".join(names), hint)


def _sections() -> str:
    return "title, " + ", ".join(f"[{name}]" for name in SECTIONS)


def _missing(path: Path, key: str, model: type[BaseModel]) -> Problem:
    if len(path) == 1 and path[0] in LEAST:
        return Problem(f"the section [{path[0]}] is missing", key, None, f"at least {LEAST[str(path[0])]}")
    holder = _model_at(path[:-1], model)
    field = holder.model_fields[str(path[-1])]
    kind = kind_of(field)
    return Problem(f"is missing ({field.description})", key, None, kind.allowed() if kind is not None else "")


def _model_at(path: Path, model: type[BaseModel]) -> type[BaseModel]:
    if not path:
        return model
    return INNER.get(path[:2]) or SECTIONS[str(path[0])]


def _names(path: Path, model: type[BaseModel]) -> list[str]:
    return list(_model_at(path, model).model_fields)


def dotted(path: Path) -> str:
    """Return a key path as text: ``fuel.blend[0].name``."""
    text = ""
    for part in path:
        text += f"[{part}]" if isinstance(part, int) else f".{part}" if text else str(part)
    return text


def split(key: str) -> Path:
    """Return a dotted key as a path: the other way of `dotted`."""
    pieces = key.replace("[", ".[").split(".")
    return tuple(int(piece[1:-1]) if piece.startswith("[") and piece[1:-1].isdigit() else piece for piece in pieces)


def place(problems: Iterable[Problem], text: str, file: str) -> list[Problem]:
    """Return the problems with file, line and quoted line, in the order of the file."""
    lines = {dotted(path): line for path, line in reversed(toml_text.key_lines(text).items())}
    placed = []
    for problem in problems:
        path = split(problem.key)
        line = 0
        while path and not line:
            line = lines.get(dotted(path), 0)
            path = path[:-1]
        placed.append(replace(problem, file=file, line=line, quoted=toml_text.quote(text, line) if line else ""))
    return sorted(placed, key=lambda problem: problem.line or 10**9)


def without_nulls(schema: Any) -> Any:
    """Drop what TOML cannot hold from a JSON Schema: null as a default and as a type."""
    if isinstance(schema, list):
        return [without_nulls(item) for item in schema]
    if not isinstance(schema, dict):
        return schema
    clean = {key: without_nulls(item) for key, item in schema.items() if not (key == "default" and item is None)}
    options = clean.get("anyOf")
    if isinstance(options, list):
        kept = [option for option in options if option != {"type": "null"}]
        if len(kept) == 1:
            del clean["anyOf"]
            clean = {**kept[0], **clean}
    return clean
