"""Result files of an assessment: JSON, CSV with units in the header, the resolved case, a log.

Everything is written to a fresh folder first and moved into place when it is complete.
"""

from __future__ import annotations

import csv
import io
import json
import os
import shutil
import tempfile
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

from fuelair.assessment import Assessment, flat_state
from fuelair.errors import InputError, Problem
from fuelair.report.tables import CAUTION


def as_json(a: Assessment) -> str:
    """The whole assessment as JSON text (strict: null, never NaN)."""
    return json_text(a.to_dict())


def json_text(data: dict[str, Any]) -> str:
    """A dictionary as strict JSON text; NaN is an error."""
    return json.dumps(data, indent=2, allow_nan=False, ensure_ascii=False) + "\n"


def contents(a: Assessment) -> dict[str, str]:
    """File name -> text of every result file."""
    models = [{"model": m, "status": a.status(m).label, **a.figures(m)} for m in a.results]
    states = [{"model": m, **flat_state(s)} for m in a.results for s in a.to_states(m)]
    steps = [{"from": s.lower, "to": s.upper, "assumption": s.assumption, **s.change} for s in a.ladder]
    over = [{"model": m, "quantity": k, **both} for m, quantities in a.overprediction.items() for k, both in quantities.items()]
    return {
        "assessment.json": as_json(a),
        "models.csv": csv_text(models),
        "states.csv": csv_text(states),
        "ladder.csv": csv_text(steps),
        "overprediction.csv": csv_text(over),
        "resolved-case.toml": a.case.to_toml(),
        "log.txt": log(a),
    }


def log(a: Assessment) -> str:
    """Versions, ledgers, warnings and sources as text."""
    rows = [
        a.verdict,
        "",
        *(f"{k}: {v}" for k, v in a.versions.items()),
        f"gas engine: {a.engine}",
        f"headline: {a.headline}",
        "",
    ]
    rows += ["ledger (relative residuals):"]
    for model, result in a.results.items():
        rows += [f"  {model}: " + ", ".join(f"{k} {float(v[0]):.1e}" for k, v in result.ledger.items())]
    rows += ["", "warnings:", *(f"  {w}" for w in a.warnings), "", "sources:"]
    rows += [f"  {s.key}: {s.reference} [{s.standing}]" for s in a.sources]
    return "\n".join([*rows, "", CAUTION, ""])


def write_folder(a: Assessment, folder: Path, *, keep: Path | None = None) -> list[Path]:
    """Write every result file into ``folder`` (made if missing); returns their paths.

    ``keep`` is a file that must not be replaced: the case that was read.

    Raises
    ------
    InputError : the folder cannot be made or written, or a name in it is taken; nothing is left behind.
    """
    return write_texts(contents(a), folder, keep=keep)


def write_texts(texts: Mapping[str, str], folder: Path, *, keep: Path | None = None) -> list[Path]:
    """Write texts by file name into ``folder``, all or none; otherwise as :func:`write_folder`."""
    if folder.exists() and not folder.is_dir():
        raise InputError(Problem("is a file, not a folder", "--out", str(folder), "a folder, or a name that is free"))
    for name in texts:
        _guard(folder / name, keep, "--out")
    try:
        folder.parent.mkdir(parents=True, exist_ok=True)
        staging = Path(tempfile.mkdtemp(prefix=f".{folder.name}-", dir=folder.parent))
    except OSError as error:
        raise _refused(folder, error) from None
    try:
        for name, text in texts.items():
            (staging / name).write_text(text, encoding="utf-8", newline="")
        folder.mkdir(exist_ok=True)
        for name in texts:
            os.replace(staging / name, folder / name)
    except OSError as error:
        raise _refused(folder, error) from None
    finally:
        shutil.rmtree(staging, ignore_errors=True)
    return [folder / name for name in texts]


def write_text(path: Path, text: str, key: str = "--json", *, keep: Path | None = None) -> None:
    """Write one file by way of a temporary neighbour, so that it is whole or not there.

    A symbolic link is followed; ``keep`` is a file that must not be replaced.

    Raises
    ------
    InputError : it cannot be written, or is no ordinary file.
    """
    _guard(path, keep, key)
    path = path.resolve()
    try:
        handle, name = tempfile.mkstemp(prefix=f".{path.name}-", dir=path.parent)
    except OSError as error:
        raise _refused(path, error, key) from None
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="") as file:
            file.write(text)
        os.chmod(name, 0o644)
        os.replace(name, path)
    except OSError as error:
        Path(name).unlink(missing_ok=True)
        raise _refused(path, error, key) from None
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise


def _guard(path: Path, keep: Path | None, key: str) -> None:
    """Refuse a target that is the case itself, a folder, a device or a pipe."""
    if not path.name:
        raise InputError(Problem("names no file", key, str(path), "a file name"))
    if path.exists() and not path.is_file():
        raise InputError(Problem("is no ordinary file", key, str(path), "an ordinary file, or a name that is free"))
    if keep is not None and path.exists() and path.samefile(keep):
        raise InputError(Problem("is the case itself, which would be lost", key, str(path), "another name"))


def _refused(path: Path, error: OSError, key: str = "--out") -> InputError:
    return InputError(Problem(f"cannot write: {error.strerror or error}", key, str(path), "a place you may write to"))


def csv_text(rows: Iterable[dict[str, Any]]) -> str:
    """Rows as CSV text, columns in the order of their first appearance, empty for None."""
    rows = list(rows)
    columns: dict[str, None] = {}
    for row in rows:
        columns |= dict.fromkeys(row)
    out = io.StringIO()
    writer = csv.DictWriter(out, list(columns), restval="", lineterminator="\n")
    writer.writeheader()
    writer.writerows({k: ("" if v is None else v) for k, v in row.items()} for row in rows)
    return out.getvalue()
