"""Reading a case file: the bytes, the TOML, and the line on which each key stands.

The TOML parser of the standard library keeps no positions. :func:`key_lines` scans text that is known to
be valid TOML and returns the line of every key, whatever the spelling: tables, dotted and quoted keys,
inline tables, arrays over several lines, arrays of tables.
"""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import Any, Final

from fuelair.case.fields import nearest
from fuelair.errors import InputError, Problem

LARGEST_FILE: Final = 1_000_000  # bytes; a case is a page of text
Key = tuple[str | int, ...]

_AT = re.compile(r"\s*\(at (?:line (\d+), column \d+|end of document)\)\s*$")
_BARE = re.compile(r"[A-Za-z0-9_-]+")
_SPACE = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")
_BLANK = re.compile(r"[ \t]*")
_STRING = re.compile(
    r'"""(?:\\.|[^\\])*?"{3,5}(?!")|\'\'\'.*?\'{3,5}(?!\')|"(?:\\.|[^"\\\n])*"|\'[^\'\n]*\'',
    re.DOTALL,
)
_SCALAR = re.compile(r"[^,\]}#\n]+")


def read_text(path: Path) -> str:
    """Return the text of a case file.

    Raises
    ------
    InputError : missing, a folder, unreadable, above :data:`LARGEST_FILE`, not UTF-8.
    """
    name = str(path)
    try:
        if path.is_dir():
            raise InputError(Problem("is a folder, not a case file", file=name, hint="a file such as CASE.toml in it"))
        with path.open("rb") as stream:
            data = stream.read(LARGEST_FILE + 1)
    except FileNotFoundError:
        raise InputError(Problem("no such file", file=name, hint=_near_file(path))) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(Problem(f"cannot be read: {reason}", file=name)) from None
    if len(data) > LARGEST_FILE:
        allowed = f"up to {LARGEST_FILE // 1000} kB"
        raise InputError(Problem("too large for a case file", file=name, allowed=allowed, hint="a TOML case, not results"))
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise InputError(
            Problem(
                f"not UTF-8 text (byte {error.start} is 0x{data[error.start]:02x})",
                file=name, line=line, hint="save the file in the encoding UTF-8",
            )
        ) from None  # fmt: skip


def _near_file(path: Path) -> str:
    try:
        names = [entry.name for entry in path.parent.iterdir() if entry.suffix == ".toml"] if path.parent.is_dir() else []
    except OSError:
        names = []
    near = nearest(path.name, names)
    return str(path.parent / near) if near else "`fuelair new NAME` writes a demo case to start from"


def load(text: str, name: str) -> dict[str, Any]:
    """Return the data of TOML text; ``name`` is the file named in errors.

    Raises
    ------
    InputError : the text is not valid TOML.
    """
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        message = str(error)
        at = _AT.search(message)
        line = int(at[1]) if at and at[1] else len(text.splitlines())
        raise InputError(_syntax(_AT.sub("", message), text, name, line)) from None
    except RecursionError:
        raise InputError(Problem("not valid TOML: brackets nested too deeply", file=name)) from None
    except ValueError as error:  # e.g. an integer of thousands of digits
        raise InputError(Problem(f"not valid TOML: {error}", file=name)) from None


def _syntax(message: str, text: str, name: str, line: int) -> Problem:
    quoted = quote(text, line)
    message = message[:1].lower() + message[1:]
    hint = 'one `key = value` a line; values with a unit in quotes, e.g. pressure = "2.9 bar"'
    if message.startswith(("cannot overwrite", "cannot declare", "cannot mutate")):
        message, hint = "a key or table stands twice", "keep one of the two"
    return Problem(f"not valid TOML: {message}", file=name, line=line, quoted=quoted, hint=hint)


def quote(text: str, line: int) -> str:
    """Return line ``line`` (from 1) of the text, shortened, or ``""``."""
    lines = text.split("\n")
    if not 1 <= line <= len(lines):
        return ""
    whole = lines[line - 1].strip()
    return whole if len(whole) <= 120 else whole[:117] + "..."


def key_lines(text: str) -> dict[Key, int]:
    """Return key path to line number (from 1) for valid TOML; table headers count as keys."""
    return _Scanner(text).run()


