"""Tables and files of the studies find and band: pure functions of their results."""

from __future__ import annotations

import math
from collections.abc import Iterable

from fuelair.quantities import QUANTITIES, header, shown
from fuelair.report.files import csv_text, json_text
from fuelair.report.table import Table
from fuelair.study.asked import label, within, worded
from fuelair.study.optimum import Optimum
from fuelair.study.target import Found
from fuelair.study.tolerance import Tolerance

BESIDE = {
    "peak_temperature_K": "peak\nT [K]",
    "peak_pressure_Pa": "peak\np [bar]",
    "exhaust_temperature_K": "exhaust\nT [K]",
    "imep_gross_Pa": "gross imep\n[bar]",
    "indicated_efficiency": "efficiency\n[%]",
}
"""Quantities that stand beside the one that was asked for, and their column heads."""
BAND_ROWS = (
    "compression_temperature_K", "compression_pressure_Pa", "peak_temperature_K", "peak_pressure_Pa", "exhaust_temperature_K",
    "residual_fraction", "imep_gross_Pa", "imep_net_Pa", "indicated_efficiency", "isfc_kg_per_J", "work_J_per_kg",
)  # fmt: skip
"""Quantities of a band that people see if they have asked for none."""
HARDLY = 0.005
"""Total index below which a key is not named among those that move a quantity."""
FIRST_KEYS = 3
"""Keys shown of those that move a quantity most."""


def roots(found: Found) -> Table:
    """The values that meet the target."""
    v = found.varied
    beside = {name: head for name, head in BESIDE.items() if name != found.quantity}
    unit = f" [{v.unit}]" if v.unit else ""
    heads = (v.key.replace(".", ".\n") + unit, _head(found.quantity), *beside.values(), "slope", "condition")
    rows = tuple(
        (
            v.words(root.value).removesuffix(v.unit).strip(),
            _cell(found.quantity, root.figures[found.quantity]),
            *(_cell(name, root.figures[name]) for name in beside),
            "-" if math.isnan(root.slope) else f"{_difference(found.quantity, root.slope * v.one_unit):.4g}",
            f"{root.condition:.3g}",
        )
        for root in found.roots
    )
    note = (
        f"Slope: change of {within(found.quantity)} [{_unit(found.quantity) or '1'}] per {v.unit or 'unit'} of the key. "
        "Condition: per cent by which the key moves for one per cent of the target."
    )
    return Table(f"{label(found.quantity)} {worded(found.quantity, found.target)}", heads, rows, note)


def optimum(o: Optimum) -> list[Table]:
    """The point, and how far it is from each limit."""
    assert o.best is not None
    point = tuple((v.key, v.words(o.at[v.key]), f"{v.words(v.low)} to {v.words(v.high)}") for v in o.varied)
    names = [o.quantity, *(name for name in BESIDE if name != o.quantity)]
    there = tuple((label(name), worded(name, o.figures[name]), "") for name in names if not math.isnan(o.figures[name]))
    tables = [Table("The point" if o.feasible else "The nearest miss", ("", "", "range"), point + there)]
    if o.holds:
        rows = []
        for i, hold in enumerate(o.holds):
            value, felt = float(o.best.figures[_column(o, hold.quantity)]), float(o.best.sensitivity[i])
            margin = _difference(hold.quantity, float(o.best.margins[i]))
            state = "missed" if margin < 0.0 and not o.feasible else "binds" if felt else "reached" if o.best.reached[i] else ""
            per = _difference(o.quantity, felt) / _difference(hold.quantity, 1.0)
            effect = (
                f"{per:+.3g} {_unit(o.quantity)} per {_unit(hold.quantity) or 'unit'}".replace("  ", " ")
                if felt and o.feasible
                else ""
            )
            rows.append(
                (hold.words(), worded(hold.quantity, value), f"{margin:.3g} {_unit(hold.quantity)}".strip(), state, effect)
            )
        heads = ("limit", "here", "margin", "", f"{within(o.quantity)}, if the limit moves")
        tables.append(Table("Limits", heads, tuple(rows)))
    return tables


def _column(o: Optimum, quantity: str) -> int:
    return list(dict.fromkeys([o.quantity, *(hold.quantity for hold in o.holds)])).index(quantity)


