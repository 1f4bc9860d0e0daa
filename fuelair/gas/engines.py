"""Which gas engine runs: the reference on Cantera, or the compiled one for studies."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass
from importlib.util import find_spec
from typing import Literal

import numpy as np

from fuelair.errors import MissingExtraError
from fuelair.gas.engine import Engine

EngineName = Literal["reference", "compiled"]
ENGINES: tuple[EngineName, ...] = ("reference", "compiled")


@dataclass(frozen=True, slots=True)
class Engines:
    """The gas engine of the ideal models and that of the real-gas model."""

    ideal: Engine
    real: Engine


def can_compile() -> bool:
    """Whether numba, of the extra ``fast``, is installed."""
    return find_spec("numba") is not None


def usual() -> EngineName:
    """Engine that studies run on if none is named: compiled where numba is installed."""
    return "compiled" if can_compile() else "reference"


def pick(name: EngineName, fuel_fluid: str | None = None) -> Engines:
    """Both gas engines of a name.

    Parameters
    ----------
    name : ``reference`` or ``compiled``.
    fuel_fluid : fluid of the virial data that stands for the fuel vapour in the real gas; None if there is none.

    Raises
    ------
    MissingExtraError : ``compiled`` without numba.
    """
    if name == "compiled":
        if not can_compile():
            raise MissingExtraError("fast", "The compiled engine")
        from fuelair.gas.compiled.batch_gas import BatchGas
        from fuelair.gas.compiled.real_batch import RealBatchGas

        return Engines(BatchGas(), RealBatchGas(fuel_fluid))
    from fuelair.gas.cantera_gas import CanteraGas
    from fuelair.gas.real_engine import RealGas

    return Engines(CanteraGas(), RealGas(fuel_fluid))


def is_cold() -> bool:
    """Whether the compiled engine would have to be compiled first: no machine code of these sources is on disk."""
    if not can_compile():
        return False
    from fuelair.gas.compiled.jit import cache_folder

    folder = cache_folder()
    return folder is None or not any(folder.rglob("nested.solve*.nbc"))


def warm_up(report: Callable[[str], None]) -> None:
    """Compile everything that the compiled engines need, and keep it on disk where that can be.

    Parameters
    ----------
    report : takes one line of text a part, with the seconds that it took.
    """
    from fuelair.gas.compiled.jit import cache_folder
    from fuelair.gas.species import build

    table, both = build(), pick("compiled")
    one, T, p = table.amounts({"N2": 0.7, "O2": 0.1, "CO2": 0.1, "H2O": 0.1})[None], np.array([2000.0]), np.array([5e6])
    rich = table.amounts({"CH4": 1.0, "O2": 0.8})[None]
    cold = np.array([800.0])
    parts: tuple[tuple[str, Callable[[], object]], ...] = (
        ("gas of fixed composition", lambda: both.ideal.state(table, "TP", T, p, one)),
        ("equilibrium of burned gas", lambda: both.ideal.state(table, "TP", T, p, one, "equilibrium")),
        ("equilibrium of any species", lambda: both.ideal.state(table, "TP", cold, p, rich, "equilibrium")),
        ("real gas", lambda: both.real.state(table, "TP", T, p, one, "equilibrium")),
    )
    for name, work in parts:
        start = time.perf_counter()
        work()
        report(f"{name}: {time.perf_counter() - start:.1f} s")
    folder = cache_folder()
    report("No folder can be written: every process compiles anew." if folder is None else f"Machine code kept in {folder}")
