"""Random cases there and back: a figure is computed, then `find` must give back the input that made it.

    python validation/campaigns/inverse.py --cases 10000 --engine compiled

Cases of all three combustion modes; a random key, a random quantity. Counted: cases that cannot be solved at all, cases whose
quantity does not depend on the key (found as such), and for the rest whether the target is met to 1e-9 by every root and
whether the original input is among them within 1e-9 times the condition number. Any miss is printed and ends with exit code 1.
"""

from __future__ import annotations

import argparse
import sys
from dataclasses import dataclass, field
from random import Random

from fuelair import Case, InputError
from fuelair.study.batch import Study
from fuelair.study.crossings import NEAR_ZERO, POINTS
from fuelair.study.target import Found, find

MET = 1e-9
SAY_EVERY = 500
"""Cases between two lines on standard error."""
QUANTITIES = (
    "peak_pressure_Pa", "peak_temperature_K", "compression_pressure_Pa", "compression_temperature_K", "exhaust_temperature_K",
    "release_pressure_Pa", "imep_gross_Pa", "indicated_efficiency", "work_J_per_kg", "isfc_kg_per_J",
)  # fmt: skip
MODES = ("constant-volume", "constant-pressure", "pressure-limited")


@dataclass
class Tally:
    """What came of the cases."""

    unsolved: int = 0
    flat: int = 0
    met: int = 0
    roots: int = 0
    worst_target: float = 0.0
    worst_input: float = 0.0
    misses: list[str] = field(default_factory=list)

    def __str__(self) -> str:
        return (
            f"{self.met} met with {self.roots} roots, {self.flat} not determined by the key, {self.unsolved} without a solution, "
            f"{len(self.misses)} missed; worst miss of the target {self.worst_target:.1e}, of the input {self.worst_input:.1e} "
            "condition numbers"
        )


def case_of(random: Random, mode: str) -> Case:
    """A random case of a combustion mode."""
    direct = mode != "constant-volume"
    r, pressure, temperature = random.uniform(12, 20) if direct else random.uniform(7, 14), random.uniform(0.8e5, 4e5), 0.0
    temperature = random.uniform(300.0, 400.0)
    combustion: dict[str, object] = {"heat_addition": mode, "combustion_efficiency": random.uniform(0.9, 1.0)}
    if mode == "pressure-limited":
        combustion["pressure_limit"] = min(pressure * r**1.33 * random.uniform(1.2, 1.9), 590e5)
    charge: dict[str, object] = {"equivalence_ratio": random.uniform(0.3, 0.85) if direct else random.uniform(0.5, 1.3)}
    if random.random() < 0.25:
        charge |= {"intake_pressure": pressure, "intake_temperature": temperature, "residual_fraction": "solve"}
        charge["exhaust_pressure"] = pressure * random.uniform(0.7, 1.3)
    else:
        charge |= {"pressure": pressure, "temperature": temperature, "residual_fraction": random.uniform(0.01, 0.08)}
    fuel = random.choice(("diesel", "n-dodecane", "methanol") if direct else ("methane", "gasoline", "hydrogen"))
    return Case.from_dict(
        {
            "engine": {"compression_ratio": r},
            "fuel": {"name": fuel, "admission": "direct" if direct else "premixed"},
            "charge": charge,
            "combustion": combustion,
        }
    )


def keys_of(case: Case) -> list[str]:
    """Keys of a case that a question may vary."""
    intake = case.charge.intake_pressure is not None
    keys = ["engine.compression_ratio", "charge.equivalence_ratio", "combustion.combustion_efficiency"]
    keys += ["charge.intake_pressure", "charge.intake_temperature"] if intake else ["charge.pressure", "charge.temperature"]
    keys += ["charge.exhaust_pressure"] if intake else ["charge.residual_fraction"]
    return keys + (["combustion.pressure_limit"] if case.combustion.pressure_limit else [])


def run(cases: int, *, seed: int = 1, engine: str | None = None, points: int = POINTS, wide: bool = True) -> Tally:
    """There and back through ``cases`` cases; ``wide``: half of them over the key's whole range, else around the input."""
    random, tally = Random(seed), Tally()
    for number in range(cases):
        if number and number % SAY_EVERY == 0:
            print(f"{number}: {tally}", file=sys.stderr, flush=True)
        mode = MODES[number % len(MODES)]
        case = case_of(random, mode)
        key, quantity = random.choice(keys_of(case)), random.choice(QUANTITIES)
        value = float(case.values()(key))
        span = None if wide and number % 2 else (value * random.uniform(0.6, 0.95), value * random.uniform(1.05, 1.6))
        label = f"case {number} ({mode}, {key} = {value!r}, {quantity})"
        try:
            _one(case, key, value, quantity, span, engine, points, label, tally)
        except InputError as error:  # a random range beyond what the key allows
            raise RuntimeError(f"{label}: {error}") from error
    return tally


def _one(
    case: Case, key: str, value: float, quantity: str, span: tuple[float, float] | None, engine: str | None, points: int,
    label: str, tally: Tally,
) -> None:  # fmt: skip
    rows = Study(case, [key], engine=engine, quantities=[quantity]).run({key: [value]})
    if rows.status[0]:
        tally.unsolved += 1
        return
    target = float(rows.figures[quantity][0])
    low, high = (None, None) if span is None else _inside(key, *span)
    found = find(case, key, quantity, target, low=low, high=high, engine=engine, points=points)
    if found.outcome == "not-determined" or any(a <= value <= b for a, b in found.search.levels):
        tally.flat += 1
        return
    _judge(found, value, target, label, tally)


def _inside(key: str, low: float, high: float) -> tuple[float, float]:
    from fuelair.case import keys

    kind = keys.numbers()[key]
    return max(low, kind.low), min(high, kind.high)


def _judge(found: Found, value: float, target: float, label: str, tally: Tally) -> None:
    scale = max(abs(value), NEAR_ZERO * (found.varied.high - found.varied.low))
    away = [abs(root.value - value) / scale / root.condition for root in found.roots]
    off = [abs(root.figures[found.quantity] - target) / abs(target) for root in found.roots]
    if not away or not min(away) <= MET or not max(off) <= MET:
        tally.misses.append(f"{label}: {found.verdict}; {away} {off}")
        return
    tally.met += 1
    tally.roots += len(found.roots)
    tally.worst_input, tally.worst_target = max(tally.worst_input, min(away)), max(tally.worst_target, *off)


def main() -> int:
    """Run from the command line."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--cases", type=int, default=100)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--engine", choices=("reference", "compiled"))
    parser.add_argument("--points", type=int, default=POINTS)
    given = parser.parse_args()
    tally = run(given.cases, seed=given.seed, engine=given.engine, points=given.points)
    print(tally)
    print(*tally.misses, sep="\n")
    return 1 if tally.misses else 0


if __name__ == "__main__":
    sys.exit(main())
