"""Writes the rows of a study as CSV or Parquet, a block of rows at a time."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from importlib import import_module
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from fuelair.errors import InputError, MissingExtraError, Problem
from fuelair.gas.engine import Array, Codes, Status
from fuelair.study.columns import Values, heading

if TYPE_CHECKING:
    import pandas as pd

SUFFIXES: Final = (".csv", ".parquet")
STATUS: Final = "status"
LINES: Final = 2048
"""Lines of text made at once; more are slower."""
_LABELS: Final = [status.label for status in Status]


@dataclass(frozen=True, slots=True)
class Block:
    """Some rows: keys as they vary, figures in SI, status."""

    keys: Mapping[str, Values]
    figures: Mapping[str, Array]
    status: Codes


def check(path: Path) -> None:
    """Refuse a name that is neither CSV nor Parquet, and Parquet without its library."""
    if path.suffix.lower() not in SUFFIXES:
        raise InputError(Problem("names no kind of table", "--out", str(path), f"a name that ends in {' or '.join(SUFFIXES)}"))
    if path.suffix.lower() == ".parquet":
        _arrow("pyarrow")


def save(path: Path, kind: str, blocks: Iterable[Block], about: Mapping[str, Any]) -> None:
    """Write blocks to a file.

    Parameters
    ----------
    kind : one of :data:`SUFFIXES`.
    about : what made the rows; Parquet carries it in its schema under ``fuelair``.
    """
    if kind == ".csv":
        with path.open("wb") as file:
            for number, block in enumerate(blocks):
                if number == 0:
                    file.write(f"{','.join([*map(heading, block.keys), *block.figures, STATUS])}\n".encode())
                for start in range(0, len(block.status), LINES):
                    file.write(_lines(block, slice(start, start + LINES)).encode())
        return
    pa, parquet = _arrow("pyarrow"), _arrow("pyarrow.parquet")
    writer = None
    try:
        for block in blocks:
            table = _table(pa, block)
            if writer is None:
                schema = table.schema.with_metadata({"fuelair": json.dumps(about)})
                named = [heading(key) for key in block.keys] + [STATUS]
                writer = parquet.ParquetWriter(path, schema, compression="zstd", compression_level=1, use_dictionary=named)
            writer.write_table(table.cast(writer.schema))
    finally:
        if writer is not None:
            writer.close()


def frame(blocks: Iterable[Block]) -> pd.DataFrame:
    """Blocks as one pandas data frame."""
    import pandas as pd

    tables = []
    for block in blocks:
        columns = {heading(key): values for key, values in block.keys.items()} | dict(block.figures)
        tables.append(pd.DataFrame(columns | {STATUS: _labels(block.status)}))
    return pd.concat(tables, ignore_index=True)


def _labels(status: Codes) -> list[str]:
    return [_LABELS[code] for code in status.tolist()]


def _table(pa: Any, block: Block) -> Any:
    columns: dict[str, Any] = {}
    for key, values in block.keys.items():
        text = not isinstance(values, np.ndarray) or values.dtype.kind != "f"
        columns[heading(key)] = pa.array(np.asarray(values).astype(object) if text else values)
    for name, figures in block.figures.items():
        columns[name] = pa.array(figures, from_pandas=True)  # null where there is no figure
    columns[STATUS] = pa.DictionaryArray.from_arrays(pa.array(block.status), pa.array(_LABELS)).cast(pa.string())
    return pa.table(columns)


def _lines(block: Block, rows: slice) -> str:
    """Text of some rows; numbers as short as they read back exactly, nothing where there is no figure."""
    columns = [_cells(values[rows]) for values in (*block.keys.values(), *block.figures.values())]
    columns.append(_labels(block.status[rows]))
    return "\n".join(map(",".join, zip(*columns, strict=True))) + "\n"


def _cells(values: Values) -> Sequence[str]:
    if isinstance(values, np.ndarray) and values.dtype.kind == "f":
        cells = list(map(repr, values.tolist()))
        for place in np.flatnonzero(~np.isfinite(values)).tolist():
            cells[place] = ""
        return cells
    texts = [str(value) for value in values]
    quoted = {text: _quoted(text) for text in set(texts)}
    return [quoted[text] for text in texts]


def _quoted(text: str) -> str:
    out = io.StringIO()
    csv.writer(out, lineterminator="").writerow([text])
    return out.getvalue()


def _arrow(module: str) -> Any:
    try:
        return import_module(module)
    except ImportError:
        raise MissingExtraError("export", "Writing Parquet") from None


def grouped(blocks: Iterator[Block], rows: int) -> Iterator[Block]:
    """Blocks joined until each holds ``rows`` rows, but for the last."""
    held: list[Block] = []
    for block in blocks:
        held.append(block)
        if sum(len(one.status) for one in held) >= rows:
            yield _joined(held)
            held = []
    if held:
        yield _joined(held)


def _joined(blocks: Sequence[Block]) -> Block:
    if len(blocks) == 1:
        return blocks[0]
    first = blocks[0]
    return Block(
        {key: np.concatenate([np.asarray(one.keys[key]) for one in blocks]) for key in first.keys},
        {name: np.concatenate([one.figures[name] for one in blocks]) for name in first.figures},
        np.concatenate([one.status for one in blocks]),
    )
