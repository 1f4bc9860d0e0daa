"""The band: samples and statistics against closed forms, and the band of cases against what must come out."""

from __future__ import annotations

import csv
import json
import math
from dataclasses import replace
from pathlib import Path

import jsonschema
import numpy as np
import pytest
from typer.testing import CliRunner

import fuelair
from fuelair import InputError, UnsolvedError, resources
from fuelair.case.spreads import Marginal
from fuelair.cli.app import app
from fuelair.gas.engine import Status
from fuelair.report import studies
from fuelair.report.study_schema import band_schema
from fuelair.study import draws, statistics, tolerance
from fuelair.study.batch import Rows
from fuelair.study.mixtures import RANDOMISATIONS
from fuelair.study.spread import Runner

NONE = math.nan
Z95 = 1.6448536269514722  # 95 % quantile of the normal distribution, from memory
SMALL = """\
title = "small"
[engine]
compression_ratio = 10
[fuel]
name = "methane"
admission = "premixed"
[charge]
equivalence_ratio = 0.8
pressure = "1 bar"
temperature = "330 K"
[combustion]
heat_addition = "constant-volume"
[tolerance]
rows = 256
seed = 3
spread = [
    { key = "charge.temperature", distribution = "normal", standard_deviation = "5 K" },
    { key = "charge.pressure", distribution = "uniform", half_width = "2 kPa" },
]
peak_pressure_spread = { cyclic = "4 %", cylinder_to_cylinder = "3 %", coverage = 2.5 }
"""
CASE = fuelair.Case.from_toml(SMALL)


def normal(key: str, mean: float, deviation: float) -> Marginal:
    return Marginal(key, "normal", mean, deviation, -1e9, 1e9)


def flat(key: str, low: float, high: float) -> Marginal:
    return Marginal(key, "uniform", 0.5 * (low + high), NONE, low, high)


def sample(function, spreads, rows, seed, root=None):
    """A function on samples A and B and their mixtures, as the study runs a case; and the inputs of A and B."""
    size, n = len(spreads), rows // (2 * RANDOMISATIONS)
    net = draws.nets(2 * size, n, seed, RANDOMISATIONS)
    a, b = net[:, :, :size], net[:, :, size:]
    parts = [a, b]
    for i in range(size):
        mixed = a.copy()
        mixed[:, :, i] = b[:, :, i]
        parts.append(mixed)
    x = [draws.values(spreads, part.reshape(-1, size), root).reshape(part.shape) for part in parts]
    return [function(part.reshape(-1, size)).reshape(part.shape[:2]) for part in x], np.concatenate(x[:2], axis=1)


def split(y):
    return y[0], y[1], np.stack(y[2:], axis=1)


# T. Ishigami, T. Homma 1990: sin x1 + a sin^2 x2 + b x3^4 sin x1 over -pi..pi; variances from memory
A, B = 7.0, 0.1
V1, V2, V13 = 0.5 * (1.0 + B * np.pi**4 / 5.0) ** 2, A**2 / 8.0, 8.0 * B**2 * np.pi**8 / 225.0
ISHIGAMI_FIRST = np.array([V1, V2, 0.0]) / (V1 + V2 + V13)
ISHIGAMI_TOTAL = np.array([V1 + V13, V2, V13]) / (V1 + V2 + V13)
ISHIGAMI_SPREADS = [flat(key, -np.pi, np.pi) for key in ("one", "two", "three")]


def ishigami(x):
    return np.sin(x[:, 0]) + A * np.sin(x[:, 1]) ** 2 + B * x[:, 2] ** 4 * np.sin(x[:, 0])


def test_sobol_indices_of_the_ishigami_function() -> None:
    y, _ = sample(ishigami, ISHIGAMI_SPREADS, 65536, 1)
    first, first_within, total, total_within = statistics.indices(*split(y))
    assert first == pytest.approx(ISHIGAMI_FIRST, abs=5e-3)
    assert total == pytest.approx(ISHIGAMI_TOTAL, abs=5e-3)
    assert np.all(np.abs(first - ISHIGAMI_FIRST) <= 2.0 * first_within)
    assert np.all(np.abs(total - ISHIGAMI_TOTAL) <= 2.0 * total_within)
    assert np.all(first_within < 0.01)
    whole = statistics.band(np.concatenate(y[:2], axis=1))
    assert whole.mean == pytest.approx(A / 2.0, abs=0.01)
    assert whole.deviation == pytest.approx(math.sqrt(V1 + V2 + V13), rel=2e-3)


