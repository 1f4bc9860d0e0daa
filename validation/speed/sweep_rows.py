"""A whole `fuelair sweep` to Parquet, from start of the process to the finished file: rows a second and peak memory.

The workboat case without residual gas and, as it stands, with 3 % of it (which needs some six passes a row); every
quantity of the model, three keys varied, two cores. Run it by hand: python validation/speed/sweep_rows.py [rows ...]
"""

from __future__ import annotations

import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import fuelair

BOAT = Path(fuelair.__file__).parent / "demos" / "workboat.toml"
OVER = ("charge.equivalence_ratio=0.3:0.7", "engine.compression_ratio=13:18", "charge.pressure=1.5bar:3.2bar")
SIZES = (10_000, 100_000, 1_000_000)


def main() -> None:
    """Print a line a size and case."""
    sizes = [int(a) for a in sys.argv[1:]] or SIZES
    with tempfile.TemporaryDirectory() as folder:
        for name, residual in (("no residual gas", "0"), ("residual 3 %", "0.03")):
            case = Path(folder) / "case.toml"
            text = BOAT.read_text(encoding="utf-8").replace('residual_fraction = "3 %"', f"residual_fraction = {residual}")
            case.write_text(text, encoding="utf-8")
            for size in sizes:
                out = Path(folder) / f"{residual}-{size}.parquet"
                over = [word for one in OVER for word in ("--over", one)]
                design = ["--design", "latin-hypercube", "--rows", str(size)]
                command = [sys.executable, "-m", "fuelair", "sweep", str(case), *over, *design, "--out", str(out)]
                start = time.perf_counter()
                subprocess.run(command, check=True, stdout=subprocess.DEVNULL, cwd=folder)
                took = time.perf_counter() - start
                most = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024
                print(
                    f"{name}: {size:>9,} rows in {took:6.1f} s, {size / took:>9,.0f} rows a second, largest so far {most:,.0f} MB"
                )


if __name__ == "__main__":
    main()
