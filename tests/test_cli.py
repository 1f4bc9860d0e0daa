"""The command line as a user meets it: real processes, exit codes, what lands where."""

from __future__ import annotations

import csv
import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

import fuelair
from fuelair import resources
from fuelair.errors import MissingExtraError

DEMO = resources.demos() / "workboat.toml"


def run(*words: str, cwd: Path | None = None, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "fuelair", *words],
        capture_output=True,
        text=True,
        encoding="utf-8",
        check=False,
        cwd=cwd or Path(fuelair.__file__).parents[0],
        env=os.environ | environment,
    )


@pytest.fixture(scope="module")
def shown() -> str:
    out = run("assess", str(DEMO), "--every-state")
    assert out.returncode == 0, out.stderr
    assert out.stderr == ""
    return out.stdout


def test_the_verdict_comes_before_any_table(shown: str) -> None:
    assert (
        shown.index("Expect a peak of") < shown.index("The trapped charge") < shown.index("The same charge through every model")
    )
    for part in (
        "What each assumption costs",
        "States of fuel-air-equilibrium",
        "States of air-cold",
        "Where the fuel's exergy goes",
        "Mind",
        "Left to default",
        "Ledger",
        "Rests on",
        "Caution",
        "[from memory]",
        "verify by test",
    ):
        assert part in shown


def test_the_gas_engine_is_chosen_by_name() -> None:
    out = run("assess", str(DEMO), "--json", "-", "--engine", "compiled")
    assert out.returncode == 0, out.stderr
    compiled, reference = json.loads(out.stdout), fuelair.assess(fuelair.Case.read(DEMO)).to_dict()
    assert (compiled["engine"], reference["engine"]) == ("compiled", "reference")
    for key, value in reference["models"]["fuel-air-equilibrium"].items():
        if isinstance(value, float):
            assert compiled["models"]["fuel-air-equilibrium"][key] == pytest.approx(value, rel=1e-8), key
    out = run("assess", str(DEMO), "--engine", "fast")
    assert (out.returncode, out.stdout) == (2, "") and "reference or compiled" in out.stderr


def test_without_numba_studies_say_once_that_they_are_slow(capsys: pytest.CaptureFixture[str]) -> None:
    from fuelair.cli import options, warmup
    from fuelair.gas import engines

    with pytest.MonkeyPatch.context() as patch:
        for place in (options, engines):
            patch.setattr(place, "can_compile", lambda: False)
        assert options.engine_of_study(None) == "reference"
        assert "fuelair[fast]" in capsys.readouterr().err
        assert options.engine_of_study("reference") == "reference"
        assert capsys.readouterr().err == ""
        with pytest.raises(MissingExtraError, match=r"fuelair\[fast\]"):
            warmup.warmup()
    assert options.engine_of_study(None) == "compiled"


def test_output_fits_its_width(shown: str) -> None:
    assert max(len(line) for line in shown.splitlines()) <= 120


def test_json_to_standard_output_is_alone(tmp_path: Path) -> None:
    out = run("assess", str(DEMO), "--json", "-", cwd=tmp_path)
    data = json.loads(out.stdout)
    assert data["models"]["fuel-air-equilibrium"]["status"] == "ok"
    assert list(tmp_path.iterdir()) == []


def test_out_writes_every_file_and_can_be_repeated(tmp_path: Path) -> None:
    target = tmp_path / "a folder" / "Ergebnis ü"
    for _ in range(2):
        out = run("assess", str(DEMO), "--out", str(target))
        assert out.returncode == 0, out.stderr
    names = {p.name for p in target.iterdir()}
    assert names == {
        "assessment.json",
        "models.csv",
        "states.csv",
        "ladder.csv",
        "overprediction.csv",
        "resolved-case.toml",
        "log.txt",
    }
    assert [p.name for p in target.parent.iterdir()] == [target.name]
    with (target / "models.csv").open(newline="") as file:
        rows = list(csv.DictReader(file))
    assert next(r["model"] for r in rows) == "air-cold"
    data = json.loads((target / "assessment.json").read_text())
    for row in rows:
        assert float(row["peak_pressure_Pa"]) == data["models"][row["model"]]["peak_pressure_Pa"]
    again = fuelair.assess(fuelair.Case.read(target / "resolved-case.toml"))
    assert again.to_dict()["models"] == data["models"]


