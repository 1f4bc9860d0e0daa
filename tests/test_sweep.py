"""Sweeps: one file whatever happens on the way, errors that are clear, tables that read back."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import fuelair
from fuelair import resources
from fuelair.errors import InputError, MissingExtraError, StoppedError
from fuelair.gas.engine import Status
from fuelair.study import formats, parts
from fuelair.study import sweep as sweeping
from fuelair.study.batch import Study
from fuelair.study.figures import MODEL_FIGURES
from fuelair.study.sampling import design
from fuelair.study.spread import Runner
from fuelair.study.sweep import sweep, table

DEMO = resources.demos() / "workboat.toml"
CASE = fuelair.Case.read(DEMO).replace({"charge.residual_fraction": 0.0})  # one passage a row
OVER = {"charge.equivalence_ratio": "0.3:0.6:4", "fuel.name": "diesel,methanol", "charge.pressure": "2bar:3bar:3"}
PARENT = Path(fuelair.__file__).parents[1]


@pytest.fixture
def small(monkeypatch):
    """Parts of four rows, tasks of two, so that a sweep of 24 rows has six parts."""
    monkeypatch.setitem(sweeping.PART_ROWS, "reference", 4)
    monkeypatch.setitem(sweeping.TASK_ROWS, "reference", 2)


def made(over=OVER, case=CASE, **more):
    rows = design(case, over)
    return Study(case, rows.keys, engine="reference", **more), rows


def command(*words, cwd, environment=None, **more):
    return subprocess.Popen(
        [sys.executable, "-m", "fuelair", "sweep", *words],
        cwd=cwd,
        env=os.environ | {"PYTHONPATH": str(PARENT)} | (environment or {}),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        encoding="utf-8",
        **more,
    )


def run(*words, cwd, environment=None):
    process = command(*words, cwd=cwd, environment=environment)
    out, error = process.communicate(timeout=120)
    return process.returncode, out, error


# --- the table ----------------------------------------------------------------------------------------------------


def test_a_csv_reads_back_exactly_and_holds_what_the_study_says(tmp_path, small):
    study, rows = made()
    summary = sweep(study, rows, tmp_path / "out.csv")
    assert (summary.rows, summary.failed, summary.counts) == (24, 0, {Status.OK: 24})
    frame = pd.read_csv(tmp_path / "out.csv")
    assert list(frame.columns) == ["charge.equivalence_ratio", "fuel.name", "charge.pressure [Pa]", *MODEL_FIGURES, "status"]
    known = study.run(rows.columns(0, 24))
    for name in MODEL_FIGURES:
        assert frame[name].tolist() == known.figures[name].tolist(), name
    assert frame["fuel.name"].tolist() == known.keys["fuel.name"]
    assert frame["charge.pressure [Pa]"].tolist() == known.keys["charge.pressure"].tolist()
    assert set(frame["status"]) == {"ok"}
    assert list(tmp_path.iterdir()) == [tmp_path / "out.csv"]


def test_parquet_holds_the_same_and_says_where_it_comes_from(tmp_path, small):
    study, rows = made()
    sweep(study, rows, tmp_path / "out.csv")
    sweep(study, rows, tmp_path / "out.parquet")
    frame = pd.read_parquet(tmp_path / "out.parquet")
    pd.testing.assert_frame_equal(frame, pd.read_csv(tmp_path / "out.csv"))
    pd.testing.assert_frame_equal(frame, table(study, rows))
    import pyarrow.parquet as pq

    about = json.loads(pq.read_schema(tmp_path / "out.parquet").metadata[b"fuelair"])
    assert about["format"] == 1 and about["engine"] == "reference" and about["model"] == "fuel-air-equilibrium"
    assert fuelair.Case.from_toml(about["case"]) == CASE
    assert about["versions"]["fuelair"] == fuelair.__version__ and "cantera" in about["versions"]
    assert about["design"]["rows"] == 24


def test_rows_without_figures_are_empty_cells_and_counted(tmp_path, small):
    over = {"charge.equivalence_ratio": "0.5,4.9", "engine.rod_length": "320mm,80mm", "combustion.pressure_limit": "200bar,50bar"}
    study, rows = made(over, quantities=["peak_pressure", "imep_gross"])
    summary = sweep(study, rows, tmp_path / "out.csv")
    sweep(study, rows, tmp_path / "out.parquet")
    assert summary.failed == 7
    expected = {Status.INPUT_REFUSED: 4, Status.OK: 1, Status.LIMIT_BELOW_COMPRESSION: 2, Status.CARBON_OVER_OXYGEN: 1}
    assert summary.counts == expected
    first = {Status.OK: 0, Status.LIMIT_BELOW_COMPRESSION: 1, Status.INPUT_REFUSED: 2, Status.CARBON_OVER_OXYGEN: 4}
    assert summary.first == first
    frame = pd.read_csv(tmp_path / "out.csv")
    assert frame["peak_pressure_Pa"].notna().tolist() == [True] + [False] * 7
    pd.testing.assert_frame_equal(pd.read_parquet(tmp_path / "out.parquet"), frame)
    import pyarrow.parquet as pq

    assert pq.read_table(tmp_path / "out.parquet")["peak_pressure_Pa"].null_count == 7


def test_a_column_of_words_and_numbers_is_text_in_every_part(tmp_path, small):
    case = fuelair.Case.read(resources.demos() / "hydrogen-genset.toml")
    over = {"charge.residual_fraction": "0.02,0.03,0.04,0.05,solve", "charge.equivalence_ratio": "0.4"}
    study, rows = made(over, case, quantities=["residual_fraction"])
    for name in ("out.csv", "out.parquet"):
        sweep(study, rows, tmp_path / name)
    frame = pd.read_parquet(tmp_path / "out.parquet")
    assert frame["charge.residual_fraction"].tolist() == ["0.02", "0.03", "0.04", "0.05", "solve"]
    assert pd.read_csv(tmp_path / "out.csv")["charge.residual_fraction"].tolist() == frame["charge.residual_fraction"].tolist()


def test_text_is_quoted_where_csv_needs_it():
    names = ["a,b", 'say "x"', "plain"]
    block = formats.Block({"fuel.name": names}, {"x": np.array([1.5, np.nan, np.inf])}, np.zeros(3, np.int8))
    assert formats._lines(block, slice(0, 3)) == '"a,b",1.5,ok\n"say ""x""",,ok\nplain,,ok\n'


