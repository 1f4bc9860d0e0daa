"""Cold start: one whole `fuelair assess` against a bare process that imports Cantera and pandas.

Both run in turn, several times, in fresh processes of this interpreter; the ratio of the medians is
printed last. Run it by hand: python validation/speed/cold_start.py [runs]
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import time
from pathlib import Path

import fuelair

CASE = Path(fuelair.__file__).parent / "demos" / "workboat.toml"
BARE = [sys.executable, "-c", "import cantera, pandas"]
WHOLE = [sys.executable, "-m", "fuelair", "assess", str(CASE)]


def seconds(command: list[str]) -> float:
    """Wall time of one run from another folder than the checkout."""
    start = time.perf_counter()
    subprocess.run(command, stdout=subprocess.DEVNULL, check=True, cwd=os.path.expanduser("~"))
    return time.perf_counter() - start


def main() -> None:
    """Time both commands in turn and print medians and their ratio."""
    runs = int(sys.argv[1]) if len(sys.argv) > 1 else 9
    seconds(BARE), seconds(WHOLE)  # once to warm the file cache
    pairs = [(seconds(BARE), seconds(WHOLE)) for _ in range(runs)]
    bare, whole = (statistics.median(column) for column in zip(*pairs, strict=True))
    print(f"import cantera, pandas: {bare:.2f} s; fuelair assess: {whole:.2f} s (median of {runs})")
    print(f"{whole / bare:.1f} times the time")


if __name__ == "__main__":
    main()
