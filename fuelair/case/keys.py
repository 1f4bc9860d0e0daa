"""Single keys of a case by their dotted path, e.g. ``charge.pressure`` or ``fuel.blend[0].mass_fraction``."""

from __future__ import annotations

import re

from pydantic import BaseModel

from fuelair.case.fields import Kind, Whole, Within, kind_of, nearest
from fuelair.case.schema import SECTIONS, BlendPart, OwnFuel
from fuelair.errors import InputError, Problem

NO_EFFECT = ("limits.", "tolerance.")
"""Sections that no figure depends on."""
_BLEND = re.compile(r"blend\[(\d{1,3})\]")


def kind(key: str) -> Kind:
    """Return what a key may hold.

    Raises
    ------
    InputError : no such key, or a table rather than a value.
    """
    section, _, rest = key.partition(".")
    model: type[BaseModel] | None = SECTIONS.get(section)
    name = rest
    if section == "fuel" and "." in rest:
        table, _, name = rest.partition(".")
        model = OwnFuel if table == "own" else BlendPart if _BLEND.fullmatch(table) else None
    field = None if model is None else model.model_fields.get(name)
    found = None if field is None else kind_of(field)
    if found is None:
        known = every()
        near = nearest(key, known) or next((one for one in known if one.endswith(f".{key}")), "")
        inside = " (a table: name the key in it)" if field is not None else ""
        raise InputError(Problem(f"no such key{inside}", key, allowed="a key of the case such as charge.pressure", hint=near))
    return found


def every() -> list[str]:
    """Return every key that holds one value, in the order of the schema."""
    return [f"{section}.{name}" for section, model in SECTIONS.items() for name, f in model.model_fields.items() if kind_of(f)]


def is_number(key: str) -> bool:
    """Say whether a key holds a number that the cycle takes as it is.

    The others are names, words and numbers that change what a case is made of (strokes per cycle, the make-up
    of a fuel).
    """
    found = kind(key)
    counts = isinstance(found, Whole) and not found.choices
    return (counts or isinstance(found, Within)) and not key.startswith(("fuel.own.", "fuel.blend["))


def numbers() -> dict[str, Within]:
    """Return every key of a section that is a physical number which figures may depend on, with its kind."""
    kinds = {key: kind(key) for key in every() if not key.startswith(NO_EFFECT)}
    return {key: found for key, found in kinds.items() if isinstance(found, Within)}
