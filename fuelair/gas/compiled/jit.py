"""The one decorator of compiled functions, and where their machine code is kept between runs.

Compiled functions release the interpreter's lock and never raise. The code is kept in a folder named after a
digest of all sources of the gas room: numba itself looks only at the file of the outermost function and
would keep old code of the functions called. The folder lies beside the sources if they can be written, else in
the user's cache; where neither can be written, code is compiled anew in every process.
"""

from __future__ import annotations

import hashlib
import os
import sys
import tempfile
from collections.abc import Callable
from functools import lru_cache
from pathlib import Path
from typing import Any, TypeVar, cast

import numba

Function = TypeVar("Function", bound=Callable[..., Any])

CONTRACT = frozenset({"contract", "nsz", "arcp"})
"""Freedom of the compiler that keeps NaN, infinity and the order of sums."""
LANES_ONLY = CONTRACT | {"nnan", "ninf"}
"""Freedom without which comparisons keep loops from running in vector lanes."""


def compiled(function: Function) -> Function:
    """Compile a function when it is first called: one that Python calls."""
    return _decorated(function, CONTRACT, inside=False)


def inlined(function: Function) -> Function:
    """Compile a function into those that call it.

    Without that a fresh process and one that loads its code from disk run different copies of a called function, which
    the compiler has treated differently: their last bits would not agree.
    """
    return _decorated(function, CONTRACT, inside=True)


def bare(function: Function) -> Function:
    """As `inlined`, for what makes and returns no array: no reference counts are kept, which cost as much as the work."""
    return _decorated(function, CONTRACT, inside=True, counted=False)


def summing(function: Function) -> Function:
    """As `bare`, with sums in the order that is fastest: another than that written, but the same in every call."""
    return _decorated(function, CONTRACT | {"reassoc"}, inside=True, counted=False)


def vectorised(function: Function) -> Function:
    """As `inlined`, for loops over lanes: no value there may be NaN or infinite."""
    return _decorated(function, LANES_ONLY, inside=True)


def _decorated(function: Function, fastmath: frozenset[str], *, inside: bool, counted: bool = True) -> Function:
    config: Any = numba.config
    folder, before = cache_folder(), config.CACHE_DIR
    config.CACHE_DIR = "" if folder is None else str(folder)  # read by numba while it decorates
    try:
        options: dict[str, Any] = {"nogil": True, "error_model": "numpy", "fastmath": set(fastmath), "forceinline": inside}
        options["_nrt"] = counted
        made = numba.njit(cache=folder is not None and not inside, **options)(function)
    finally:
        config.CACHE_DIR = before
    return cast(Function, made)


@lru_cache(maxsize=1)
def cache_folder() -> Path | None:
    """Folder of the machine code; None if none can be written.

    The first that can be written of: ``NUMBA_CACHE_DIR``, ``__pycache__`` beside the sources, the user's cache.
    """
    own = f"fuelair-{_digest()}"
    for parent in _parents():
        folder = parent / own
        try:
            folder.mkdir(parents=True, exist_ok=True)
            tempfile.TemporaryFile(dir=folder).close()
        except OSError:
            continue
        return folder
    return None


def _parents() -> list[Path]:
    named, here = os.environ.get("NUMBA_CACHE_DIR"), Path(__file__).resolve().parent
    found = [Path(named).absolute()] if named else []
    found.append(here / "__pycache__")
    base = Path(os.environ.get("LOCALAPPDATA" if sys.platform == "win32" else "XDG_CACHE_HOME", ""))
    if not base.is_absolute():  # an unset or empty variable must not mean the current folder
        try:
            base = Path.home() / ".cache"
        except RuntimeError:  # no home folder
            return found
    return [*found, base / "fuelair"]


def _digest() -> str:
    h = hashlib.sha256()
    for path in sorted(Path(__file__).resolve().parents[1].rglob("*.py")):  # all of fuelair/gas
        h.update(path.read_bytes())
    return h.hexdigest()[:16]
