"""The core of every study: one template case, some of its keys varied over many rows.

The template is validated once. Columns of numbers are checked and computed as arrays; names, and numbers that
change what a case is made of, split the rows into groups of one validated case each. A row equals
``assess(case.replace(row))``, whatever rows run beside it.
"""

from __future__ import annotations

import threading
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from fuelair import outputs
from fuelair.assess import of_model, own_fluid, result_of, trap
from fuelair.case import Case, contradictions, rules
from fuelair.case import keys as case_keys
from fuelair.case.fields import nearest
from fuelair.cycle import fuel_air
from fuelair.cycle.result import FREEZE_MODEL, MODELS
from fuelair.errors import InputError, Problem
from fuelair.gas.engine import Array, Codes, Status, worst
from fuelair.gas.engines import EngineName, Engines, pick, usual
from fuelair.prepare import Prepared, headline_model, prepare
from fuelair.study import figures
from fuelair.study.columns import Column, Values, read

CHUNK = 4096
"""Rows computed side by side."""
PREPARED = 16 * CHUNK
"""Rows prepared at once."""
Index = npt.NDArray[np.intp]
Labels = dict[str, Any]
"""What distinguishes a group of rows: key -> name, word, or number that changes what a case is made of."""
_OUTSIDE = {"charge.ambient_pressure", "charge.altitude", "charge.reference"}
_own = threading.local()


@dataclass(frozen=True, slots=True)
class Rows:
    """Solved rows.

    Attributes
    ----------
    keys : varied key -> values in stored units (SI, degrees), or names.
    figures : quantity -> (N,) in SI, NaN where the row was not solved or has no such figure.
    status : per row, `fuelair.gas.engine.Status`.
    """

    keys: dict[str, Array | list[str]]
    figures: dict[str, Array]
    status: Codes

    def __len__(self) -> int:
        return len(self.status)


