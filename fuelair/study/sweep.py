"""Sweep: every row of a design solved and written to one file, with bounded memory, by runs that may be killed."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from contextlib import closing
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from fuelair.case import fuels
from fuelair.errors import InputError, Problem, StoppedError
from fuelair.gas.engine import Array, Codes, Status
from fuelair.gas.engines import EngineName
from fuelair.gas.species import build, data_versions
from fuelair.study import formats
from fuelair.study.batch import CHUNK, Study
from fuelair.study.columns import Values
from fuelair.study.formats import Block
from fuelair.study.parts import Parts
from fuelair.study.sampling import Design
from fuelair.study.spread import Runner, spread
from fuelair.version import __version__

if TYPE_CHECKING:
    import pandas as pd

FORMAT: Final = 1
"""Version of the layout of parts and results."""
ROW_GROUP: Final = 65536
"""Rows written at once to the result."""
TASK_ROWS: Final[dict[EngineName, int]] = {"compiled": CHUNK, "reference": 8}
PART_ROWS: Final[dict[EngineName, int]] = {"compiled": 65536, "reference": 64}
"""Rows of a task and of a part: a second or so of work, and what a killed run may lose."""
Progress = Callable[[int, int], None]


@dataclass(frozen=True, slots=True)
class Summary:
    """What became of the rows.

    Attributes
    ----------
    rows : number of rows.
    counts : status -> number of rows, most first.
    first : status -> first row of it, from 0.
    """

    rows: int
    counts: dict[Status, int]
    first: dict[Status, int]

    @property
    def failed(self) -> int:
        """Rows without figures."""
        return self.rows - self.counts.get(Status.OK, 0)


def sweep(
    study: Study,
    design: Design,
    out: Path,
    *,
    runner: Runner | None = None,
    fresh: bool = False,
    replace: bool = False,
    progress: Progress | None = None,
) -> Summary:
    """Solve every row of a design and write the table.

    Parameters
    ----------
    out : ``.csv`` or ``.parquet``. Parts lie beside it until all is done; a run that was killed goes on from them.
    runner : where rows are solved; the result does not depend on it.
    fresh : throw away the parts of an earlier run.
    replace : replace a result that exists.
    progress : called with rows done and rows in all.

    Raises
    ------
    InputError : ``out`` cannot be written, exists, or has parts of another sweep beside it.
    StoppedError : interrupted; parts are kept.
    """
    formats.check(out)
    out = out.resolve()
    parts = _parts(study, design, out, fresh=fresh, replace=replace)
    try:
        finished = parts.merged()
        if finished is not None:
            parts.remove()
            return _summary(finished)
        _solve(study, design, parts, runner, progress or (lambda done, rows: None))
        return _summary(parts.finish(lambda path: _merge(study, design, parts, path)))
    except KeyboardInterrupt:
        kept = min(len(parts.done()) * PART_ROWS[study.engine], design.rows)
        message = f"interrupted; {kept} of {design.rows} rows are kept in {parts.folder}. The same command goes on from there"
        raise StoppedError(message) from None
    finally:
        if parts.done():
            parts.close()
        else:
            parts.remove()


def table(study: Study, design: Design, *, runner: Runner | None = None) -> pd.DataFrame:
    """Solve every row of a design in memory; returns a pandas data frame laid out as the file of `sweep`."""
    size = TASK_ROWS[study.engine]
    blocks = [(start, min(start + size, design.rows)) for start in range(0, design.rows, size)]
    solved = spread(solve, study, (design.columns(*block) for block in blocks), runner)
    made = (_block(study, design, *block, *result) for block, (_, result) in zip(blocks, solved, strict=True))
    return formats.frame(made)


def solve(study: Study, columns: Mapping[str, Values]) -> tuple[Array, Codes]:
    """Figures (quantities, rows) and status of some rows: the task of a worker."""
    rows = study.run(columns)
    return np.array([rows.figures[name] for name in study.quantities]), rows.status


def about(study: Study, design: Design) -> dict[str, Any]:
    """What makes the rows what they are, as plain data: equal ones have equal rows."""
    versions = {"fuelair": __version__, "numpy": np.__version__, **data_versions()}
    if study.engine == "compiled":
        versions["numba"] = version("numba")
    return {
        "format": FORMAT,
        "versions": versions,
        "species_table": build(fuels.record(study.case.fuel).vapour).digest,
        "engine": study.engine,
        "model": study.model or "the headline of each row",
        "keys": list(study.keys),
        "quantities": list(study.quantities),
        "design": design.describe(),
        "case": study.case.to_toml(),
    }


def _parts(study: Study, design: Design, out: Path, *, fresh: bool, replace: bool) -> Parts:
    if out.exists() and not out.is_file():
        raise InputError(Problem("is no ordinary file", "--out", file=str(out), hint="a name that is free"))
    if not out.parent.is_dir():
        raise InputError(Problem("lies in a folder that does not exist", "--out", file=str(out), hint="make the folder first"))
    leftover = out.with_name(out.name + ".parts").is_dir()
    if out.exists() and not replace and not leftover:
        raise InputError(Problem("exists already", "--out", file=str(out), hint="--replace, or another --out"))
    manifest = about(study, design) | {"part_rows": PART_ROWS[study.engine], "kind": out.suffix.lower()}
    parts = Parts(out, manifest, fresh=fresh)
    if out.exists() and not replace and parts.merged() is None:
        parts.close()
        raise InputError(Problem("exists already", "--out", file=str(out), hint="--replace, or another --out"))
    return parts


def _solve(study: Study, design: Design, parts: Parts, runner: Runner | None, progress: Progress) -> None:
    """Solve and write the parts that are missing."""
    size, step = PART_ROWS[study.engine], TASK_ROWS[study.engine]
    there = parts.done()
    missing = [n for n in range(-(-design.rows // size)) if n not in there]
    done = design.rows - sum(min(size, design.rows - n * size) for n in missing)
    progress(done, design.rows)

    def tasks() -> Iterator[Mapping[str, Values]]:
        for number in missing:
            end = min((number + 1) * size, design.rows)
            for start in range(number * size, end, step):
                yield design.columns(start, min(start + step, end))

    with closing(spread(solve, study, tasks(), runner)) as results:
        for number in missing:
            rows = min(size, design.rows - number * size)
            figures, status = [], []
            for _ in range(-(-rows // step)):
                some, codes = next(results)[1]
                figures.append(some)
                status.append(codes)
                done += len(codes)
                progress(done, design.rows)
            parts.write(number, np.concatenate(figures, axis=1), np.concatenate(status))


def _merge(study: Study, design: Design, parts: Parts, path: Path) -> dict[str, Any]:
    """Write the whole table from the parts; returns its summary as plain data."""
    size = PART_ROWS[study.engine]
    counts, first = np.zeros(len(Status), int), [-1] * len(Status)

    def blocks() -> Iterator[Block]:
        for number in range(-(-design.rows // size)):
            start, stop = number * size, min((number + 1) * size, design.rows)
            figures, status = parts.read(number)
            for code in np.unique(status).tolist():
                if first[code] < 0:
                    first[code] = start + int(np.argmax(status == code))
            counts[:] += np.bincount(status, minlength=len(Status))
            yield _block(study, design, start, stop, figures, status)

    formats.save(path, parts.target.suffix.lower(), formats.grouped(blocks(), ROW_GROUP), about(study, design))
    return {"rows": design.rows, "counts": counts.tolist(), "first": first}


def _block(study: Study, design: Design, start: int, stop: int, figures: Array, status: Codes) -> Block:
    return Block(design.columns(start, stop), dict(zip(study.quantities, figures, strict=True)), status)


def _summary(plain: Mapping[str, Any]) -> Summary:
    counts = {Status(code): number for code, number in enumerate(plain["counts"]) if number}
    ranked = dict(sorted(counts.items(), key=lambda item: -item[1]))
    return Summary(plain["rows"], ranked, {Status(code): row for code, row in enumerate(plain["first"]) if row >= 0})