class _Scanner:
    """Walks over valid TOML and notes the line of each key."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.place = 0
        self.lines: dict[Key, int] = {}
        self._counted, self._line = 0, 1

    def run(self) -> dict[Key, int]:
        table: Key = ()
        arrays: dict[Key, int] = {}
        self._skip(_SPACE)
        while self.place < len(self.text):
            if self.text[self.place] == "[":
                table = self._header(arrays)
            else:
                self._pair(table)
            self._skip(_SPACE)
        return self.lines

    def _note(self, key: Key, place: int) -> None:
        self._line += self.text.count("\n", self._counted, place)
        self._counted = max(self._counted, place)
        self.lines.setdefault(key, self._line)

    def _skip(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self.text, self.place)
        if match is None or (not match[0] and pattern not in (_SPACE, _BLANK)):
            raise AssertionError(f"not the TOML that was parsed, at character {self.place}")
        self.place = match.end()
        return match[0]

    def _header(self, arrays: dict[Key, int]) -> Key:
        start = self.place
        many = self.text.startswith("[[", start)
        self.place += 2 if many else 1
        path: Key = ()
        parts = self._dotted()
        for number, part in enumerate(parts):
            path = (*path, part)
            last = number == len(parts) - 1
            if many and last:
                arrays[path] = arrays.get(path, -1) + 1
            self._note(path, start)
            if path in arrays:
                path = (*path, arrays[path])
                self._note(path, start)
        self.place += 2 if many else 1
        return path

    def _dotted(self) -> list[str]:
        parts: list[str] = []
        while True:
            self._skip(_BLANK)
            if self.text[self.place] in "\"'":
                parts.append(next(iter(tomllib.loads(f"{self._skip(_STRING)} = 0"))))
            else:
                parts.append(self._skip(_BARE))
            self._skip(_BLANK)
            if self.text[self.place] != ".":
                return parts
            self.place += 1

    def _pair(self, table: Key) -> None:
        start = self.place
        path = table
        for part in self._dotted():
            path = (*path, part)
            self._note(path, start)
        self.place += 1  # the equals sign
        self._value(path)

    def _value(self, path: Key) -> None:
        self._skip(_SPACE)
        opening = self.text[self.place]
        if opening in "\"'":
            self._skip(_STRING)
        elif opening in "[{":
            self._inside(path, "]" if opening == "[" else "}")
        else:
            self._skip(_SCALAR)

    def _inside(self, path: Key, closing: str) -> None:
        """Items of an array or an inline table."""
        self.place += 1
        number = 0
        self._skip(_SPACE)
        while self.text[self.place] != closing:
            if closing == "]":
                self._note((*path, number), self.place)
                self._value((*path, number))
                number += 1
            else:
                self._pair(path)
            self._skip(_SPACE)
            if self.text[self.place] == ",":
                self.place += 1
                self._skip(_SPACE)
        self.place += 1


def dump(written: dict[str, Any], resolved: dict[str, Any], defaulted: frozenset[str]) -> str:
    """Return TOML of the written keys; what was left to its default follows in each section as comments."""
    import tomli_w

    blocks = [tomli_w.dumps({key: value for key, value in written.items() if not isinstance(value, dict)})]
    for name, table in resolved.items():
        if not isinstance(table, dict):
            continue
        kept = written.get(name, {})
        deep = {key: value for key, value in kept.items() if isinstance(value, dict)}
        lists = {key: value for key, value in kept.items() if isinstance(value, list)}
        flat = {key: value for key, value in kept.items() if key not in deep and key not in lists}
        silent = {key: value for key, value in table.items() if f"{name}.{key}" in defaulted}
        comments = "".join(f"# {line}  (default)\n" for line in tomli_w.dumps(silent).splitlines())
        head = f"[{name}]\n" if name in written else f"# [{name}]\n"
        if flat or deep or silent or name in written:
            parts = "".join(f"\n[[{name}.{key}]]\n{tomli_w.dumps(item)}" for key, items in lists.items() for item in items)
            inner = "\n" + tomli_w.dumps({name: deep}) if deep else ""
            blocks.append(head + tomli_w.dumps(flat) + comments + parts + inner)
    return "\n".join(block for block in blocks if block)
