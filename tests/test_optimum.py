"""The constrained optimum: known solutions, what binds and how hard, no feasible point, and a case."""

from __future__ import annotations

import json
from pathlib import Path

import jsonschema
import numpy as np
import pytest
from typer.testing import CliRunner

import fuelair
from fuelair import InputError, resources
from fuelair.cli.app import app
from fuelair.report import studies
from fuelair.report.study_schema import optimum_schema
from fuelair.study.constrained import search
from fuelair.study.draws import nets
from fuelair.study.scaled import Limit, Scaled

BOAT = fuelair.Case.read(resources.demos() / "workboat.toml").replace(
    {"combustion.pressure_limit": None, "combustion.heat_addition": "constant-pressure"}
)


def columns(*functions, failed=None):
    """Figures of points as the search takes them; rows fail where ``failed`` is true."""

    def evaluate(x):
        figures = np.stack([function(x) for function in functions], axis=1)
        bad = np.zeros(len(x), bool) if failed is None else failed(x)
        figures[bad] = np.nan
        return figures, np.where(bad, 2, 0).astype(np.int8)

    return evaluate


def product(x):
    return x[:, 0] * x[:, 1]


def total(x):
    return x[:, 0] + x[:, 1]


def test_largest_product_of_a_given_sum() -> None:
    """x y with x + y <= 1: both one half, and by the multiplier rule half a unit of product per unit of sum."""
    found = search(columns(product, total), [0, 0], [2, 2], [Limit(1, True, 1.0)], most=True).best
    assert found is not None
    assert found.feasible
    assert found.x == pytest.approx([0.5, 0.5], abs=1e-6)
    assert found.figures[0] == pytest.approx(0.25, rel=1e-7)
    assert found.reached.tolist() == [True]
    assert found.sensitivity == pytest.approx([0.5], rel=1e-6)
    assert 0.0 <= found.margins[0] < 1e-7
    assert found.stationarity < 1e-6
    assert found.agree == found.starts == 6


def test_the_sensitivity_is_the_change_of_the_optimum_when_the_limit_moves() -> None:
    """Rosenbrock's valley inside a circle; the optimum near (0.7864, 0.6177) is from memory."""

    def valley(x):
        return 100.0 * (x[:, 1] - x[:, 0] ** 2) ** 2 + (1.0 - x[:, 0]) ** 2

    def circle(x):
        return x[:, 0] ** 2 + x[:, 1] ** 2

    found = [
        search(columns(valley, circle), [-2, -2], [2, 2], [Limit(1, True, bound)], most=False).best
        for bound in (1.0, 0.999, 1.001)
    ]
    assert all(one is not None and one.feasible for one in found)
    assert found[0].x == pytest.approx([0.7864, 0.6177], abs=1e-4)
    slope = (found[2].figures[0] - found[1].figures[0]) / 0.002
    assert found[0].sensitivity[0] == pytest.approx(slope, rel=1e-3)


def test_a_lower_limit_and_the_end_of_a_range_bind_with_the_right_sign() -> None:
    """Least x + y with x y >= 1 and y <= 0.5: x = 2. Then d(x + y)/d(bound) = 1/y = 2 and d/dy = 1 - x/y = -3."""
    found = search(columns(total, product), [0.1, 0.1], [9.0, 0.5], [Limit(1, False, 1.0)], most=False).best
    assert found is not None
    assert found.x == pytest.approx([2.0, 0.5], rel=1e-6)
    assert found.ends.tolist() == [0.0, 1.0]
    assert found.sensitivity == pytest.approx([2.0], rel=1e-5)
    assert found.pull == pytest.approx([0.0, -3.0], rel=1e-5)


def test_sensitivity_over_a_logarithmic_range() -> None:
    """Least (ln x)^2 with x >= 2 over 1e-3 to 1e3: d/dbound = 2 ln 2 / 2."""
    evaluate = columns(lambda x: np.log(x[:, 0]) ** 2, lambda x: x[:, 0])
    found = search(evaluate, [1e-3], [1e3], [Limit(1, False, 2.0)], most=False).best
    assert found is not None
    assert found.sensitivity == pytest.approx([np.log(2.0)], rel=1e-5)
    walled = search(columns(lambda x: np.log(x[:, 0]) ** 2), [2.0], [1e3], [], most=False).best
    assert walled is not None
    assert walled.x == pytest.approx([2.0])
    assert walled.pull == pytest.approx([np.log(2.0)], rel=1e-5)