def bands(t: Tolerance, names: Iterable[str]) -> Table:
    """The band of each quantity that spreads."""
    rows = []
    for name in names:
        b = t.bands[name]
        rows.append(
            (
                _head(name), _cell(name, t.nominal[name]), _cell(name, b.mean), f"{_difference(name, b.deviation):.3g}",
                _cell(name, b.p5), _cell(name, b.p50), f"{_cell(name, b.p95)} ± {_difference(name, b.p95_within):.2g}",
                _cell(name, b.p99),
            )
        )  # fmt: skip
    still = [label(name) for name, b in t.bands.items() if b.unmoved]
    note = f"{t.rows} rows, seed {t.seed}. Behind P95 its 95 % confidence interval."
    note += f" Do not move: {', '.join(still)}." if still else ""
    heads = ("", "as in\nthe case", "mean", "standard\ndeviation", "P5", "P50", "P95", "P99")
    return Table("The band", heads, tuple(rows), note)


def movers(t: Tolerance, names: Iterable[str]) -> Table:
    """What moves each quantity most."""
    rows = tuple((label(name), *_first(t, name)) for name in names)
    if t.correlated:
        note = "Rank correlation of the quantity with each key."
    else:
        note = "Total Sobol index: share of the variance that stays while only this key moves; + raises, - lowers the quantity."
    return Table("What moves it most", ("", "first", "second", "third"), rows, note)


def _first(t: Tolerance, name: str) -> list[str]:
    """The keys that move a quantity most, in words; those that hardly do are left out."""
    short = [one.key.rpartition(".")[2] for one in t.spreads]
    out = []
    for one in t.influences[name][:FIRST_KEYS]:
        last = one.key.rpartition(".")[2]
        key = last if short.count(last) == 1 else one.key
        if t.correlated:
            out.append(f"{key} {one.rank:+.2f}")
        elif one.total >= HARDLY:
            out.append(f"{key} {'+' if one.rank > 0.0 else '-'}{100.0 * one.total:.0f} %")
    return out + [""] * (FIRST_KEYS - len(out))


def influence(t: Tolerance, name: str) -> Table:
    """Every key's indices for one quantity."""
    rows = tuple(
        (
            one.key,
            *(
                _interval(*pair)
                for pair in ((one.first, one.first_within), (one.total, one.total_within), (one.rank, one.rank_within))
            ),
        )
        for one in t.influences[name]
    )
    heads = ("", "first-order\nindex", "total\nindex", "rank\ncorrelation")
    note = f"± 95 % confidence; {t.extra} further rows for the indices." if t.extra else "± 95 % confidence."
    return Table(f"What moves {within(name)}", heads, rows, note)


def design_peak(t: Tolerance) -> Table | None:
    """Mean and design peak pressure side by side; None if the case does not say the scatter."""
    p = t.design_peak
    if p is None:
        return None
    rows = (
        ("the case's own values", _cell("peak_pressure_Pa", p.nominal_mean), _cell("peak_pressure_Pa", p.nominal_design)),
        ("P95 of the band", _cell("peak_pressure_Pa", p.p95_mean), _cell("peak_pressure_Pa", p.p95_design)),
    )
    below = 0.5 * math.erfc(-p.coverage / math.sqrt(2.0))
    note = (
        f"Scatter of {100.0 * p.relative:.2f} % (root of the squares of cyclic, cylinder to cylinder, control); design = mean "
        f"plus {p.coverage:g} standard deviations (2 to 3 are common practice): {100.0 * below:.1f} % of normally spread cycles "
        "lie below."
    )
    return Table("Design peak pressure [bar]", ("at", "mean", "design"), rows, note)


def seen(t: Tolerance, *, chosen: bool) -> list[str]:
    """Quantities that people see: those that spread, of the usual ones unless they were chosen."""
    return [name for name, b in t.bands.items() if not b.unmoved and (chosen or name in BAND_ROWS)]


def band_files(t: Tolerance) -> dict[str, str]:
    """File name -> text of every result file of a band."""
    data = t.to_dict()
    return {
        "band.json": json_text(data),
        "band.csv": csv_text({"quantity": name, **one} for name, one in data["quantities"].items()),
        "influence.csv": csv_text({"quantity": name, **one} for name, keys in data["influence"].items() for one in keys),
        "resolved-case.toml": t.case.to_toml(),
    }


def _head(name: str) -> str:
    return header(name) if name in QUANTITIES else name


def _unit(name: str) -> str:
    return QUANTITIES[name].shown_unit if name in QUANTITIES else ""


def _cell(name: str, value: float) -> str:
    if math.isnan(value):
        return "-"
    return shown(name, value, unit=False) if name in QUANTITIES else f"{value:.5g}"


def _difference(name: str, value: float) -> float:
    """A difference of a quantity in the unit that people see."""
    return value / QUANTITIES[name].factor if name in QUANTITIES else value


def _interval(value: float, within: float) -> str:
    return "-" if math.isnan(value) else f"{value:.3f} ± {within:.3f}"