def test_sobol_indices_agree_with_another_estimator() -> None:
    """scipy's own, on a net of its own."""
    from scipy.stats import sobol_indices, uniform

    other = sobol_indices(
        func=lambda x: ishigami(x.T), n=4096, dists=[uniform(loc=-np.pi, scale=2 * np.pi)] * 3, rng=np.random.default_rng(1)
    )
    y, _ = sample(ishigami, ISHIGAMI_SPREADS, 65536, 2)
    first, _, total, _ = statistics.indices(*split(y))
    assert first == pytest.approx(other.first_order, abs=0.03)
    assert total == pytest.approx(other.total_order, abs=0.03)


def linear(x):
    return x[:, 0] + x[:, 1] + 2.0 * x[:, 2]


LINEAR = [normal("a", 1.0, 2.0), normal("b", 1.0, 1.0), normal("c", 1.0, 0.5)]
LINEAR_P95 = 4.0 + Z95 * math.sqrt(6.0)


def test_band_of_a_linear_function() -> None:
    """Normal with mean 4 and variance 4 + 1 + 1; each input's share of the variance is its own."""
    y, x = sample(linear, LINEAR, 16384, 4)
    found = statistics.band(np.concatenate(y[:2], axis=1))
    deviation = math.sqrt(6.0)
    assert found.mean == pytest.approx(4.0, abs=2e-3)
    assert found.deviation == pytest.approx(deviation, rel=5e-3)
    assert found.p50 == pytest.approx(4.0, abs=0.05)
    assert found.p5 == pytest.approx(4.0 - Z95 * deviation, abs=0.1)
    assert found.p95 == pytest.approx(LINEAR_P95, abs=0.1)
    assert found.p99 == pytest.approx(4.0 + 2.3263478740408408 * deviation, abs=0.2)
    assert abs(found.p95 - LINEAR_P95) <= 2.0 * found.p95_within
    first, _, total, _ = statistics.indices(*split(y))
    assert first == pytest.approx([4 / 6, 1 / 6, 1 / 6], abs=0.02)
    assert total == pytest.approx([4 / 6, 1 / 6, 1 / 6], abs=0.02)
    rank, within = statistics.rank_correlations(x, np.concatenate(y[:2], axis=1))
    exact = 6.0 / np.pi * np.arcsin(0.5 * np.sqrt([4 / 6, 1 / 6, 1 / 6]))  # of normal variables, from memory
    assert rank == pytest.approx(exact, abs=0.02)
    assert np.all(within < 0.05)


def test_intervals_of_95_percent_hold_the_exact_value_about_as_often() -> None:
    held = []
    for seed in range(60):
        y, _ = sample(linear, LINEAR, 1024, seed)
        found = statistics.band(np.concatenate(y[:2], axis=1))
        first, first_within, total, total_within = statistics.indices(*split(y))
        held.append(
            [
                abs(found.p95 - LINEAR_P95) <= found.p95_within,
                abs(first[0] - 4 / 6) <= first_within[0],
                abs(total[0] - 4 / 6) <= total_within[0],
            ]
        )
    assert np.all(np.mean(held, axis=0) >= 0.85)  # 60 draws of 95 %: below 51 hits once in a thousand


def test_correlated_inputs_give_the_exact_variance_of_their_sum() -> None:
    """Variance of x + y with coefficient c: s^2 + t^2 + 2 c s t."""
    root = [[1.0, 0.0], [0.6, 0.8]]
    y, x = sample(lambda p: p.sum(axis=1), [normal("a", 0.0, 2.0), normal("b", 0.0, 1.0)], 16384, 1, root)
    assert statistics.band(np.concatenate(y[:2], axis=1)).deviation == pytest.approx(math.sqrt(4 + 1 + 2 * 0.6 * 2), rel=5e-3)
    assert np.corrcoef(x.reshape(-1, 2).T)[0, 1] == pytest.approx(0.6, abs=5e-3)


