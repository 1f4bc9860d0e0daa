"""Demo cases as templates to start from: a complete case, with every further key shown as a comment."""

from __future__ import annotations

import json

from pydantic import BaseModel

from fuelair import resources
from fuelair.case.fields import Kind, Within, kind_of, nearest
from fuelair.case.schema import SECTIONS
from fuelair.errors import InputError, Problem
from fuelair.quantities import in_unit

_TABLES = {
    "fuel": {
        "blend": '[{ name = "diesel", mass_fraction = "93 %" }, { name = "fame", mass_fraction = "7 %" }]  # instead of name',
        "own": '{ formula = "C12H26", lower_heating_value = "44 MJ/kg", density = "750 kg/m3" }  # instead of name',
    },
    "tolerance": {
        "spread": '[{ key = "engine.compression_ratio", distribution = "uniform", half_width = 0.2 }]  # for `fuelair band`',
        "correlation": '[{ key = "charge.pressure", other = "charge.temperature", coefficient = 0.5 }]  # both must spread',
        "peak_pressure_spread": '{ cyclic = "2 %", cylinder_to_cylinder = "1 %", control = "1 %", coverage = 2.0 }',
    },
}
"""Tables inside a section, shown as lines of their own."""


def names() -> list[str]:
    """Return the names of the demo cases, sorted."""
    return sorted(path.stem for path in resources.demos().glob("*.toml"))


def template(name: str) -> str:
    """Return the text of the demo case ``name``, with all keys that it leaves out as comments.

    Raises
    ------
    InputError : no such demo.
    """
    known = names()
    if name not in known:
        near = nearest(name, known)
        raise InputError(Problem("no such demo case", value=name, allowed=", ".join(known), hint=near))
    text = (resources.demos() / f"{name}.toml").read_text(encoding="utf-8")
    return _with_comments(text)


def _with_comments(text: str) -> str:
    """Put the missing keys at the end of each section, and the missing sections at the end of the text."""
    head, *blocks = ("\n" + text).split("\n[")
    parts = [head.removeprefix("\n").rstrip()]
    shown = []
    for block in blocks:
        section, _, body = block.partition("]")
        shown.append(section)
        written = {line.partition("=")[0].strip() for line in body.splitlines()}
        comments = _comments(section, written)
        parts.append("\n".join([f"[{section}]{body.rstrip()}", *comments]))
    unused = [section for section in SECTIONS if section not in shown]
    parts += ["\n".join([f"# [{section}]", *_comments(section, set())]) for section in unused]
    return "\n\n".join(parts) + "\n"


def _comments(section: str, written: set[str]) -> list[str]:
    model = SECTIONS[section]
    tables = _TABLES.get(section, {})
    lines = [_comment(model, key) for key in model.model_fields if key not in written and key not in tables]
    return lines + [f"# {key} = {text}" for key, text in tables.items() if key not in written]


def _comment(model: type[BaseModel], key: str) -> str:
    field = model.model_fields[key]
    kind = kind_of(field)
    if field.default is not None and not field.is_required():
        value, origin = _with_unit(field.default, kind), "default"
    else:
        value, origin = (field.examples or [""])[0], "example"
    return f"# {f'{key} = {json.dumps(value)}':<36}  # {origin}: {field.description}"


def _with_unit(value: object, kind: Kind | None) -> object:
    if isinstance(value, float) and isinstance(kind, Within) and kind.dimension != "ratio":
        return in_unit(value, kind.unit, kind.dimension, digits=9)
    return value