def test_row_groups_do_not_depend_on_parts(tmp_path, small, monkeypatch):
    import pyarrow.parquet as pq

    monkeypatch.setattr(sweeping, "ROW_GROUP", 8)
    study, rows = made()
    sweep(study, rows, tmp_path / "out.parquet")
    file = pq.ParquetFile(tmp_path / "out.parquet")
    assert [file.metadata.row_group(i).num_rows for i in range(file.num_row_groups)] == [8, 8, 8]


def test_the_door_gives_a_data_frame(small):
    over = {"charge.pressure": ["2 bar", 3e5], "fuel.name": "diesel"}
    frame = fuelair.sweep(CASE, over, also=["indicated_power"], engine="reference")
    assert list(frame.columns[:2]) == ["charge.pressure [Pa]", "fuel.name"]
    assert frame["charge.pressure [Pa]"].tolist() == [2e5, 3e5] and frame["status"].tolist() == ["ok", "ok"]
    a = fuelair.assess(CASE.replace({"charge.pressure": 3e5, "fuel.name": "diesel"}))
    assert frame["peak_temperature_K"][1] == pytest.approx(a.figures()["peak_temperature_K"], rel=1e-12)
    assert frame["indicated_power_W"][1] == pytest.approx(a.engine_figures["indicated_power_W"], rel=1e-12)
    rows = frame[["charge.pressure [Pa]", "fuel.name"]].rename(columns={"charge.pressure [Pa]": "charge.pressure [bar]"})
    rows["charge.pressure [bar]"] /= 1e5
    again = fuelair.sweep(CASE, samples=rows, also=["indicated_power"], engine="reference")
    pd.testing.assert_frame_equal(again, frame)
    for wrong in ({}, {"over": {"charge.pressure": [2e5]}, "samples": rows}):
        with pytest.raises(InputError, match="either"):
            fuelair.sweep(CASE, **wrong)


