"""Renew the generated parts of README.md: python .ci/readme.py [--speed]."""

from __future__ import annotations

import datetime
import os
import platform
import re
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]


def run(*words: str) -> str:
    """Standard output of a command of the running interpreter's environment."""
    return subprocess.run(
        [sys.executable, *words], cwd=ROOT, capture_output=True, text=True, check=False, env=os.environ | {"COLUMNS": ""}
    ).stdout


def workboat() -> str:
    """Verdict, models and ladder as the first README command prints them."""
    text = run("-m", "fuelair", "assess", "fuelair/demos/workboat.toml")
    lines = [line.rstrip() for line in text.splitlines()]
    start = next(i for i, line in enumerate(lines) if "Expect a peak" in line)
    verdict = lines[start : lines.index("", start)]
    first = next(i for i, line in enumerate(lines) if "The same charge" in line)
    last = next(i for i, line in enumerate(lines) if "How far each" in line)
    return "\n".join(["```text", *verdict, "", *lines[first : last - 1], "```"])


def validation() -> str:
    """The scoreboard of the validation book."""
    lines = run("-m", "fuelair", "validate", "--failed-only").strip().splitlines()
    return "\n".join(["```text", *(line.rstrip() for line in lines), "```"])


def speed() -> str:
    """The ratio that the cold-start benchmark prints last."""
    return f"**{run('validation/speed/cold_start.py').strip().splitlines()[-1]}**"


def studies() -> str:
    """What the benchmark of states, cycles and studies prints, with the machine and the date."""
    place = f"{os.cpu_count()} cores, {processor()}, Python {platform.python_version()}, {datetime.date.today()}"
    return "\n".join(["```text", *run("validation/speed/studies.py").strip().splitlines(), place, "```"])


def processor() -> str:
    """Name of the processor, as the system gives it."""
    for line in Path("/proc/cpuinfo").read_text(encoding="utf-8").splitlines():
        if line.startswith("model name"):
            return line.partition(":")[2].strip()
    return platform.processor()


def fill(text: str, name: str, body: str) -> str:
    """Replace what stands between the marks of a part."""
    return re.sub(rf"(<!-- shown:{name} -->\n).*?(<!-- end -->)", lambda m: m[1] + body + "\n" + m[2], text, flags=re.S)


def main() -> None:
    """Rewrite README.md in place."""
    path = ROOT / "README.md"
    text = path.read_text(encoding="utf-8")
    text = fill(text, "workboat", workboat())
    text = fill(text, "validation", validation())
    if "--speed" in sys.argv:
        text = fill(text, "speed", speed())
        text = fill(text, "studies", studies())
    path.write_text(text, encoding="utf-8")


if __name__ == "__main__":
    main()