def test_out_leaves_foreign_files_alone(tmp_path: Path) -> None:
    (tmp_path / "notes.txt").write_text("mine")
    assert run("assess", str(DEMO), "--out", str(tmp_path)).returncode == 0
    assert (tmp_path / "notes.txt").read_text() == "mine"


def test_species_data_of_the_current_folder_are_not_used(tmp_path: Path) -> None:
    (tmp_path / "nasa_gas.yaml").write_text("species: []")
    assert run("assess", str(DEMO), cwd=tmp_path).returncode == 0


def test_the_case_and_special_files_are_never_replaced(tmp_path: Path) -> None:
    mine = tmp_path / "mine.toml"
    mine.write_text(DEMO.read_text())
    (tmp_path / "link.json").symlink_to(tmp_path / "target.json")
    for words in (("--json", str(mine)), ("--out", "."), ("--out", ""), ("--json", str(tmp_path))):
        out = run("assess", str(mine), *words, cwd=tmp_path)
        assert out.returncode == 2, words
        assert words[0] in out.stderr
    assert mine.read_text() == DEMO.read_text()
    assert run("assess", str(mine), "--json", str(tmp_path / "link.json")).returncode == 0
    assert (tmp_path / "link.json").is_symlink()
    assert (tmp_path / "target.json").is_file()


def test_out_onto_a_file_is_refused(tmp_path: Path) -> None:
    place = tmp_path / "taken"
    place.write_text("mine")
    out = run("assess", str(DEMO), "--out", str(place))
    assert out.returncode == 2
    assert "--out" in out.stderr
    assert place.read_text() == "mine"
    assert sorted(p.name for p in tmp_path.iterdir()) == ["taken"]


def broken(tmp_path: Path, old: str, new: str) -> Path:
    text = DEMO.read_text()
    assert old in text
    path = tmp_path / "case.toml"
    path.write_text(text.replace(old, new))
    return path


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('name = "renewable-diesel"', 'name = "renewable-deisel"', ["fuel.name", "renewable-deisel", '"renewable-diesel"']),
        ('pressure = "2.9 bar"', 'pressure = "bar"', ["charge.pressure", "'bar'"]),
        ('compression_ratio = "17:1"', "compression_ratio = 1", ["engine.compression_ratio", "1.5 to 60"]),
        ("equivalence_ratio = 0.58", "equivalence_ratio = -1", ["charge.equivalence_ratio", "-1", "0.01 to 5"]),
        ("equivalence_ratio = 0.58", "equivalence_ratio = 0.58\nair_fuel_ratio = 25", ["equivalence_ratio", "air_fuel_ratio"]),
        ('pressure_limit = "200 bar"', 'pressure_limit = "110 bar"', ["combustion.pressure_limit", "129.9 bar"]),
        ('residual_fraction = "3 %"', "egr_fraction = 1.2", ["charge.egr_fraction", "1.2"]),
        ('relative_humidity = "60 %"', 'relative_humidity = "140 %"', ["charge.relative_humidity", "140 %"]),
        ("[charge]", "[charge", ["TOML"]),
        ("[charge]", "[chrage]", ["chrage"]),
    ],
)
def test_wrong_input_is_one_clear_error_with_exit_2_and_nothing_written(
    tmp_path: Path, old: str, new: str, words: list[str]
) -> None:
    path = broken(tmp_path, old, new)
    out = run("assess", str(path), "--out", str(tmp_path / "out"), "--json", str(tmp_path / "a.json"))
    assert out.returncode == 2
    assert out.stdout == ""
    assert "Traceback" not in out.stderr
    assert "case.toml" in out.stderr
    for word in words:
        assert word in out.stderr
    assert sorted(p.name for p in tmp_path.iterdir()) == ["case.toml"]