# --- the same file whatever happens -------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["out.csv", "out.parquet"])
def test_any_number_of_workers_gives_the_same_file(tmp_path, small, name):
    files = []
    for workers in (1, 3):
        study, rows = made()
        sweep(study, rows, tmp_path / name, runner=Runner("threads", workers), replace=True)
        files.append((tmp_path / name).read_bytes())
    assert files[0] == files[1]


def test_an_interrupted_sweep_goes_on_where_it_was(tmp_path, small):
    study, rows = made()
    sweep(study, rows, tmp_path / "whole.csv")
    seen = []

    def stop(done, whole):
        seen.append(done)
        if done >= 10:
            raise KeyboardInterrupt

    with pytest.raises(StoppedError, match=r"8 of 24 rows are kept in .*out\.csv\.parts"):
        sweep(study, rows, tmp_path / "out.csv", progress=stop, runner=Runner("threads", 1))
    assert seen == [0, 2, 4, 6, 8, 10]
    assert not (tmp_path / "out.csv").exists()
    again = []
    sweep(study, rows, tmp_path / "out.csv", progress=lambda done, whole: again.append(done))
    assert again == list(range(8, 26, 2))
    assert (tmp_path / "out.csv").read_bytes() == (tmp_path / "whole.csv").read_bytes()
    assert not (tmp_path / "out.csv.parts").exists()


def test_a_sweep_interrupted_before_its_first_part_leaves_nothing(tmp_path, small):
    def stop(done, whole):
        raise KeyboardInterrupt

    study, rows = made()
    with pytest.raises(StoppedError):
        sweep(study, rows, tmp_path / "out.csv", progress=stop)
    assert list(tmp_path.iterdir()) == []


def test_a_sweep_killed_between_result_and_cleaning_up_only_cleans_up(tmp_path, small, monkeypatch):
    study, rows = made()
    monkeypatch.setattr(parts.Parts, "remove", lambda self: self.close())
    first = sweep(study, rows, tmp_path / "out.csv")
    monkeypatch.undo()
    monkeypatch.setitem(sweeping.PART_ROWS, "reference", 4)
    monkeypatch.setitem(sweeping.TASK_ROWS, "reference", 2)
    assert (tmp_path / "out.csv.parts" / "merged.json").exists()
    before = (tmp_path / "out.csv").stat().st_mtime_ns
    assert sweep(study, rows, tmp_path / "out.csv") == first
    assert (tmp_path / "out.csv").stat().st_mtime_ns == before
    assert list(tmp_path.iterdir()) == [tmp_path / "out.csv"]


def interrupted(folder, over=OVER, case=CASE, **more):
    """Leave three parts of a sweep behind."""

    def stop(done, whole):
        if done >= 12:
            raise KeyboardInterrupt

    study, rows = made(over, case, **more)
    with pytest.raises(StoppedError):
        sweep(study, rows, folder / "out.csv", progress=stop, runner=Runner("threads", 1))


@pytest.mark.parametrize(
    ("change", "word"),
    [
        ({"case": CASE.replace({"engine.compression_ratio": 16.0})}, "case"),
        ({"over": OVER | {"charge.pressure": "2bar:3.1bar:3"}}, "design"),
        ({"quantities": ["peak_pressure"]}, "quantities"),
        ({"model": "air-cold"}, "model"),
    ],
)
def test_parts_of_another_sweep_are_refused_until_fresh(tmp_path, small, change, word):
    interrupted(tmp_path)
    held = sorted(p.name for p in (tmp_path / "out.csv.parts").iterdir())
    study, rows = made(**change)
    with pytest.raises(InputError) as caught:
        sweep(study, rows, tmp_path / "out.csv")
    assert word in caught.value.problems[0].message and "--fresh" in caught.value.problems[0].hint
    assert sorted(p.name for p in (tmp_path / "out.csv.parts").iterdir()) == held
    sweep(study, rows, tmp_path / "out.csv", fresh=True)
    sweep(study, rows, tmp_path / "whole.csv")
    assert (tmp_path / "out.csv").read_bytes() == (tmp_path / "whole.csv").read_bytes()


