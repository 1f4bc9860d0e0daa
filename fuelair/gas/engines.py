"""Which gas engine runs: the reference on Cantera, or the compiled one for studies."""

from __future__ import annotations

from dataclasses import dataclass
from importlib.util import find_spec
from typing import Literal

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
    from fuelair.gas.real_engine import RealGas

    if name == "compiled":
        if not can_compile():
            raise MissingExtraError("fast", "The compiled engine")
        from fuelair.gas.compiled.batch_gas import BatchGas

        return Engines(BatchGas(), RealGas(fuel_fluid))
    from fuelair.gas.cantera_gas import CanteraGas

    return Engines(CanteraGas(), RealGas(fuel_fluid))