def test_spreads_have_the_moments_of_their_distribution() -> None:
    u = draws.nets(1, 65536, 1, 1)[0]
    triangle = Marginal("t", "triangular", 3.0, NONE, 1.0, 7.0)
    x = draws.values([triangle], u)[:, 0]
    assert x.mean() == pytest.approx(11.0 / 3.0, abs=1e-4)
    assert x.var() == pytest.approx((1 + 49 + 9 - 7 - 3 - 21) / 18.0, rel=1e-4)
    box = draws.values([flat("u", -1.0, 5.0)], u)[:, 0]
    assert (box.mean(), box.var()) == (pytest.approx(2.0, abs=1e-4), pytest.approx(3.0, rel=1e-4))
    cut = draws.values([replace(normal("n", 0.0, 1.0), low=0.0)], u)[:, 0]
    assert cut.min() >= 0.0
    assert cut.mean() == pytest.approx(math.sqrt(2.0 / math.pi), abs=1e-4)  # half-normal
    whole = draws.values([normal("n", 3.0, 2.0)], u)[:, 0]
    assert (whole.mean(), whole.std()) == (pytest.approx(3.0, abs=1e-3), pytest.approx(2.0, rel=1e-3))
    assert np.all((u > 0.0) & (u < 1.0))


def test_failed_rows_leave_the_rest_as_it_is() -> None:
    y, x = sample(linear, LINEAR, 16384, 4)
    rng = np.random.default_rng(1)
    holed = [np.where(rng.random(one.shape) < 0.02, np.nan, one) for one in y]
    whole, part = (statistics.band(np.concatenate(one[:2], axis=1)) for one in (y, holed))
    assert part.p95 == pytest.approx(whole.p95, abs=0.1)
    first, _, total, _ = statistics.indices(*split(holed))
    assert first == pytest.approx([4 / 6, 1 / 6, 1 / 6], abs=0.03)
    assert total == pytest.approx([4 / 6, 1 / 6, 1 / 6], abs=0.03)
    rank, _ = statistics.rank_correlations(x, np.concatenate(holed[:2], axis=1))
    assert np.isfinite(rank).all()
    nothing = [np.full_like(one, np.nan) for one in y]
    assert math.isnan(statistics.band(nothing[0]).mean)
    assert np.isnan(statistics.indices(*split(nothing))[0]).all()


def test_a_figure_that_is_held_does_not_spread_and_ties_are_ties() -> None:
    rng = np.random.default_rng(1)
    held = 200e5 * (1.0 + 1e-14 * rng.standard_normal((8, 64)))
    assert statistics.band(held).unmoved
    x = rng.random((8, 64, 1))
    half = np.where(x[:, :, 0] < 0.5, 1.0, 2.0) * (1.0 + 1e-14 * rng.standard_normal((8, 64)))
    rank, _ = statistics.rank_correlations(x, half)
    assert rank[0] == pytest.approx(math.sqrt(0.75), abs=0.02)  # two equal groups of ties


@pytest.fixture(scope="module")
def found() -> tolerance.Tolerance:
    return fuelair.band(CASE)


def test_band_of_a_case_against_the_case_itself(found: tolerance.Tolerance) -> None:
    """Peak pressure of a trapped charge is proportional to its pressure, so a uniform spread comes out of it."""
    alone = fuelair.band(CASE.replace({"tolerance.spread": [dict(CASE.resolved()["tolerance"]["spread"][1])]}))
    figures = fuelair.assess(CASE).figures()
    for name, one in alone.bands.items():
        assert alone.nominal[name] == pytest.approx(figures[name], rel=1e-8, abs=1e-6)
        if name == "compression_pressure_Pa":
            assert one.mean == pytest.approx(figures[name], rel=1e-4)
            assert one.deviation == pytest.approx(figures[name] * 0.02 / math.sqrt(3.0), rel=1e-2)
            assert one.p95 == pytest.approx(figures[name] * (1.0 + 0.02 * 0.9), rel=1e-3)
    assert alone.bands["compression_temperature_K"].unmoved
    assert alone.influences["compression_temperature_K"] == ()
    assert found.rows == 256
    assert found.extra == 256
    assert found.failed == {}