def test_a_folder_that_is_not_ours_is_left_alone(tmp_path, small):
    (tmp_path / "out.csv.parts").mkdir()
    own = tmp_path / "out.csv.parts" / "thesis.txt"
    own.write_text("years of work", encoding="utf-8")
    study, rows = made()
    with pytest.raises(InputError, match="something else"):
        sweep(study, rows, tmp_path / "out.csv")
    with pytest.raises(InputError, match="something else"):
        sweep(study, rows, tmp_path / "out.csv", fresh=True)
    assert own.read_text(encoding="utf-8") == "years of work"


def test_two_sweeps_do_not_write_the_same_parts(tmp_path, small):
    study, rows = made()
    failed = []

    def second(done, whole):
        if done == 4:
            with pytest.raises(InputError, match="another sweep"):
                sweep(study, rows, tmp_path / "out.csv")
            failed.append(done)

    sweep(study, rows, tmp_path / "out.csv", progress=second)
    assert failed == [4]


def test_a_damaged_part_is_named(tmp_path, small):
    interrupted(tmp_path)
    part = tmp_path / "out.csv.parts" / "part-000001.npz"
    part.write_bytes(part.read_bytes()[:200])
    study, rows = made()
    with pytest.raises(InputError, match=r"part-000001\.npz"):
        sweep(study, rows, tmp_path / "out.csv")
    part.unlink()
    sweep(study, rows, tmp_path / "out.csv")


# --- what cannot be written ---------------------------------------------------------------------------------------


def test_a_full_disk_is_one_clear_error_and_keeps_what_is_done(tmp_path, small, monkeypatch):
    study, rows = made()
    save = np.savez

    def full(file, **arrays):
        if "000002" in file.name:
            raise OSError(28, "No space left on device")
        save(file, **arrays)

    monkeypatch.setattr(parts.np, "savez", full)
    with pytest.raises(InputError) as caught:
        sweep(study, rows, tmp_path / "out.csv")
    assert "No space left" in str(caught.value) and "run the same command again" in str(caught.value)
    assert sorted(p.name for p in (tmp_path / "out.csv.parts").glob("part*")) == ["part-000000.npz", "part-000001.npz"]
    monkeypatch.undo()


def test_files_that_cannot_be_the_result(tmp_path, small, monkeypatch):
    study, rows = made()
    (tmp_path / "there.csv").write_text("mine", encoding="utf-8")
    (tmp_path / "folder.csv").mkdir()
    for name, words in (
        ("out.txt", ".csv or .parquet"),
        ("out", ".csv or .parquet"),
        ("there.csv", "--replace"),
        ("folder.csv", "ordinary file"),
        ("none/out.csv", "make the folder"),
    ):
        with pytest.raises(InputError) as caught:
            sweep(study, rows, tmp_path / name)
        assert words in str(caught.value)
    assert (tmp_path / "there.csv").read_text(encoding="utf-8") == "mine"
    assert sorted(p.name for p in tmp_path.iterdir()) == ["folder.csv", "there.csv"]
    with monkeypatch.context() as without:
        without.setitem(sys.modules, "pyarrow", None)
        with pytest.raises(MissingExtraError, match=r"fuelair\[export\]"):
            sweep(study, rows, tmp_path / "out.parquet")
    sweep(study, rows, tmp_path / "there.csv", replace=True)
    assert len(pd.read_csv(tmp_path / "there.csv")) == 24


