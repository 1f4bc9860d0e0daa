"""The verb `warmup`: compiles the gas engine of the studies ahead of their first run."""

from __future__ import annotations

from fuelair.errors import MissingExtraError


def warmup() -> None:
    """Compile the gas engine of the studies now, so that their first run need not."""
    from fuelair.gas import engines

    if not engines.can_compile():
        raise MissingExtraError("fast", "The compiled engine")
    engines.warm_up(print)