def test_no_point_keeps_the_limits_and_the_nearest_miss_shares_it_out() -> None:
    """x <= 1 and x >= 2: the larger of the relative misses (x - 1) and (2 - x)/2 is least at 4/3."""
    x = columns(lambda p: p[:, 0], lambda p: p[:, 0], lambda p: p[:, 0])
    found = search(x, [0], [3], [Limit(1, True, 1.0), Limit(2, False, 2.0)], most=True).best
    assert found is not None
    assert not found.feasible
    assert found.x == pytest.approx([4.0 / 3.0], rel=1e-6)
    assert found.margins == pytest.approx([-1.0 / 3.0, -2.0 / 3.0], rel=1e-6)


def test_a_small_feasible_region_that_the_scan_misses_is_still_reached() -> None:
    def spot(x):
        return (x[:, 0] - 0.3) ** 2 + (x[:, 1] - 0.7) ** 2

    found = search(columns(total, spot), [0, 0], [1, 1], [Limit(1, True, 1e-8)], most=True, rows=16).best
    assert found is not None
    assert found.kept == 0
    assert found.feasible
    assert found.figures[0] == pytest.approx(1.0 + np.sqrt(2.0) * 1e-4, abs=1e-9)


def test_failed_rows_are_kept_away_from() -> None:
    def cliff(x):
        return x[:, 0] > 0.6

    behind = search(columns(product, total, failed=cliff), [0, 0], [2, 2], [Limit(1, True, 1.0)], most=True)
    assert behind.best is not None
    assert behind.best.x == pytest.approx([0.5, 0.5], abs=1e-6)
    assert (behind.status == 2).sum() > 100
    edge = search(columns(product, total, failed=lambda x: x[:, 0] > 0.45), [0, 0], [2, 2], [Limit(1, True, 1.0)], most=True).best
    assert edge is not None
    assert edge.x == pytest.approx([0.45, 0.55], abs=1e-3)
    assert edge.stationarity > 1e-3  # held by the border of what can be solved, which is no limit
    nothing = search(columns(product, failed=lambda x: x[:, 0] >= 0.0), [0, 0], [2, 2], [], most=True)
    assert nothing.best is None


def test_the_better_of_two_tops_is_reported() -> None:
    def hills(x):
        return np.exp(-50.0 * (x[:, 0] - 0.2) ** 2) + 1.5 * np.exp(-50.0 * (x[:, 0] - 0.8) ** 2)

    found = search(columns(hills), [0], [1], [], most=True).best
    assert found is not None
    assert found.x == pytest.approx([0.8], abs=1e-5)


def test_gradients_inside_and_at_the_ends_are_of_second_order() -> None:
    problem = Scaled(columns(lambda x: np.sin(x[:, 0]) * np.exp(x[:, 1])), [0, 0], [1, 2], [], most=False)
    for u in ([0.3, 0.4], [0.0, 1.0], [1.0, 0.0], [5e-5, 0.5]):
        x, y = u[0], 2.0 * u[1]
        exact = [np.cos(x) * np.exp(y), 2.0 * np.sin(x) * np.exp(y)]
        assert problem.gradient(np.array(u))[0] == pytest.approx(exact, abs=1e-6)


def test_same_seed_same_answer_and_rows_alone_or_together() -> None:
    asked = [search(columns(product, total), [0, 0], [2, 2], [Limit(1, True, 1.0)], most=True, seed=5) for _ in range(2)]
    assert asked[0].best is not None
    assert asked[1].best is not None
    assert np.array_equal(asked[0].best.x, asked[1].best.x)
    assert not np.array_equal(nets(2, 64, 5, 1), nets(2, 64, 6, 1))
    assert np.array_equal(nets(2, 64, 5, 1)[0], nets(2, 64, 5, 3)[0])


RANGES = {"charge.equivalence_ratio": (0.3, 0.9), "engine.compression_ratio": (12, 22)}
HOLDS = ["peak_pressure<=150 bar", "exhaust_temperature<=680 degC", "exhaust_O2_dry>=3 %"]