@pytest.mark.skipif(os.name != "posix" or os.geteuid() == 0, reason="the superuser may write everywhere")
def test_a_folder_without_permission_is_one_clear_error(tmp_path, small):
    study, rows = made()
    tmp_path.chmod(0o500)
    try:
        with pytest.raises(InputError, match="cannot write"):
            sweep(study, rows, tmp_path / "out.csv")
    finally:
        tmp_path.chmod(0o700)


# --- kill -9 ------------------------------------------------------------------------------------------------------


def slow(folder, name, *words):
    """Words of a sweep of 192 rows in parts of 64, some seconds long."""
    (folder / "case.toml").write_text(CASE.to_toml(), encoding="utf-8")
    over = ("--over", "charge.equivalence_ratio=0.3:0.7:12", "--over", "charge.pressure=2bar:3bar:16")
    return ("case.toml", *over, "--engine", "reference", "--out", name, "--quantities", "peak_pressure,imep_gross", *words)


def wait_for(look, seconds=60.0):
    """Look again and again until something is there."""
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        if found := look():
            return found
        time.sleep(0.02)
    raise AssertionError(f"waited {seconds} s in vain")


def workers_of(pid):
    """Worker processes that a process has started, and they in turn."""
    found = []
    for entry in Path("/proc").iterdir():
        if entry.name.isdigit():
            try:
                parent = int((entry / "stat").read_text(encoding="utf-8").rpartition(")")[2].split()[1])
                words = (entry / "cmdline").read_bytes()
            except OSError:
                continue
            if parent == pid:
                found += ([int(entry.name)] if b"spawn_main" in words else []) + workers_of(int(entry.name))
    return found


@pytest.fixture(scope="module")
def whole(tmp_path_factory):
    """The file of a sweep that nothing disturbs."""
    folder = tmp_path_factory.mktemp("whole")
    code, out, error = run(*slow(folder, "out.csv", "--workers", "2"), cwd=folder)
    assert code == 0, error
    assert out == "Wrote out.csv: 192 rows, 192 solved by fuel-air-equilibrium.\n"
    return (folder / "out.csv").read_bytes()


@pytest.mark.parametrize("runner", ["threads", "processes"])
def test_kill_9_of_the_sweep_then_the_same_command_gives_the_same_file(tmp_path, whole, runner):
    words = slow(tmp_path, "out.csv", "--runner", runner, "--workers", "2")
    first = command(*words, cwd=tmp_path)
    wait_for(lambda: len(list((tmp_path / "out.csv.parts").glob("part-*.npz"))) >= 1)
    first.kill()
    first.communicate()
    assert not (tmp_path / "out.csv").exists()
    kept = sorted((tmp_path / "out.csv.parts").glob("part-*.npz"))
    assert 1 <= len(kept) < 3
    code, _, error = run(*words, cwd=tmp_path)
    assert (code, error) == (0, "")
    assert (tmp_path / "out.csv").read_bytes() == whole


@pytest.mark.parametrize("runner", ["processes", "dask"])
def test_kill_9_of_a_worker_gives_the_same_file(tmp_path, whole, runner):
    going = command(*slow(tmp_path, "out.csv", "--runner", runner, "--workers", "2"), cwd=tmp_path)
    wait_for(lambda: list((tmp_path / "out.csv.parts").glob("part-*.npz")))
    os.kill(workers_of(going.pid)[-1], signal.SIGKILL)
    _, error = going.communicate(timeout=120)
    assert going.returncode == 0, error
    assert (tmp_path / "out.csv").read_bytes() == whole


def test_ctrl_c_exits_130_and_says_how_to_go_on(tmp_path, whole):
    words = slow(tmp_path, "out.csv", "--workers", "2")
    first = command(*words, cwd=tmp_path)
    wait_for(lambda: list((tmp_path / "out.csv.parts").glob("part-*.npz")))
    first.send_signal(signal.SIGINT)
    out, error = first.communicate(timeout=60)
    assert (first.returncode, out) == (130, "")
    assert "rows are kept in" in error and "The same command goes on" in error
    assert len(error.splitlines()) == 1
    code, _, error = run(*words, cwd=tmp_path)
    assert (code, error) == (0, "")
    assert (tmp_path / "out.csv").read_bytes() == whole