class Study:
    """A case with some of its keys varied, through one model.

    Attributes
    ----------
    case : the template.
    keys : dotted keys that vary, e.g. ``charge.pressure``: any key of the case file that holds one value.
    model : model id; None where each row has a headline of its own.
    engine : ``reference`` or ``compiled``.
    quantities : keys of the figures, see `fuelair.study.figures`.
    """

    def __init__(
        self,
        case: Case,
        keys: Sequence[str],
        *,
        model: str | None = None,
        engine: EngineName | None = None,
        quantities: Sequence[str] | None = None,
    ) -> None:
        """Check what is asked.

        Raises
        ------
        InputError : no such key, model or quantity, or keys that cannot stand beside what the case has written.
        """
        self.case, self.keys = case, tuple(keys)
        self.engine: EngineName = usual() if engine is None else engine
        asked = figures.MODEL_FIGURES if quantities is None else quantities
        self.quantities = tuple(dict.fromkeys(figures.resolve(name) for name in asked))
        headline = _headline(case, self.keys)
        self.model = headline if model is None else model
        self._need = figures.Need.of(self.quantities)
        self._cases: dict[tuple[Any, ...], Case | None] = {}
        _check_keys(case, self.keys)
        _check_model(model, headline)
        _check_quantities(self, headline)

    def run(self, columns: Mapping[str, Values]) -> Rows:
        """Solve rows.

        Parameters
        ----------
        columns : every key of the study -> N numbers in stored units, names, or text with a unit.

        Returns
        -------
        Rows in the order of the columns; a row that cannot be asked for or solved says so in its status.

        Raises
        ------
        InputError : a column is missing, or holds a value outside its key's own range.
        """
        given = self.read(columns)
        n = len(given[0])
        out = Rows(
            {column.key: column.values for column in given},
            {name: np.full(n, np.nan) for name in self.quantities},
            np.full(n, Status.INPUT_REFUSED, np.int8),
        )
        for labels, group in _groups(given, n):
            numbers = {c.key: c.numbers for c in given if c.key not in labels and c.numbers is not None}
            for start in range(0, len(group), PREPARED):
                rows = group[start : start + PREPARED]
                self._solve(labels, {key: values[rows] for key, values in numbers.items()}, rows, out)
        return out

    def read(self, columns: Mapping[str, Values]) -> list[Column]:
        """The columns, checked, in the order of the study's keys; raises as :meth:`run` does."""
        if set(columns) != set(self.keys):
            got = ", ".join(columns)
            raise InputError(Problem("columns are not the keys of the study", value=got, allowed=", ".join(self.keys)))
        outside = None if _OUTSIDE & set(self.keys) else self.case.charge.ambient_pressure
        given = [read(key, columns[key], ambient_pressure=outside) for key in self.keys]
        if len({len(column) for column in given}) != 1 or not len(given[0]):
            lengths = ", ".join(f"{column.key}: {len(column)}" for column in given)
            raise InputError(Problem("columns must have one length, at least one row", value=lengths))
        return given

    def case_of(self, row: Mapping[str, Any]) -> Case:
        """The case of one row, as `fuelair.assess` takes it; raises InputError if it cannot be asked for."""
        case = self.case.replace({key: row[key] for key in self.keys})
        prepare(case)
        return case

    def why(self, row: Mapping[str, Any]) -> str:
        """Why a row cannot be asked for, in words; empty if it can."""
        try:
            self.case_of(row)
        except InputError as error:
            return "; ".join(f"{p.key}: {p.message}" if p.key else p.message for p in error.problems)
        return ""

    def _solve(self, labels: Labels, numbers: dict[str, Array], rows: Index, out: Rows) -> None:
        """Solve rows of one group into ``out``."""
        keep = np.flatnonzero(~self._refused(labels, numbers, len(rows)))
        case = self._case(labels, {key: values[keep[0]] for key, values in numbers.items()}) if len(keep) else None
        if case is None or self.model == FREEZE_MODEL != headline_model(case):
            return
        columns = {"engine.cylinders": np.full(len(keep), float(case.engine.cylinders))}  # there even if no number varies
        columns |= {key: values[keep] for key, values in numbers.items()}
        prepared = prepare(case, columns=columns)
        if prepared.refused.any():
            good = ~prepared.refused
            keep, columns = keep[good], {key: values[good] for key, values in columns.items()}
            if not len(keep):
                return
            prepared = prepare(case, columns=columns)
        for start in range(0, len(keep), CHUNK):
            some = slice(start, start + CHUNK)
            found, status = self._figures(prepared.rows(some))
            mine = rows[keep[some]]
            out.status[mine] = status
            for name in self.quantities:
                out.figures[name][mine] = np.where(status == Status.OK, found[name], np.nan)

    def _figures(self, prepared: Prepared) -> tuple[dict[str, Array], Codes]:
        """Figures and status of prepared rows."""
        engines = _engines(self.engine, own_fluid(prepared))
        engine = of_model(engines, prepared.headline)
        with np.errstate(divide="ignore", invalid="ignore"):
            charge = trap(prepared, engine)
            if self._need.closed_part_only and self.model in (None, prepared.headline):
                alone = fuel_air.run_closed(engine, charge, prepared.settings, prepared.headline)
                return alone.figures, alone.status
            headline = fuel_air.run(engine, charge, prepared.settings, prepared.headline, in_full=False)
            result = result_of(self.model or prepared.headline, prepared, engines, headline, in_full=False)
            found = dict(result.figures)
            if self._need.engine:
                found |= outputs.engine_figures(prepared, headline, engine)
            if self._need.exhaust:
                exhaust = outputs.exhaust_figures(prepared, headline, engine)
                exhaust[figures.MIXED] = exhaust.pop("exhaust_temperature_K")
                found |= exhaust
            if self._need.flame:
                found[figures.FLAME] = outputs.stoichiometric_flame_temperature(headline, engine)
            if self._need.charge:
                found |= outputs.charge_figures(charge)
        return found, worst(headline.result.status, result.status)

    def _refused(self, labels: Labels, numbers: dict[str, Array], n: int) -> npt.NDArray[np.bool_]:
        """Where numbers contradict each other."""
        given = self.case.given() | labels | numbers
        draft = rules.Draft(given, given)
        return np.broadcast_to(np.asarray(contradictions.refused(draft), np.bool_), (n,))

    def _case(self, labels: Labels, numbers: Mapping[str, Any]) -> Case | None:
        """The validated case of a group; None if names or words contradict each other."""
        group = tuple(labels.items())
        if group not in self._cases:
            try:
                self._cases[group] = self.case.replace(labels | {key: float(value) for key, value in numbers.items()})
            except InputError:
                self._cases[group] = None
        return self._cases[group]

    def __getstate__(self) -> dict[str, Any]:
        return {key: value for key, value in self.__dict__.items() if key != "_cases"} | {"_cases": {}}


