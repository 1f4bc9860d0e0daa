"""What can go wrong, as one tree.

::

    FuelairError
    +-- InputError      (ValueError)       the case or a call is wrong: exit code 2
    +-- DataError       (LookupError)      a data file of the package is missing or damaged: exit code 4
    +-- UnsolvedError   (ArithmeticError)  the headline model found no solution: exit code 3
    +-- MissingExtraError (ImportError)    an optional dependency is not installed: exit code 2
    +-- WorkersError    (RuntimeError)     workers of a study keep dying or cannot be reached: exit code 4
    +-- StoppedError                       a study was interrupted and keeps what is done: exit code 130

Every error pickles, carries its data as attributes and says what, where, the value, the allowed
range with its unit and what to do.
"""

from __future__ import annotations

from dataclasses import dataclass, field

LONGEST_ECHO = 80
"""Characters of a wrong value that an error repeats."""


@dataclass(frozen=True, slots=True)
class Problem:
    """One mistake in an input.

    Attributes
    ----------
    message : what is wrong, one sentence without the place.
    key : dotted key path, e.g. ``charge.pressure``; empty if the whole input is meant.
    value : the offending value as the user wrote it, or None.
    allowed : allowed range or choices, with unit, or empty.
    hint : what to do, e.g. the nearest valid name, or empty.
    file, line, quoted : where it stands (line counts from 1; 0 if unknown) and that line's text.
    """

    message: str
    key: str = ""
    value: object = None
    allowed: str = ""
    hint: str = ""
    file: str = ""
    line: int = 0
    quoted: str = ""

    def __str__(self) -> str:
        place = self.file
        if place and self.line:
            place += f", line {self.line}"
        head = f"{self.key}: {self.message}" if self.key else self.message
        rows = [f"{place}: {head}" if place else head]
        if self.quoted:
            rows.append(f"    | {self.quoted.strip()}")
        if self.value is not None:
            rows.append(f"    given:   {_echo(self.value)}")
        if self.allowed:
            rows.append(f"    allowed: {self.allowed}")
        if self.hint:
            rows.append(f"    try:     {self.hint}")
        return "\n".join(rows)


def _echo(value: object) -> str:
    """A value as TOML spells it, long ones cut."""
    text = str(value).lower() if isinstance(value, bool) else repr(value)
    return text if len(text) <= LONGEST_ECHO else f"{text[:LONGEST_ECHO]}... ({len(text)} characters)"


class FuelairError(Exception):
    """Root of every error that fuelair raises on purpose."""

    exit_code = 4


class InputError(FuelairError, ValueError):
    """The input is wrong. ``problems`` holds every mistake found, not only the first."""

    exit_code = 2

    def __init__(self, *problems: Problem) -> None:
        super().__init__(*problems)
        self.problems: tuple[Problem, ...] = problems

    def __str__(self) -> str:
        return "\n".join(str(p) for p in self.problems)


class DataError(FuelairError, LookupError):
    """A data file of the package is missing, damaged or does not hold what it must."""

    exit_code = 4


@dataclass(eq=False)
class UnsolvedError(FuelairError, ArithmeticError):
    """The headline model could not be solved; ``status`` and ``reason`` are the model's own."""

    status: str
    reason: str
    model: str = ""
    exit_code: int = field(default=3, init=False, repr=False)

    def __post_init__(self) -> None:
        super().__init__(self.status, self.reason, self.model)

    def __str__(self) -> str:
        where = f"{self.model}: " if self.model else ""
        return f"{where}{self.status}: {self.reason}"


class MissingExtraError(FuelairError, ImportError):
    """An optional dependency is missing; the message is the one line that installs it."""

    exit_code = 2

    def __init__(self, extra: str, purpose: str) -> None:
        super().__init__(extra, purpose)
        self.extra, self.purpose = extra, purpose

    def __str__(self) -> str:
        return f"{self.purpose} needs an optional part: python -m pip install 'fuelair[{self.extra}]'"


class WorkersError(FuelairError, RuntimeError):
    """Workers of a study keep dying, cannot be reached, or run another release."""

    exit_code = 4


class StoppedError(FuelairError):
    """A study was interrupted; what is done is kept, and the message says how to go on."""

    exit_code = 130
