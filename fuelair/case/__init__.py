"""What the user writes: the case file, its schema, its rules and its errors. ``Case`` is the door."""

from fuelair.case.model import Case

__all__ = ["Case"]
