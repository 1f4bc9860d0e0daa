"""The parts of a study that is being written: numbered files beside the result, each whole or not there.

``FILE.parts/`` holds a manifest of what is being computed and one file for each fixed number of rows. A study that
was killed goes on with the parts that are missing; one that asks for something else is refused.
"""

from __future__ import annotations

import json
import os
import re
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import IO, Any, Final
from zipfile import BadZipFile

import numpy as np

from fuelair.errors import InputError, Problem
from fuelair.gas.engine import Array, Codes

MANIFEST, MERGED, LOCK = "manifest.json", "merged.json", "lock"
_OURS: Final = re.compile(r"part-\d{6}\.npz|manifest\.json|merged\.json|lock|.+\.tmp|whole")


class Parts:
    """Part files of one result file.

    Parameters
    ----------
    target : the result file; parts lie in ``FILE.parts`` beside it.
    manifest : what is computed, as plain data; parts of an equal manifest are taken over.
    fresh : throw away parts of another study, or of this one.

    Raises
    ------
    InputError : parts of another study are there, another sweep writes them, or nothing can be written.
    """

    def __init__(self, target: Path, manifest: dict[str, Any], *, fresh: bool = False) -> None:
        self.target, self.folder = target, target.with_name(target.name + ".parts")
        self.manifest: dict[str, Any] = json.loads(json.dumps(manifest))
        with told(self.folder):
            self.folder.mkdir(exist_ok=True)
            self._held = _hold(self.folder)
            if fresh:
                self._clear()
            self._agree()

    def _agree(self) -> None:
        """Compare with the manifest that is there, or write it."""
        path = self.folder / MANIFEST
        there = {entry.name for entry in self.folder.iterdir() if not entry.name.endswith(".tmp")} - {LOCK}
        if not there:
            write(path, lambda file: file.write(json.dumps(self.manifest, indent=1).encode()))
            return
        try:
            known = json.loads(path.read_text(encoding="utf-8"))
        except (FileNotFoundError, ValueError):
            known = {}
        if known == self.manifest:
            return
        differs = sorted(key for key in {*known, *self.manifest} if known.get(key) != self.manifest.get(key))
        what = f"holds parts of another sweep, of another {', '.join(differs)}" if known else "holds something else"
        self._held.close()
        hint = "--fresh to throw these parts away, or another --out"
        raise InputError(Problem(what, "--out", file=str(self.folder), hint=hint))

    def done(self) -> set[int]:
        """Numbers of the parts that are there."""
        return {int(entry.name[5:11]) for entry in self.folder.glob("part-??????.npz")}

    def write(self, number: int, figures: Array, status: Codes) -> None:
        """Write a part: figures (quantities, rows) and status (rows)."""
        with told(self.folder):
            write(self._part(number), lambda file: np.savez(file, figures=figures, status=status))

    def read(self, number: int) -> tuple[Array, Codes]:
        """Figures and status of a part; InputError if the file is damaged."""
        path = self._part(number)
        try:
            with path.open("rb") as file, np.load(file) as part:
                return part["figures"], part["status"]
        except (OSError, ValueError, KeyError, BadZipFile) as error:
            hint = "delete this part and run again"
            raise InputError(Problem(f"part is damaged: {error}", "--out", file=str(path), hint=hint)) from None

    def _part(self, number: int) -> Path:
        return self.folder / f"part-{number:06d}.npz"

    def merged(self) -> dict[str, Any] | None:
        """Summary of a study whose result is in place already, though its parts are not yet gone; else None."""
        path = self.folder / MERGED
        if not path.exists() or (self.folder / "whole").exists() or not self.target.exists():
            return None
        summary: dict[str, Any] = json.loads(path.read_text(encoding="utf-8"))
        return summary

    def finish(self, whole: Callable[[Path], dict[str, Any]]) -> dict[str, Any]:
        """Write the whole by ``whole(path)``, which gives its summary, put it in place and remove the parts."""
        path = self.folder / "whole"
        with told(self.target):
            summary = whole(path)
            flush(path)
            write(self.folder / MERGED, lambda file: file.write(json.dumps(summary).encode()))
            os.replace(path, self.target)
            flush(self.target.parent)
        self.remove()
        return summary

    def remove(self) -> None:
        """Remove the folder and what this class put in it, nothing else."""
        with suppress(OSError):
            self._clear()
            (self.folder / LOCK).unlink(missing_ok=True)
            self.folder.rmdir()
        self.close()

    def close(self) -> None:
        """Let another sweep have the parts."""
        self._held.close()

    def _clear(self) -> None:
        ours = sorted((e for e in self.folder.iterdir() if _OURS.fullmatch(e.name)), key=lambda e: e.name == MERGED)
        for entry in ours:
            if entry.name != LOCK:
                entry.unlink()


def write(path: Path, fill: Callable[[IO[bytes]], object]) -> None:
    """Write a file by way of a temporary neighbour, on the disk before it has its name."""
    temporary = path.with_name(path.name + ".tmp")
    try:
        with temporary.open("wb") as file:
            fill(file)
            file.flush()
            os.fsync(file.fileno())
        os.replace(temporary, path)
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise
    flush(path.parent)


def flush(path: Path) -> None:
    """Have a file, or the names in a folder, on the disk."""
    with suppress(PermissionError, IsADirectoryError):  # folders cannot be opened everywhere
        handle = os.open(path, os.O_RDONLY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)


@contextmanager
def told(path: Path) -> Iterator[None]:
    """Turn what the system says about writing into one clear error."""
    try:
        yield
    except OSError as error:
        hint = "run the same command again once there is room; what is done is kept" if path.is_dir() else ""
        raise InputError(Problem(f"cannot write: {error.strerror or error}", "--out", file=str(path), hint=hint)) from None


def _hold(folder: Path) -> IO[bytes]:
    """Keep a second sweep away for as long as this process lives."""
    file = (folder / LOCK).open("ab")
    try:
        import fcntl

        fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except ImportError:  # no such lock on this system
        pass
    except BlockingIOError:
        file.close()
        problem = Problem("another sweep is writing these parts", "--out", file=str(folder), hint="another --out")
        raise InputError(problem) from None
    return file