def _groups(given: Sequence[Column], n: int) -> Iterator[tuple[Labels, Index]]:
    """Labels of each group and its rows, in the order of the labels."""
    code, found = np.zeros(n, np.int64), []
    for column in given:
        if column.labels is None:
            continue
        names, number = np.unique(column.labels, return_inverse=True)
        found.append((column.key, names, number))
        code = np.unique(code * len(names) + number, return_inverse=True)[1]
    order = np.argsort(code, kind="stable")
    for rows in np.split(order, np.flatnonzero(np.diff(code[order])) + 1):
        own = {key: names[number[rows[0]]].item() for key, names, number in found}
        yield {key: label for key, label in own.items() if label != ""}, rows


def _engines(name: EngineName, fluid: str | None) -> Engines:
    """Gas engines of this thread: Cantera's objects must not be shared."""
    if not hasattr(_own, "engines"):
        _own.engines = {}
    made: dict[tuple[str, str | None], Engines] = _own.engines
    if (name, fluid) not in made:
        made[name, fluid] = pick(name, fluid)
    return made[name, fluid]


def _check_keys(case: Case, varied: tuple[str, ...]) -> None:
    if not varied:
        raise InputError(Problem("no key is varied", hint="e.g. charge.equivalence_ratio"))
    twice = [key for key in varied if varied.count(key) > 1]
    if twice:
        raise InputError(Problem("is varied twice", twice[0]))
    for key in varied:
        case_keys.kind(key)
    written = case.given()
    known = {key: value for key, value in written.items() if key not in varied}
    mistakes = rules.check(rules.Draft(written | dict.fromkeys(varied) | _sections(written, varied), known))
    if mistakes:
        raise InputError(*mistakes)


def _sections(written: Mapping[str, Any], varied: Sequence[str]) -> dict[str, None]:
    """Sections and tables that varied keys lie in and the case has not written."""
    parents = [key.rpartition(".")[0] for key in varied]
    return {name.partition("[")[0]: None for name in parents if name.partition("[")[0] not in written}


def _headline(case: Case, varied: Sequence[str]) -> str | None:
    """Headline model of every row; None if it differs from row to row."""
    if {"gas.model", "gas.expansion"} & set(varied):
        return None
    return FREEZE_MODEL if "gas.freeze_temperature" in varied else headline_model(case)


def _check_model(model: str | None, headline: str | None) -> None:
    known = (*MODELS, FREEZE_MODEL) if headline in (None, FREEZE_MODEL) else MODELS
    if model is not None and model not in known:
        raise InputError(Problem("no such model", "model", model, ", ".join(known), nearest(model, known)))


def _check_quantities(study: Study, headline: str | None) -> None:
    own = [name for name in study.quantities if name in figures.HEADLINE_FIGURES]
    if own and study.model not in (None, headline):
        hint = "leave out the model, or the quantity"
        raise InputError(Problem(f"is a figure of the headline model {headline or ''}".rstrip(), own[0], hint=hint))
    there = {*study.case.given(), *study.keys}
    for name in own:
        speed = ("engine.speed",) if name.endswith(("_W", "_per_s")) else ()
        lacking = [key for key in ("engine.bore", "engine.stroke", *speed) if key not in there]
        if name in figures.POWER_FIGURES and lacking:
            raise InputError(Problem(f"needs {' and '.join(lacking)} in the case", name))