@pytest.mark.parametrize("make", ["missing", "folder", "latin1", "huge", "empty"])
def test_unusable_files_are_one_clear_error(tmp_path: Path, make: str) -> None:
    path = tmp_path / "case.toml"
    if make == "folder":
        path.mkdir()
    elif make == "latin1":
        path.write_bytes('title = "Überlast"'.encode("latin-1"))
    elif make == "huge":
        path.write_bytes(b"# filler\n" * 600_000)
    elif make == "empty":
        path.write_text("")
    out = run("assess", str(path))
    assert out.returncode == 2
    assert out.stdout == ""
    assert str(path) in out.stderr
    assert "Traceback" not in out.stderr


def test_unsolvable_is_exit_3_with_status_and_reason(tmp_path: Path) -> None:
    path = tmp_path / "cold.toml"
    path.write_text("""
[engine]
compression_ratio = 10
[fuel]
name = "methanol"
admission = "port-liquid"
[charge]
equivalence_ratio = 1.0
intake_pressure = "1 bar"
intake_temperature = "340 K"
[combustion]
heat_addition = "constant-volume"
""")
    out = run("assess", str(path), "--out", str(tmp_path / "out"))
    assert out.returncode == 3
    assert "vapour-above-saturation" in out.stderr
    assert not (tmp_path / "out").exists()


def test_check_new_and_fuels(tmp_path: Path) -> None:
    names = run("new").stdout.split()
    assert "workboat" in names
    made = run("new", "workboat", cwd=tmp_path)
    assert made.returncode == 0
    again = run("new", "workboat", cwd=tmp_path)
    assert again.returncode == 2
    assert "--replace" in again.stderr
    checked = run("check", "workboat.toml", cwd=tmp_path)
    assert checked.returncode == 0
    assert fuelair.Case.from_toml(checked.stdout).resolved() == fuelair.Case.read(tmp_path / "workboat.toml").resolved()
    assert json.loads(run("check", "--schema").stdout)["$schema"].startswith("https://json-schema.org")
    assert run("check").returncode == 2
    assert "n-dodecane" in run("fuels").stdout
    assert "from memory" in run("fuels", "diesel").stdout
    wrong = run("fuels", "deisel")
    assert wrong.returncode == 2
    assert "diesel" in wrong.stderr


def test_version_help_and_unknown_verb() -> None:
    assert run("--version").stdout.strip() == f"fuelair {fuelair.__version__}"
    for words in (
        ("--help",),
        ("assess", "--help"),
        ("check", "--help"),
        ("new", "--help"),
        ("fuels", "--help"),
        ("validate", "--help"),
    ):
        out = run(*words)
        assert out.returncode == 0
        assert "Traceback" not in out.stderr
    assert run("asses").returncode == 2


@pytest.mark.parametrize("delay", [0.01, 0.08, 0.16])
def test_interrupt_is_130_and_leaves_nothing(tmp_path: Path, delay: float) -> None:
    """SIGINT while the case is being assessed (imports done), at three moments."""
    code = (
        "import os, signal, sys, threading, fuelair.cli\n"
        f"threading.Timer({delay}, lambda: os.kill(os.getpid(), signal.SIGINT)).start()\n"
        f"sys.argv = ['fuelair', 'assess', {str(DEMO)!r}, '--out', {str(tmp_path / 'out')!r}]\n"
        "fuelair.cli.main()\n"
    )
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False, cwd=tmp_path)
    assert out.returncode == 130
    assert "interrupted" in out.stderr
    assert "Traceback" not in out.stderr
    assert list(tmp_path.iterdir()) == []


def test_a_closed_pipe_is_no_error() -> None:
    out = subprocess.run(
        f'"{sys.executable}" -m fuelair fuels | head -1', shell=True, capture_output=True, text=True, check=False
    )
    assert "Traceback" not in out.stderr
