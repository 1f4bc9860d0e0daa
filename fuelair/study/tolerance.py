"""What the spreads of [tolerance] do to every quantity: a band, what moves it most, and the design peak pressure."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from fuelair.case import Case
from fuelair.case.spreads import Marginal, cholesky, correlation_matrix, marginal
from fuelair.case.tolerance import ROWS, ToleranceSection
from fuelair.errors import InputError, Problem, UnsolvedError
from fuelair.gas.engine import Status
from fuelair.gas.engines import EngineName
from fuelair.study import asked, figures, statistics
from fuelair.study.asked import FORMAT, number
from fuelair.study.batch import Study
from fuelair.study.mixtures import RANDOMISATIONS, Mixtures
from fuelair.study.spread import Runner
from fuelair.study.statistics import Band
from fuelair.study.sweep import Progress

NOTED_CUT = 1e-4
"""Share of a normal spread cut off at the range of its key from which it is said."""
NOTED_FAILURES = 0.02
"""Share of failed rows from which the band is doubted."""
PEAK = "peak_pressure_Pa"


@dataclass(frozen=True, slots=True)
class Influence:
    """What one key does to one quantity; NaN where there is no such figure. The half-widths are of 95 % confidence.

    Attributes
    ----------
    key : that spreads.
    first, first_within : share of the variance that goes when the key is held (first-order Sobol index).
    total, total_within : share of the variance that stays while only the key moves (total Sobol index).
    rank, rank_within : rank correlation, with the direction as its sign.
    """

    key: str
    first: float
    first_within: float
    total: float
    total_within: float
    rank: float
    rank_within: float


@dataclass(frozen=True, slots=True)
class DesignPeak:
    """Mean and design peak pressure [Pa], at the case's own values and at P95 of the band.

    design = mean (1 + coverage times relative), relative the root of the squares of the scatters beside the inputs.
    """

    relative: float
    coverage: float
    nominal_mean: float
    nominal_design: float
    p95_mean: float
    p95_design: float


@dataclass(frozen=True, slots=True)
class Tolerance:
    """The band of a case.

    Attributes
    ----------
    case, model, engine, versions, seed : what was computed, and with what.
    rows, extra : rows of the sample; further rows that the sensitivity indices took.
    spreads : of each key, in stored units.
    correlated : some keys move together, so that shares of the variance have no meaning.
    nominal : figures at the case's own values, SI.
    bands : quantity -> band, SI.
    influences : quantity -> keys, the one that moves it most first; empty for a quantity that does not spread.
    failed : failed rows of the sample by status.
    design_peak : None without peak_pressure_spread.
    """

    case: Case
    model: str
    engine: EngineName
    versions: dict[str, str]
    seed: int
    rows: int
    extra: int
    spreads: tuple[Marginal, ...]
    correlated: bool
    nominal: dict[str, float]
    bands: dict[str, Band]
    influences: dict[str, tuple[Influence, ...]]
    failed: dict[str, int]
    design_peak: DesignPeak | None

    @property
    def failed_share(self) -> float:
        """Share of the sample that failed."""
        return sum(self.failed.values()) / self.rows

    @property
    def verdict(self) -> str:
        """One sentence on peak pressure, or on the first quantity that spreads."""
        name = next((n for n in (PEAK, *self.bands) if self.influences.get(n)), None)
        if name is None:
            return "No quantity moves with these spreads"
        b, first = self.bands[name], self.influences[name][0].key
        mean, high = (asked.worded(name, value) for value in (b.mean, b.p95))
        return f"{asked.label(name)} {mean} on average, below {high} in 95 % of cases; {first} moves it most"

    def notes(self) -> list[str]:
        """What to mind."""
        out = []
        if self.failed:
            words = ", ".join(f"{label} {n}" for label, n in self.failed.items())
            out.append(f"{self.failed_share:.2%} of the rows failed ({words}). The band is that of the rows that were solved.")
        if self.failed_share > NOTED_FAILURES:
            out.append(
                "So many failures bend the band: the quantiles lean to the side where rows are solved. Narrow the spreads."
            )
        for one in self.spreads:
            if one.cut > NOTED_CUT:
                out.append(f"{one.key}: {one.cut:.2%} of its normal spread is cut off at its ends.")
        if self.correlated:
            out.append(
                "Some inputs are correlated: a share of the variance belongs to none of them alone, so no Sobol indices are "
                "given; keys are ranked by rank correlation."
            )
        out.append(
            f"Confidence intervals (95 %) are those of the sample, from {RANDOMISATIONS} independently scrambled nets "
            "(Student t); they say nothing about the model or the spreads assumed."
        )
        return out

    def to_dict(self) -> dict[str, Any]:
        """Everything as plain numbers, text, lists and dictionaries; SI, null where there is no figure."""
        peak = self.design_peak
        return {
            "format": FORMAT,
            "versions": self.versions,
            "engine": self.engine,
            "model": self.model,
            "seed": self.seed,
            "case": self.case.resolved(),
            "rows": self.rows,
            "index_rows": self.extra,
            "randomisations": RANDOMISATIONS,
            "confidence": statistics.CONFIDENCE,
            "correlated": self.correlated,
            "spreads": [_spread(one) for one in self.spreads],
            "failed": self.failed,
            "failed_share": self.failed_share,
            "quantities": {name: {"nominal": number(self.nominal[name]), **_numbers(band)} for name, band in self.bands.items()},
            "influence": {name: [_numbers(one) for one in keys] for name, keys in self.influences.items()},
            "design_peak": None if peak is None else _numbers(peak),
            "notes": self.notes(),
        }


def _spread(one: Marginal) -> dict[str, Any]:
    ends = {"centre": one.centre, "standard_deviation": number(one.deviation), "low": one.low, "high": one.high}
    return {"key": one.key, "distribution": one.distribution, **ends, "cut_off": one.cut}


def _numbers(item: Any) -> dict[str, Any]:
    return {
        name: value if isinstance(value, str) else number(value) for name in item.__slots__ for value in [getattr(item, name)]
    }


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
    """The band of every quantity under the spreads of the case's [tolerance], and what moves each most.

    Parameters
    ----------
    rows : size of the sample, a power of two; default that of the case. The sensitivity indices take half as many
        again for each key that spreads.
    seed : default that of the case.
    quantities : names, e.g. ``["peak_pressure", "imep_gross"]``; default every figure of the model.
    model : model id; default the headline model.
    engine : ``reference`` or ``compiled``; default compiled where numba is installed.
    runner : where rows are solved, default threads; the result does not depend on it.
    progress : called with rows done and rows in all.

    Raises
    ------
    InputError : the case has no [tolerance]; no such quantity or model; rows out of range.
    UnsolvedError : no row could be solved.
    """
    section = case.tolerance
    if section is None:
        hint = 'spread = [{ key = "charge.temperature", distribution = "normal", standard_deviation = "3 K" }]'
        raise InputError(
            case.place(Problem("the case says nothing of what spreads", "tolerance", None, "a section [tolerance]", hint))
        )
    rows, seed = section.rows if rows is None else rows, section.seed if seed is None else seed
    if rows not in ROWS:
        raise InputError(Problem("not a size of a sample", "rows", rows, f"a power of two, {ROWS[0]} to {ROWS[-1]}"))
    spreads, root = _spreads(case, section)
    asked_for = figures.MODEL_FIGURES if quantities is None else [figures.resolve(name) for name in quantities]
    names = list(dict.fromkeys([*asked_for, *([PEAK] if section.peak_pressure_spread is not None else [])]))
    study = Study(case, [one.key for one in spreads], model=model, engine=engine, quantities=names)
    sample = Mixtures(study, spreads, root, rows, seed)
    sample.solve(runner, progress or (lambda done, rows: None))
    if not any(np.isfinite(sample.base(name)).any() for name in names):
        worst = Status(int(np.bincount(sample.base_status.ravel()).argmax()))
        raise UnsolvedError(worst.label, f"no row of the band could be solved; {worst.reason}", study.model or "")
    bands = {name: statistics.band(sample.base(name)) for name in names}
    bands = {name: one for name, one in bands.items() if np.isfinite(one.mean)}
    nominal = {name: sample.nominal(name) for name in bands}
    return Tolerance(
        case=case,
        model=study.model or "",
        engine=study.engine,
        versions=asked.versions(case, study.engine),
        seed=seed,
        rows=rows,
        extra=sample.extra,
        spreads=spreads,
        correlated=root is not None,
        nominal=nominal,
        bands=bands,
        influences={name: () if one.unmoved else _influences(sample, name) for name, one in bands.items()},
        failed=asked.failures(sample.base_status),
        design_peak=_design_peak(section, nominal, bands),
    )


def _spreads(case: Case, section: ToleranceSection) -> tuple[tuple[Marginal, ...], list[list[float]] | None]:
    """Spreads in stored units, and the root of their correlation matrix if any are correlated."""
    value = case.values()
    spreads = tuple(marginal(part, value(part.key)) for part in section.spread)
    if not section.correlation:
        return spreads, None
    return spreads, cholesky(correlation_matrix([one.key for one in spreads], section.correlation))


def _design_peak(section: ToleranceSection, nominal: dict[str, float], bands: dict[str, Band]) -> DesignPeak | None:
    scatter = section.peak_pressure_spread
    if scatter is None or PEAK not in bands:
        return None
    up = 1.0 + scatter.coverage * scatter.relative
    mean, high = nominal[PEAK], bands[PEAK].p95
    return DesignPeak(scatter.relative, scatter.coverage, mean, mean * up, high, high * up)


def _influences(sample: Mixtures, name: str) -> tuple[Influence, ...]:
    """Every key, the one that moves the figure most first."""
    nothing = np.full(len(sample.keys), np.nan)
    shares = (nothing, nothing, nothing, nothing)
    if sample.extra:
        y = sample.parts(name)
        shares = statistics.indices(y[0], y[1], np.moveaxis(y[2:], 0, 1))
    ranks = statistics.rank_correlations(sample.inputs(), sample.base(name))
    found = [Influence(key, *(float(one[i]) for one in (*shares, *ranks))) for i, key in enumerate(sample.keys)]
    return tuple(sorted(found, key=lambda one: -(one.total if sample.extra else abs(one.rank))))