def test_what_moves_a_case_most(found: tolerance.Tolerance) -> None:
    pressure = found.influences["compression_pressure_Pa"]
    assert [one.key for one in pressure] == ["charge.pressure", "charge.temperature"]
    assert pressure[0].rank > 0.9
    work = found.influences["imep_gross_Pa"]
    assert {one.key: one.rank > 0.0 for one in work} == {"charge.temperature": False, "charge.pressure": True}
    total = sum(one.total for one in work)
    assert total == pytest.approx(1.0, abs=0.15)
    assert "moves it most" in found.verdict


def test_design_peak_pressure_stands_beside_the_mean(found: tolerance.Tolerance) -> None:
    peak = found.design_peak
    assert peak is not None
    assert (peak.relative, peak.coverage) == (pytest.approx(0.05, rel=1e-14), 2.5)  # 3-4-5
    assert peak.nominal_mean == found.nominal["peak_pressure_Pa"]
    assert peak.nominal_design == pytest.approx(peak.nominal_mean * 1.125, rel=1e-14)
    assert peak.p95_mean == found.bands["peak_pressure_Pa"].p95
    assert peak.p95_design > peak.nominal_design
    assert fuelair.band(CASE.replace({"tolerance.peak_pressure_spread": None}), quantities=["imep_gross"]).design_peak is None


def test_same_seed_same_bits_and_another_seed_another_sample(found: tolerance.Tolerance) -> None:
    assert fuelair.band(CASE).to_dict() == found.to_dict()
    other = fuelair.band(CASE, seed=4)
    assert other.bands["imep_gross_Pa"] != found.bands["imep_gross_Pa"]
    assert other.bands["imep_gross_Pa"].p95 == pytest.approx(found.bands["imep_gross_Pa"].p95, rel=5e-3)


def test_p95_of_peak_pressure_of_a_demo_with_its_confidence() -> None:
    demo = fuelair.Case.read(resources.demos() / "hydrogen-genset.toml")
    small, large = (fuelair.band(demo, rows=rows, quantities=["peak_pressure"]).bands["peak_pressure_Pa"] for rows in (512, 2048))
    assert 0.0 < large.p95_within < small.p95_within < 1e5
    assert abs(small.p95 - large.p95) <= 1.5 * (small.p95_within + large.p95_within)
    assert large.p5 < large.p50 < large.p95 < large.p99


def test_correlated_inputs_get_rank_correlations_and_no_indices() -> None:
    pair = [{"key": "charge.pressure", "other": "charge.temperature", "coefficient": 0.8}]
    together = fuelair.band(CASE.replace({"tolerance.correlation": pair}), quantities=["compression_pressure", "imep_gross"])
    assert together.correlated
    assert together.extra == 0
    for keys in together.influences.values():
        assert all(math.isnan(one.first) and math.isnan(one.total) and math.isfinite(one.rank) for one in keys)
    assert any("no Sobol indices" in note for note in together.notes())
    assert studies.movers(together, ["imep_gross_Pa"]).rows[0][1].split()[-1][0] in "+-"
    jsonschema.validate(json.loads(json.dumps(together.to_dict(), allow_nan=False)), band_schema())


def test_failed_rows_are_counted_by_status_and_said(monkeypatch: pytest.MonkeyPatch) -> None:
    def some_fail(self, columns):
        x = columns["charge.temperature"]
        status = np.where(x > 336.0, Status.OUTSIDE_DATA, Status.OK).astype(np.int8)
        return Rows(dict(columns), {name: np.where(status == 0, x, np.nan) for name in self.quantities}, status)

    monkeypatch.setattr(tolerance.Study, "run", some_fail)
    found = fuelair.band(CASE, quantities=["imep_gross"])
    share = 0.5 * math.erfc(1.2 / math.sqrt(2.0))  # 336 K lies 1.2 deviations above the mean
    assert found.failed_share == pytest.approx(share, abs=0.02)
    assert set(found.failed) == {"outside-data"}
    assert any("rows failed (outside-data" in note for note in found.notes())
    assert any("bend the band" in note for note in found.notes())
    monkeypatch.setattr(tolerance.Study, "run", lambda self, columns: _all_failed(self, columns))
    with pytest.raises(UnsolvedError, match="no row of the band"):
        fuelair.band(CASE, quantities=["imep_gross"])


