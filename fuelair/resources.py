"""Finds the data files of the package; nothing else knows where they lie.

An installed wheel carries ``mechanisms/`` and ``validation/`` inside the package; an editable
install and a checkout keep them beside it. Paths returned are absolute, because a relative name
would be looked up in the current folder first.
"""

from __future__ import annotations

from pathlib import Path

from fuelair.errors import DataError

_PACKAGE = Path(__file__).resolve().parent


def folder(kind: str) -> Path:
    """Return the absolute path of a data folder.

    Parameters
    ----------
    kind : ``"mechanisms"``, ``"validation"`` or a folder below them, e.g. ``"mechanisms/fuels"``.

    Raises
    ------
    DataError : the folder is neither in the package nor beside it.
    """
    for base in (_PACKAGE, _PACKAGE.parent):
        place = base / kind
        if place.is_dir():
            return place
    raise DataError(f"data folder {kind!r} not found in or beside {_PACKAGE}; reinstall fuelair")


def demos() -> Path:
    """Return the folder of the demo cases."""
    return _PACKAGE / "demos"
