"""Sample files: one row a case, a column a key."""

from __future__ import annotations

import re
from contextlib import suppress
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from fuelair.case import Case, keys
from fuelair.case.fields import Within
from fuelair.errors import InputError, MissingExtraError, Problem
from fuelair.quantities import UNITS
from fuelair.study.columns import Values, read
from fuelair.study.sampling import Table, plain

if TYPE_CHECKING:
    import pandas as pd

_HEAD = re.compile(r"\s*([^\[\]\s]+(?:\[\d+\][^\[\]\s]*)?)\s*(?:\[([^\[\]]+)\])?\s*")
OPTION = "--samples"


def read_samples(path: Path, case: Case) -> Table:
    """Read the rows of a study from a file.

    Parameters
    ----------
    path : ``.csv`` or ``.parquet``; heads are keys, with a unit as in ``charge.pressure [bar]`` if cells are plain
        numbers in it. Cells without any unit are in stored units.
    case : the template; gauge pressures count from its ambient pressure.

    Raises
    ------
    InputError : the file cannot be read, a head is no key, a cell is empty or outside its key's range.
    MissingExtraError : Parquet without pyarrow.
    """
    return from_frame(_frame(path), case, str(path))


def from_frame(frame: pd.DataFrame, case: Case, name: str = "") -> Table:
    """Rows of a study from a data frame, as `read_samples` takes them; ``name`` is the file that errors name."""
    if not len(frame) or not len(frame.columns):
        raise InputError(Problem("holds no rows", OPTION, file=name, hint="a head of keys, then one row a case"))
    columns: dict[str, Values] = {}
    for head in frame.columns:
        match = _HEAD.fullmatch(str(head))
        if match is None:
            raise InputError(Problem("a head is not a key", OPTION, str(head), file=name, allowed="KEY or KEY [unit]"))
        key, unit = match[1], match[2]
        try:
            values = _in_unit(key, unit, frame[head].to_numpy())
            columns[key] = read(key, values, ambient_pressure=case.charge.ambient_pressure).values
        except InputError as error:
            raise InputError(*(replace(problem, file=name) for problem in error.problems)) from None
    return Table(columns)


def _frame(path: Path) -> pd.DataFrame:
    """The file as it stands; the cells of CSV are text."""
    import pandas as pd

    name = str(path)
    try:
        if path.suffix.lower() == ".csv":
            return pd.read_csv(path, dtype=str, keep_default_na=False, skipinitialspace=True)
        if path.suffix.lower() in (".parquet", ".pq"):
            return pd.read_parquet(path)
    except ImportError:
        raise MissingExtraError("export", "Reading Parquet") from None
    except OSError as error:
        raise InputError(Problem(f"cannot be read: {error.strerror or error}", OPTION, file=name)) from None
    except (ValueError, UnicodeError) as error:  # what pandas and pyarrow raise for a file that is none of theirs
        reason = str(error).strip().splitlines()[0] if str(error).strip() else type(error).__name__
        raise InputError(Problem(f"cannot be read: {reason}", OPTION, file=name)) from None
    raise InputError(Problem("is no sample file", OPTION, name, "a name that ends in .csv or .parquet"))


def _in_unit(key: str, unit: str | None, cells: Any) -> Values:
    """Cells with the unit of their head put to the numbers that have none."""
    kind = keys.kind(key)
    if unit is not None:
        known = UNITS[kind.dimension] if isinstance(kind, Within) else {}
        if unit not in known:
            raise InputError(Problem("no such unit of this key", key, unit, ", ".join(known) or "no unit"))
    if cells.dtype.kind not in "fiu":
        with suppress(TypeError, ValueError):  # a column of plain numbers, read exactly
            cells = cells.astype(float)
    if cells.dtype.kind not in "fiu":
        texts = [plain(cell) if isinstance(cell, str) else cell for cell in cells.tolist()]
        if unit is None:
            return texts
        return [f"{cell!r} {unit}" if isinstance(cell, (int, float)) else cell for cell in texts]
    if unit is None or not isinstance(kind, Within):
        return np.asarray(cells, float)
    numbers, place = np.unique(cells.astype(float), return_inverse=True)
    if "(g)" in unit:
        return [f"{number!r} {unit}" for number in numbers[place].tolist()]
    return np.array([UNITS[kind.dimension][unit].to_si(number) for number in numbers.tolist()])[place]