# --- the verb -----------------------------------------------------------------------------------------------------


def test_rows_that_fail_exit_1_and_are_told_by_status(tmp_path):
    over = ("--over", "charge.equivalence_ratio=0.5,4.9", "--over", "engine.rod_length=320mm,80mm")
    code, out, error = run(str(DEMO), *over, "--out", "out.csv", "--engine", "reference", cwd=tmp_path)
    assert (code, error) == (1, "")
    assert "4 rows, 1 solved" in out
    for words in ("input-refused", "too short for engine.stroke", "carbon-over-oxygen", "leaner mixture"):
        assert words in " ".join(out.split())
    assert len(pd.read_csv(tmp_path / "out.csv")) == 4


def test_random_and_sample_sweeps_from_the_command_line(tmp_path):
    first = ("--over", "charge.equivalence_ratio=0.3:0.6", "--over", "charge.pressure=2bar:3bar")
    words = (*first, "--design", "sobol", "--rows", "6", "--seed", "3", "--also", "indicated_power,exhaust_O2_dry")
    code, _, error = run(str(DEMO), *words, "--out", "out.csv", "--engine", "reference", cwd=tmp_path)
    assert (code, error) == (0, "")
    frame = pd.read_csv(tmp_path / "out.csv")
    assert list(frame.columns[-3:]) == ["indicated_power_W", "exhaust_O2_dry", "status"]
    # the keys of a result are samples of the next sweep
    frame[["charge.equivalence_ratio", "charge.pressure [Pa]"]].to_csv(tmp_path / "rows.csv", index=False)
    words = ("--samples", "rows.csv", "--also", "indicated_power,exhaust_O2_dry", "--engine", "reference")
    code, _, error = run(str(DEMO), *words, "--out", "again.csv", cwd=tmp_path)
    assert (code, error) == (0, "")
    assert (tmp_path / "again.csv").read_bytes() == (tmp_path / "out.csv").read_bytes()


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (("--out", "out.csv"), "nothing is varied"),
        (("--out", "out.xlsx", "--over", "charge.pressure=2bar"), ".csv or .parquet"),
        (("--out", "out.csv", "--over", "charge.pressure=2bar", "--over", "charge.pressure=3bar"), "varied twice"),
        (("--out", "out.csv", "--over", "charge.pressure=2bar", "--engine", "fast"), "reference or compiled"),
        (("--out", "out.csv", "--over", "charge.pressure=2bar", "--runner", "ray"), "threads, processes, dask"),
        (("--out", "out.csv", "--over", "charge.pressure=2bar", "--workers", "0"), "1 or more"),
        (("--out", "out.csv", "--over", "charge.pressure=2bar", "--tls-ca", "ca.pem"), "all three"),
        (("--out", "out.csv", "--over", "charge.pressure=2bar", "--quantities", "imep"), "imep_net_Pa"),
        (("--out", "out.csv", "--over", "charge.pressure=2bar", "--model", "air"), "air-cold"),
        (("--out", "out.csv", "--samples", "rows.csv", "--over", "charge.pressure=2bar"), "leave out"),
        (("--out", "out.csv", "--samples", "rows.csv"), "No such file"),
        (("--out", "case.csv", "--samples", "case.csv", "--replace"), "which would be lost"),
    ],
)
def test_wrong_words_are_one_clear_error(tmp_path, words, told):
    (tmp_path / "case.csv").write_text("charge.pressure [bar]\n2\n", encoding="utf-8")
    code, out, error = run(str(DEMO), *words, cwd=tmp_path)
    assert (code, out) == (2, "")
    assert error.startswith("fuelair: ") and told in error
    assert [p.name for p in tmp_path.iterdir()] == ["case.csv"]
