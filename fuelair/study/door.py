"""What `import fuelair` offers of the studies: functions that load what they need when they are called."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from fuelair.errors import InputError, Problem

if TYPE_CHECKING:
    import pandas as pd

    from fuelair.case import Case
    from fuelair.gas.engines import EngineName
    from fuelair.study.optimum import Optimum
    from fuelair.study.sampling import Method
    from fuelair.study.spread import Runner
    from fuelair.study.sweep import Progress
    from fuelair.study.target import Found
    from fuelair.study.tolerance import Tolerance


def sweep(
    case: Case,
    over: Mapping[str, Any] | None = None,
    *,
    samples: pd.DataFrame | None = None,
    method: Method = "grid",
    rows: int | None = None,
    seed: int | None = None,
    model: str | None = None,
    quantities: Sequence[str] | None = None,
    also: Sequence[str] = (),
    engine: EngineName | None = None,
    workers: int | None = None,
) -> pd.DataFrame:
    """Solve a case with some of its keys varied, in memory; `fuelair sweep` writes tables of any length.

    Parameters
    ----------
    over : key -> values in stored units or names, or text such as ``"1bar:4bar:7"`` and ``"diesel, methanol"``.
    samples : instead: one row a case, keys as columns, with a unit as in ``charge.pressure [bar]``.
    method, rows, seed : ``grid`` (every combination, the last key fastest), ``latin-hypercube`` or ``sobol``.
    model : model id, default the case's headline.
    quantities, also : these alone; these beside the model's own. See `fuelair.study.figures`.
    engine : ``reference`` or ``compiled``, default compiled where numba is installed.
    workers : threads, default the cores there are.

    Returns
    -------
    DataFrame, one row a case: keys, quantities (SI, NaN where not solved), ``status``.

    Raises
    ------
    InputError : unknown keys, models or quantities, values outside their range.

    >>> case = Case.read("workboat.toml")                                            # doctest: +SKIP
    >>> sweep(case, {"charge.pressure": "2bar:4bar:5", "fuel.name": "diesel, fame"})  # doctest: +SKIP
    """
    from fuelair.study import sampling
    from fuelair.study.batch import Study
    from fuelair.study.figures import MODEL_FIGURES
    from fuelair.study.samples import from_frame
    from fuelair.study.spread import Runner
    from fuelair.study.sweep import table

    if (over is None) == (samples is None):
        raise InputError(Problem("needs either", "over, samples", hint='sweep(case, {"charge.pressure": "2bar:4bar:5"})'))
    if samples is not None:
        design: sampling.Design = from_frame(samples, case)
    else:
        design = sampling.design(case, over or {}, method=method, rows=rows, seed=seed)
    asked = [*(MODEL_FIGURES if quantities is None else quantities), *also]
    study = Study(case, design.keys, model=model, engine=engine, quantities=asked)
    return table(study, design, runner=Runner("threads", workers))


def find(
    case: Case,
    key: str,
    quantity: str,
    target: float | str,
    *,
    low: float | str | None = None,
    high: float | str | None = None,
    model: str | None = None,
    engine: EngineName | None = None,
    points: int = 257,
) -> Found:
    """Every value of one number of the case that gives a quantity its target; see `fuelair.study.target.find`.

    >>> find(case, "charge.equivalence_ratio", "exhaust_temperature", "680 degC")  # doctest: +SKIP
    """
    from fuelair.study import target as room

    return room.find(case, key, quantity, target, low=low, high=high, model=model, engine=engine, points=points)


def best(
    case: Case,
    vary: Mapping[str, tuple[float | str, float | str] | None],
    *,
    most: str | None = None,
    least: str | None = None,
    hold: Sequence[str] = (),
    model: str | None = None,
    engine: EngineName | None = None,
    seed: int = 0,
    points: int = 512,
) -> Optimum:
    """The most or least of a quantity over some numbers of the case, with limits on others; see `fuelair.study.optimum.best`.

    >>> best(case, {"engine.compression_ratio": (12, 20)}, most="imep_gross", hold=["peak_pressure<=200 bar"])  # doctest: +SKIP
    """
    from fuelair.study import optimum as room

    return room.best(case, vary, most=most, least=least, hold=hold, model=model, engine=engine, seed=seed, points=points)


def band(
    case: Case,
    *,
    rows: int | None = None,
    seed: int | None = None,
    quantities: Sequence[str] | None = None,
    model: str | None = None,
    engine: EngineName | None = None,
    runner: Runner | None = None,
    progress: Progress | None = None,
) -> Tolerance:
    """The band of every quantity under the spreads of the case's [tolerance]; see `fuelair.study.tolerance.band`.

    >>> band(case, rows=4096)  # doctest: +SKIP
    """
    from fuelair.study import tolerance as room

    return room.band(
        case, rows=rows, seed=seed, quantities=quantities, model=model, engine=engine, runner=runner, progress=progress
    )
