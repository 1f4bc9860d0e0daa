"""The documents say what is so: README commands, shown output, docstrings that run, words that do not belong."""

from __future__ import annotations

import doctest
import importlib
import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

import fuelair

PACKAGE = Path(fuelair.__file__).parent
ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
MODULES = sorted(
    ".".join(("fuelair", *p.relative_to(PACKAGE).with_suffix("").parts)).removesuffix(".__init__")
    for p in PACKAGE.rglob("*.py")
    if p.stem != "__main__" and not {"mechanisms", "validation"} & set(p.relative_to(PACKAGE).parts)
)


def blocks() -> list[str]:
    return re.findall(r"^```(?:sh|bash|shell)\n(.*?)^```", README, re.M | re.S)


def test_first_two_shell_blocks_are_the_two_commands_on_one_line_each() -> None:
    main, test = (b.strip() for b in blocks()[:2])
    assert "\n" not in main
    assert "\n" not in test
    assert main.startswith("python3 -m venv .venv && ")
    assert test.startswith("python3 -m venv .venv && ")
    (demo,) = re.findall(r"fuelair assess (\S+\.toml)", main)
    assert (ROOT / demo).is_file()
    assert "[test]" in test
    assert "pytest" in test


def test_what_the_readme_shows_is_what_the_command_prints() -> None:
    out = subprocess.run(
        [sys.executable, "-m", "fuelair", "assess", str(PACKAGE / "demos" / "workboat.toml")],
        capture_output=True,
        text=True,
        encoding="utf-8",
        check=True,
        cwd=PACKAGE,
        env=os.environ | {"COLUMNS": ""},
    ).stdout
    printed = {line.rstrip() for line in out.splitlines()}
    shown = re.search(r"<!-- shown:workboat -->\n```text\n(.*?)```", README, re.S)
    assert shown is not None
    lines = [line.rstrip() for line in shown[1].splitlines()]
    assert len(lines) > 20
    assert not [line for line in lines if line not in printed]


def test_readme_scoreboard_is_current() -> None:
    from fuelair.proof import book

    shown = re.search(r"<!-- shown:validation -->\n```text\n(.*?)```", README, re.S)
    assert shown is not None
    rows = re.search(r"(\d+) rows", shown[1])
    assert rows is not None
    assert int(rows[1]) == len(book.load())


@pytest.mark.parametrize("name", MODULES)
def test_docstrings_run(name: str) -> None:
    module = importlib.import_module(name)
    assert module.__doc__
    assert doctest.testmod(module, optionflags=doctest.ELLIPSIS).failed == 0


def test_every_verb_is_in_the_readme() -> None:
    helped = subprocess.run(
        [sys.executable, "-m", "fuelair", "--help"], capture_output=True, text=True, encoding="utf-8", check=True
    )
    for verb in ("assess", "check", "new", "fuels", "validate"):
        assert verb in helped.stdout
        assert f"fuelair {verb}" in README
