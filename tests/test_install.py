"""The wheel carries its data and works from any folder, also one with spaces and letters beyond ASCII."""

from __future__ import annotations

import os
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    pytest.importorskip("hatchling")
    folder = tmp_path_factory.mktemp("wheel")
    subprocess.run(
        [sys.executable, "-m", "pip", "wheel", "-q", "--no-deps", "--no-build-isolation", "-w", str(folder), str(ROOT)],
        check=True,
        capture_output=True,
    )
    (made,) = folder.glob("fuelair-*.whl")
    return made


def test_wheel_carries_every_data_file(wheel: Path) -> None:
    inside = set(zipfile.ZipFile(wheel).namelist())
    for kind in ("mechanisms", "validation"):
        for path in (ROOT / kind).rglob("*"):
            if path.is_file() and "__pycache__" not in path.parts:
                assert f"fuelair/{path.relative_to(ROOT).as_posix()}" in inside
    assert "fuelair/py.typed" in inside
    assert {f"fuelair/demos/{p.name}" for p in (ROOT / "fuelair" / "demos").glob("*.toml")} <= inside


def test_unpacked_elsewhere_it_assesses_a_demo(wheel: Path, tmp_path: Path) -> None:
    place = tmp_path / "Ordner mit Lücke"
    zipfile.ZipFile(wheel).extractall(place)
    code = (
        "import fuelair, pathlib; here = pathlib.Path(fuelair.__file__).parent; "
        "a = fuelair.assess(fuelair.Case.read(here / 'demos' / 'hydrogen-genset.toml')); print(here); print(a.status().label)"
    )
    out = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        text=True,
        encoding="utf-8",
        check=True,
        cwd=tmp_path,
        env=os.environ | {"PYTHONPATH": str(place), "PYTHONUTF8": "1"},
    )
    assert out.stdout.splitlines() == [str(place / "fuelair"), "ok"]


def test_the_extras_that_the_readme_names_exist() -> None:
    from importlib.metadata import metadata

    extras = set(metadata("fuelair").get_all("Provides-Extra") or [])
    assert {"test", "dev"} <= extras
