"""Equilibrium states and whole cycles: the compiled engine against scripts that use Cantera alone.

Everything runs in one process, ours and the peers in turn, several rounds; every figure is a ratio taken within a
round, its smallest, middle and largest printed. The peers (`peer_scripts.py`) compute nine quantities a cycle; ours
computes the same nine and, unasked, the blowdown, the exhaust and the ledger as well. What both compute is compared first.

Run it by hand on a quiet machine: python validation/speed/studies.py [rounds] [rows of the large study]
"""

from __future__ import annotations

import statistics
import sys
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

import cantera as ct
import numpy as np
import peer_scripts as peers

from fuelair import Case
from fuelair import fuel as fuels
from fuelair.gas.compiled.batch_gas import BatchGas
from fuelair.gas.species import build
from fuelair.study.batch import Study

MODES = ("constant-volume", "constant-pressure", "pressure-limited")
LIMIT = 180e5
STATES, BATCHES, PEER_STATES, PEER_CYCLES, CYCLES = 4096, 32, 200, 100, 131_072
NAMES = (
    "compression_temperature_K", "compression_pressure_Pa", "peak_temperature_K", "peak_pressure_Pa", "release_temperature_K",
    "release_pressure_Pa", "work_J_per_kg", "imep_gross_Pa", "indicated_efficiency",
)  # fmt: skip
KEYS = ("charge.equivalence_ratio", "engine.compression_ratio", "charge.pressure", "charge.temperature")


def seconds(work: Callable[[], object]) -> float:
    """Wall time of one call."""
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def spread(values: list[float], form: str = ".0f") -> str:
    """Smallest, middle and largest."""
    return " / ".join(f"{v:{form}}" for v in (min(values), statistics.median(values), max(values)))


def study(mode: str, closed: bool = False) -> Study:
    """A study of premixed methane over equivalence ratio, compression ratio, pressure and temperature."""
    charge = {"equivalence_ratio": 0.8, "pressure": 1e5, "temperature": 330.0}
    keys = KEYS
    if closed:
        charge = {"equivalence_ratio": 0.8, "intake_pressure": 1e5, "intake_temperature": 330.0, "exhaust_pressure": 1.05e5,
                  "residual_fraction": "solve"}  # fmt: skip
        keys = (*KEYS[:2], "charge.intake_pressure", "charge.intake_temperature", "fuel.temperature")
    case = {
        "engine": {"compression_ratio": 11.0},
        "fuel": {"name": "methane", "admission": "premixed"},
        "charge": charge,
        "combustion": {"heat_addition": mode} | ({"pressure_limit": LIMIT} if mode == "pressure-limited" else {}),
    }
    return Study(Case.from_dict(case), keys, engine="compiled", quantities=NAMES)


def columns(of: Study, n: int) -> dict[str, np.ndarray]:
    """Random rows of the compression-ignition range, the same for ours and the peers."""
    rng = np.random.default_rng(5)
    low, high = (0.2, 12.0, 0.9e5, 300.0), (1.05, 20.0, 2.5e5, 370.0)
    out = {key: rng.uniform(a, b, n) for key, a, b in zip(of.keys, low, high, strict=False)}
    return out | dict.fromkeys(of.keys[4:], out[of.keys[3]])  # the peer's fuel is as warm as its air


def arguments(of: dict[str, np.ndarray], n: int) -> list[tuple[float, ...]]:
    """Rows as arguments of a peer."""
    return [tuple(float(v) for v in row) for row in zip(*(values[:n] for values in list(of.values())[:4]), strict=True)]