def _all_failed(study, columns):
    n = len(columns["charge.temperature"])
    return Rows(dict(columns), {name: np.full(n, np.nan) for name in study.quantities}, np.full(n, Status.OUTSIDE_DATA, np.int8))


def test_a_cut_normal_spread_is_said() -> None:
    part = {
        "key": "combustion.combustion_efficiency",
        "distribution": "normal",
        "measure": "absolute",
        "standard_deviation": "1 %",
    }
    found = fuelair.band(CASE.replace({"tolerance.spread": [part]}), quantities=["imep_gross"])
    assert any("50.00%" in note for note in found.notes())
    assert found.bands["imep_gross_Pa"].p99 < found.nominal["imep_gross_Pa"]


def test_wrong_questions_are_input_errors() -> None:
    bare = fuelair.Case.from_toml(SMALL.partition("[tolerance]")[0])
    with pytest.raises(InputError, match=r"a section \[tolerance\]"):
        fuelair.band(bare)
    for wrong in ({"rows": 1000}, {"rows": 2**20}, {"quantities": ["peak"]}, {"model": "air-warm"}):
        with pytest.raises(InputError):
            fuelair.band(CASE, **wrong)


def test_json_and_files(found: tolerance.Tolerance, tmp_path: Path) -> None:
    jsonschema.Draft202012Validator.check_schema(band_schema())
    data = json.loads(json.dumps(found.to_dict(), allow_nan=False))
    jsonschema.validate(data, band_schema())
    path = tmp_path / "small.toml"
    path.write_text(SMALL)
    out = CliRunner().invoke(app, ["band", str(path), "--out", str(tmp_path / "out")])
    assert out.exit_code == 0, out.output
    for words in ("The band", "What moves it most", "Design peak pressure", "95 %", "seed 3"):
        assert words in out.stdout
    assert json.loads((tmp_path / "out" / "band.json").read_text()) == data
    with (tmp_path / "out" / "band.csv").open(newline="") as file:
        rows = {row["quantity"]: row for row in csv.DictReader(file)}
    assert float(rows["peak_pressure_Pa"]["p95"]) == data["quantities"]["peak_pressure_Pa"]["p95"]
    assert fuelair.Case.read(tmp_path / "out" / "resolved-case.toml") == CASE
    out = CliRunner().invoke(app, ["band", str(path), "--quantities", "imep_gross", "--rows", "512", "--json", "-"])
    assert list(json.loads(out.stdout)["quantities"]) == ["imep_gross_Pa", "peak_pressure_Pa"]


def test_every_table_is_rectangular(found: tolerance.Tolerance) -> None:
    seen = studies.seen(found, chosen=False)
    peak = studies.design_peak(found)
    assert peak is not None
    for table in (studies.bands(found, seen), studies.movers(found, seen), studies.influence(found, seen[0]), peak):
        assert all(len(row) == len(table.columns) for row in table.rows)
    assert "cutoff_ratio" not in seen


def test_the_band_does_not_depend_on_where_rows_are_solved(found: tolerance.Tolerance) -> None:
    alone = fuelair.band(CASE, runner=Runner("threads", 1))
    assert alone.to_dict() == fuelair.band(CASE, runner=Runner("threads", 2)).to_dict() == found.to_dict()
    seen: list[tuple[int, int]] = []
    fuelair.band(CASE, quantities=["imep_gross"], progress=lambda done, rows: seen.append((done, rows)))
    assert seen[0][0] == 0
    assert seen[-1] == (513, 513)


def test_schemas_are_printed_by_name() -> None:
    for name, title in (("find", "fuelair find"), ("best", "fuelair find"), ("band", "fuelair band")):
        out = CliRunner().invoke(app, ["check", "--study-schema", name])
        assert json.loads(out.stdout)["title"] == title
    with pytest.raises(InputError, match="no such schema"):
        CliRunner().invoke(app, ["check", "--study-schema", "bond"], catch_exceptions=False)
