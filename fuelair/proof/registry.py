"""Registers of what the validation book may call by name: computations and package figures.

A computation takes the inputs of a row as keywords and returns one number in SI (kJ/mol style
quantities in J/mol and J/(mol K), ratios as plain numbers). A lookup does the same from data that a
package carries, for rows whose published figure is read at run time.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from fuelair.errors import UnsolvedError
from fuelair.gas.engine import Array, GasState, Status

Function = Callable[..., float]

COMPUTATIONS: dict[str, Function] = {}
"""Name of a computation -> function of a row's inputs, result in SI."""
LOOKUPS: dict[str, Function] = {}
"""Name of a lookup -> function of a row's inputs, result in SI, read from a package's data."""


def computation(name: str) -> Callable[[Function], Function]:
    """Register the decorated function as a computation of the book under ``name``."""
    return _register(COMPUTATIONS, name)


def lookup(name: str) -> Callable[[Function], Function]:
    """Register the decorated function as a lookup of the book under ``name``."""
    return _register(LOOKUPS, name)


def _register(register: dict[str, Function], name: str) -> Callable[[Function], Function]:
    def keep(function: Function) -> Function:
        if name in register:
            raise ValueError(f"{name!r} is registered twice")
        register[name] = function
        return function

    return keep


def one(value: float) -> Array:
    """A batch of one."""
    return np.array([float(value)])


def solved(state: GasState) -> GasState:
    """The same state; UnsolvedError if any element of it is not solved."""
    for code in state.status:
        if code != Status.OK:
            status = Status(int(code))
            raise UnsolvedError(status.label, status.reason)
    return state


def pick(choices: dict[str, Any], name: str) -> float:
    """A result by its name as a number; KeyError naming the choices if there is none."""
    if name not in choices:
        raise KeyError(f"result {name!r} is not offered; there are {', '.join(choices)}")
    return float(choices[name])
