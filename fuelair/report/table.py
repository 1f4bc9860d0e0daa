"""A table of text, the caution that every sheet carries, and how numbers are put into cells."""

from __future__ import annotations

from dataclasses import dataclass

from fuelair.quantities import QUANTITIES, shown_value

CAUTION = (
    "Concept estimate from an ideal cycle; verify by test and detailed analysis. Local codes, class rules and licensed "
    "practice decide."
)


@dataclass(frozen=True, slots=True)
class Table:
    """A table of text: title, column heads, rows, a note below, and the column to stress (or None)."""

    title: str
    columns: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    note: str = ""
    stressed: int | None = None


def signed(key: str, value: float) -> str:
    """A difference in the shown unit, with its sign."""
    row = QUANTITIES[key]
    text = f"{shown_value(key, value + row.offset):+{row.style}}"
    return text if text.strip("+-0.") else text.replace("-", "+")  # rounding noise has no sign


def plain(value: float | None, style: str) -> str:
    """A number in a style, ``-`` for none."""
    return "-" if value is None else f"{value:{style}}"


def percent(value: float | None) -> str:
    """A share in percent, small ones in ppm, ``-`` for none."""
    if value is None:
        return "-"
    return f"{value * 100.0:.3g} %" if value >= 1e-4 or value == 0.0 else f"{value * 1e6:.3g} ppm"