def compare_states(rounds: int) -> None:
    """Equilibrium states of lean and rich burned gas, 1000 to 3200 K, 1 to 300 bar."""
    table, gas, engine, rng = build(fuels.load("methane").vapour), peers.tuned_gas(), BatchGas(), np.random.default_rng(3)
    dry = table.amounts(peers.AIR)
    phi = rng.uniform(0.2, 1.3, STATES)
    amounts = np.tile(dry, (STATES, 1))
    amounts[:, table.index("CH4")] += phi * dry[table.index("O2")] / peers.STOICHIOMETRIC
    amounts /= (amounts * table.molar_mass).sum(axis=1)[:, None]
    T, p = rng.uniform(1000.0, 3200.0, STATES), np.exp(rng.uniform(np.log(1e5), np.log(300e5), STATES))
    base = engine.state(table, "TP", T, p, amounts, "equilibrium")
    order = [table.index(name) for name in peers.SPECIES]
    print(f"Equilibrium states, {len(order)} species, one thread: times the speed of Cantera in a loop (min / median / max)")
    for pair in ("TP", "HP", "UV", "SP", "SV"):
        x = {"T": T, "H": base.h, "U": base.u, "S": base.s}[pair[0]]
        y = {"P": p, "V": base.v}[pair[1]]

        def loop(pair: str = pair, x: np.ndarray = x, y: np.ndarray = y) -> np.ndarray:
            found = np.empty(PEER_STATES)
            for i in range(PEER_STATES):
                gas.TPX = 2500.0, 5e6, amounts[i, order]
                setattr(gas, pair, (x[i], y[i]))
                gas.equilibrate(pair, solver="element_potential")
                found[i] = gas.T
            return found

        def ours(pair: str = pair, x: np.ndarray = x, y: np.ndarray = y) -> np.ndarray:
            for _ in range(BATCHES - 1):
                engine.state(table, pair, x, y, amounts, "equilibrium")
            return engine.state(table, pair, x, y, amounts, "equilibrium").T

        apart = np.abs(ours()[:PEER_STATES] / loop() - 1.0).max()
        times = [(seconds(loop) / PEER_STATES, seconds(ours) / (STATES * BATCHES)) for _ in range(rounds)]
        micro = [1e6 * statistics.median(column) for column in zip(*times, strict=True)]
        ratio = spread([a / b for a, b in times])
        print(f"  {pair}  {ratio:>18}   ({micro[0]:.0f} us and {micro[1]:.2f} us a state; T apart by {apart:.0e})")


def compare_cycles(rounds: int) -> None:
    """Ideal cycles of premixed methane, residual gas given (none) and solved."""
    plain, tuned = peers.plain_gas(), peers.tuned_gas()
    print("Ideal cycles, one thread: times the speed of the tuned and of the plain script (min / median / max)")
    for mode in (*MODES, "closed residual"):
        closed = mode == "closed residual"
        own = study("constant-volume" if closed else mode, closed)
        rows = columns(own, CYCLES)
        cases = arguments(rows, PEER_CYCLES)

        rest = (1.05e5,) if closed else (mode, LIMIT)

        def by(cycle: Callable[..., tuple[float, ...]], gas: ct.Solution, cases: list = cases, rest: tuple = rest) -> np.ndarray:
            return np.array([cycle(gas, *case, *rest) for case in cases])

        cycle = peers.tuned_closed_cycle if closed else peers.tuned_cycle
        found = own.run(rows).figures
        reference = by(cycle, tuned)
        apart = max(np.abs(found[k][:PEER_CYCLES] / reference[:, i] - 1.0).max() for i, k in enumerate(NAMES))
        times = []
        for _ in range(rounds):
            a = seconds(lambda cycle=cycle: by(cycle, tuned)) / PEER_CYCLES
            b = np.nan if closed else seconds(lambda: by(peers.plain_cycle, plain)) / PEER_CYCLES
            times.append((a, b, seconds(lambda own=own, rows=rows: own.run(rows)) / CYCLES))
        micro = [1e6 * statistics.median(column) for column in zip(*times, strict=True)]
        against_plain = "" if closed else spread([b / c for _, b, c in times])
        print(
            f"  {mode:18} {spread([a / c for a, _, c in times]):>18}  {against_plain:>20}   "
            f"({micro[0]:.0f}, {micro[1]:.0f} and {micro[2]:.2f} us a cycle; apart by {apart:.0e})"
        )


def grow(rounds: int, most: int) -> None:
    """Rows a second of one study from one row to many, on one and two threads."""
    own = study("constant-volume")
    print("Rows a second, constant-volume study (min / median / max)")
    for n in (1, 100, 10_000, most):
        rows = columns(own, n)
        parts = [{k: v[i : i + 32768] for k, v in rows.items()} for i in range(0, n, 32768)]
        one = [n / seconds(lambda rows=rows: own.run(rows)) for _ in range(rounds)]
        two = []
        if len(parts) > 1:
            with ThreadPoolExecutor(2) as pool:
                two = [n / seconds(lambda parts=parts: list(pool.map(own.run, parts))) for _ in range(rounds)]
        print(f"  {n:>9,}  one thread {spread(one, ',.0f'):>30}" + (f"   two threads {spread(two, ',.0f'):>30}" if two else ""))


def main() -> None:
    """Print all comparisons."""
    rounds = int(sys.argv[1]) if len(sys.argv) > 1 else 5
    most = int(sys.argv[2]) if len(sys.argv) > 2 else 1_000_000
    ct.suppress_thermo_warnings()
    compare_states(rounds)
    compare_cycles(rounds)
    grow(rounds, most)


if __name__ == "__main__":
    main()