def test_most_work_of_a_case_within_its_limits() -> None:
    found = fuelair.best(BOAT, RANGES, most="imep_gross", hold=HOLDS, points=32)
    assert found.feasible
    a = fuelair.assess(BOAT.replace(found.at))
    figures, dry = a.figures(), a.exhaust_figures["exhaust_O2_dry"]
    assert figures["peak_pressure_Pa"] == pytest.approx(150e5, rel=1e-6)
    assert figures["exhaust_temperature_K"] == pytest.approx(953.15, rel=1e-6)
    assert dry is not None
    assert dry > 0.03
    assert found.figures["imep_gross_Pa"] == pytest.approx(figures["imep_gross_Pa"], rel=1e-7)
    assert len(found.binding) == 2
    assert "Peak pressure <= 150.00 bar" in found.verdict
    assert f"best found from {found.best.starts} starts" in found.verdict
    below = {key: (value * 0.98, value * (1 - 1e-4)) for key, value in found.at.items()}
    assert (
        fuelair.best(BOAT, below, most="imep_gross", hold=HOLDS, points=16).figures["imep_gross_Pa"]
        < found.figures["imep_gross_Pa"]
    )
    tables = studies.optimum(found)
    assert [row[3] for row in tables[1].rows] == ["binds", "binds", ""]


def test_moving_the_limit_of_a_case_moves_the_optimum_as_said() -> None:
    found = [
        fuelair.best(BOAT, RANGES, most="imep_gross", hold=[f"peak_pressure<={p} bar", *HOLDS[1:]], points=16)
        for p in (149, 150, 151)
    ]
    change = (found[2].figures["imep_gross_Pa"] - found[0].figures["imep_gross_Pa"]) / 2e5
    assert found[1].best.sensitivity[0] == pytest.approx(change, rel=1e-3)


def test_a_case_without_a_feasible_point_says_so() -> None:
    hold = ["peak_pressure<=100 bar", "compression_temperature>=1000 K"]
    found = fuelair.best(BOAT, RANGES, least="isfc", hold=hold, points=32)
    assert not found.feasible
    assert found.verdict.startswith("No point meets all limits; the nearest miss has")
    assert found.figures["peak_pressure_Pa"] > 100e5
    assert found.figures["compression_temperature_K"] < 1000.0
    assert found.best.margins[0] / 100e5 == pytest.approx(found.best.margins[1] / 1000.0, rel=1e-4)
    jsonschema.validate(json.loads(json.dumps(found.to_dict(), allow_nan=False)), optimum_schema())


def test_limits_of_the_case_and_json() -> None:
    found = fuelair.best(BOAT, RANGES, least="isfc", hold=["limits"], points=16)
    assert [hold.quantity for hold in found.holds] == ["peak_pressure_Pa", "exhaust_temperature_K"]
    data = json.loads(json.dumps(found.to_dict(), allow_nan=False))
    jsonschema.Draft202012Validator.check_schema(optimum_schema())
    jsonschema.validate(data, optimum_schema())
    assert data["feasible"] is True
    assert {end["key"] for end in data["ends"]} == set(RANGES)


@pytest.mark.parametrize(
    "wrong",
    [
        {"most": "imep_gross", "least": "isfc"},
        {},
        {"most": "imep_gros"},
        {"most": "imep_gross", "hold": ["peak_pressure=150 bar"]},
        {"most": "imep_gross", "points": 100},
    ],
)
def test_wrong_questions_are_input_errors(wrong: dict[str, object]) -> None:
    with pytest.raises(InputError):
        fuelair.best(BOAT, RANGES, **wrong)


def test_the_verb_with_limits(tmp_path: Path) -> None:
    path = tmp_path / "boat.toml"
    path.write_text(BOAT.to_toml())
    vary = [word for key, (a, b) in RANGES.items() for word in ("--vary", f"{key}={a}:{b}")]
    out = CliRunner().invoke(app, ["find", str(path), *vary, "--most", "imep_gross", *[w for h in HOLDS for w in ("--hold", h)]])
    assert out.exit_code == 0, out.output
    text = " ".join(out.stdout.split())
    assert "Most gross imep: 22.87 bar, held by Peak pressure <= 150.00 bar" in text
    assert "no proof that nothing better exists" in text
    out = CliRunner().invoke(app, ["find", str(path), *vary, "--least", "isfc", "--hold", "peak_pressure<=20 bar", "--json", "-"])
    assert out.exit_code == 3
    assert json.loads(out.stdout)["feasible"] is False


def test_a_figure_that_lies_flat_on_its_limit_does_not_stop_the_search() -> None:
    """As peak pressure does where combustion is held to a pressure: the other limit decides, x + y = 1 at x = 0.5."""

    def held(x):
        return np.minimum(10.0 * total(x), 2.0)

    limits = [Limit(1, True, 2.0), Limit(2, True, 1.0)]
    found = search(columns(product, held, total), [0.2, 0.2], [2, 2], limits, most=True).best
    assert found is not None
    assert found.feasible
    assert found.x == pytest.approx([0.5, 0.5], abs=1e-5)
    assert found.agree == found.starts
