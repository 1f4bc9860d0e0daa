"""Imports only point downwards, physics never sees a case, and only the command line prints."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import fuelair

PACKAGE = Path(fuelair.__file__).parent
ORDER = (
    {"errors", "version", "roots"},
    {"quantities", "units", "sources", "resources"},
    {"fuel", "air"},
    {"gas"},
    {"charge"},
    {"cycle", "crank"},
    {"load"},
    {"case"},
    {"prepare", "outputs", "assessment", "remarks", "assess"},
    {"study"},
    {"report"},
    {"proof"},
    {"desk"},
    {"cli"},
)
LEVEL = {room: level for level, rooms in enumerate(ORDER) for room in rooms}
PHYSICS = {"fuel", "air", "gas", "charge", "cycle", "crank", "load"}
HEAVY = ("cantera", "numba", "pandas", "scipy", "vl_convert", "starlette", "uvicorn", "CoolProp", "janaf", "chemicals")


def modules() -> list[Path]:
    return sorted(p for p in PACKAGE.rglob("*.py") if not {"mechanisms", "validation"} & set(p.relative_to(PACKAGE).parts))


def room(path: Path) -> str:
    first = path.relative_to(PACKAGE).parts[0].removesuffix(".py")
    return "" if first in ("__init__", "__main__") else first


def imports(tree: ast.AST) -> set[str]:
    """Every module named by an import, `from fuelair import x` counting as fuelair.x."""
    found: set[str] = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            found.add(node.module)
            if node.module == "fuelair":
                found |= {f"fuelair.{alias.name}" for alias in node.names}
    return found


def own_rooms(path: Path) -> set[str]:
    names = imports(ast.parse(path.read_text(encoding="utf-8")))
    return {n.split(".")[1] for n in names if n.startswith("fuelair.")} & set(LEVEL)


@pytest.mark.parametrize("path", modules(), ids=lambda p: str(p.relative_to(PACKAGE)))
def test_imports_point_downwards(path: Path) -> None:
    here = room(path)
    if not here:
        return
    assert here in LEVEL, f"room {here!r} has no place in the order of layers"
    for other in own_rooms(path) - {here}:
        assert LEVEL[other] <= LEVEL[here], f"{here} imports {other}, which lies above it"
        if here in PHYSICS:
            assert other != "case"


@pytest.mark.parametrize("path", modules(), ids=lambda p: str(p.relative_to(PACKAGE)))
def test_cantera_is_imported_only_in_the_gas_room_and_only_the_command_line_prints(path: Path) -> None:
    tree = ast.parse(path.read_text(encoding="utf-8"))
    if room(path) != "gas":
        assert not any(name.split(".")[0] == "cantera" for name in imports(tree))
    if path.parent.name != "compiled":
        assert not any(name.split(".")[0] in ("numba", "llvmlite") for name in imports(tree))
    if room(path) != "cli":
        calls = [n for n in ast.walk(tree) if isinstance(n, ast.Call) and isinstance(n.func, ast.Name)]
        assert not [c.lineno for c in calls if c.func.id == "print"]


def test_importing_the_door_and_the_command_line_loads_nothing_heavy() -> None:
    code = f"import sys, fuelair, fuelair.cli; print([m for m in {HEAVY!r} if m in sys.modules])"
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert out.stdout.strip() == "[]"


def test_visible_names_are_exactly_the_sorted_door() -> None:
    assert fuelair.__all__ == sorted(fuelair.__all__)
    assert len(fuelair.__all__) <= 16
    for name in fuelair.__all__:
        assert hasattr(fuelair, name)
    assert callable(fuelair.assess)


def test_files_stay_readable() -> None:
    long = {str(p.relative_to(PACKAGE)): n for p in modules() if (n := len(p.read_text().splitlines())) > 340}
    assert not long
