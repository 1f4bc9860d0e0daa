"""Random equilibrium states through the compiled engine, a part of them also through the reference.

Fuels with and without carbon, hydrogen and nitrogen in air, in air without nitrogen and alone with oxygen; equivalence ratio
0.05 to 2.5, one state in twenty exactly stoichiometric; 200 to 5500 K and 0.1 to 600 bar (both log-uniform), all pairs
of properties. Prints what was solved, refusals by name, and the worst residuals and differences.

Run it by hand: python validation/campaigns/states.py [states of the compiled engine] [states also of the reference] [seed]
"""

from __future__ import annotations

import sys
from collections import Counter
from dataclasses import dataclass, field

import numpy as np

from fuelair import fuel as fuels
from fuelair.fuel import Vapour
from fuelair.gas.cantera_gas import CanteraGas
from fuelair.gas.compiled.batch_gas import BatchGas
from fuelair.gas.complete import oxygen_excess
from fuelair.gas.engine import GasState, Status, total, weighted
from fuelair.gas.species import FUEL, UNBURNED, SpeciesTable, build

FUELS = ("hydrogen", "methane", "methanol", "ammonia", "iso-octane", "diesel")
CARBON_MONOXIDE = Vapour("carbon monoxide", (("C", 1.0), ("O", 1.0)), 28.0101, 10.103e6, (("CO", 1.0),))
"""A fuel without hydrogen; heating value from its enthalpy of formation, JANAF, from memory."""
OXIDIZERS = ({"N2": 0.78084, "O2": 0.209476, "Ar": 0.00934, "CO2": 0.0004}, {"O2": 0.21, "Ar": 0.79}, {"O2": 1.0})
PAIRS = ("TP", "TV", "HP", "UV", "SP", "SV", "ST")
BLOCK = 2000
TRACE, LIMIT = 1e-10, 1e-6
"""Smallest mole fraction that is compared, and the relative difference that asks for an explanation."""


@dataclass
class Tally:
    """Counts and worst cases."""

    states: int = 0
    compared: int = 0
    explained: int = 0
    ends: Counter = field(default_factory=Counter)
    other_ends: Counter = field(default_factory=Counter)
    worst: dict = field(default_factory=dict)

    def note(self, name: str, values: np.ndarray, where: str) -> None:
        """Keep the largest value of a kind and where it was found."""
        if len(values) and np.nanmax(values) > self.worst.get(name, (0.0, ""))[0]:
            self.worst[name] = float(np.nanmax(values)), where


def mixtures(table: SpeciesTable, rng: np.random.Generator, n: int) -> tuple[np.ndarray, np.ndarray]:
    """Amounts (N, S) [kmol/kg] of fuel in a random oxidizer, a part of it unburned, and equivalence ratios (N,)."""
    air = np.array([table.amounts(OXIDIZERS[k]) for k in rng.integers(0, len(OXIDIZERS), n)])
    pure = np.zeros((1, len(table)))
    pure[0, table.index(FUEL)] = 1.0 / table.molar_mass[table.index(FUEL)]
    phi = np.where(rng.random(n) < 0.05, 1.0, rng.uniform(0.05, 2.5, n))
    fuel = phi * 2.0 * air[:, table.index("O2")] / -oxygen_excess(table, pure)
    unburned = np.where(rng.random(n) < 0.2, 0.02, 0.0)
    out = air + (fuel * (1.0 - unburned))[:, None] * pure
    out[:, table.index(UNBURNED)] += fuel * unburned * pure[0, table.index(FUEL)]
    return out / (1.0 + fuel)[:, None], phi


def judge(tally: Tally, table: SpeciesTable, pair: str, x: np.ndarray, y: np.ndarray, amounts: np.ndarray, s: GasState) -> None:
    """Residuals of elements and of the pair itself, from the composition alone."""
    good = s.status == Status.OK
    atoms = weighted(amounts, table.atoms)
    miss = np.abs(weighted(s.amounts, table.atoms) - atoms).max(axis=1) / atoms.max(axis=1)
    tally.note(f"{pair}: elements", miss[good], "")
    there = {"T": s.T, "H": s.h, "U": s.u, "S": s.s}[pair[0]]
    scale = {"T": s.T, "S": np.abs(s.s)}.get(pair[0], s.cp * s.T)
    tally.note(f"{pair}: first property", (np.abs(there - x) / scale)[good], "")
    second = {"P": s.p, "V": s.v, "T": s.T}[pair[1]]
    tally.note(f"{pair}: second property", (np.abs(second / y - 1.0))[good], "")


def compare(
    tally: Tally, table: SpeciesTable, pair: str, amounts: np.ndarray, s: GasState, r: GasState, phi: np.ndarray, name: str
) -> None:
    """Differences between the engines where both solved."""
    for i, j in zip(s.status, r.status, strict=True):
        if i != j:
            tally.other_ends[f"compiled {Status(int(i)).label}, reference {Status(int(j)).label}"] += 1
    both = np.flatnonzero((s.status == Status.OK) & (r.status == Status.OK))
    tally.compared += len(both)
    own, other = s.mole_fractions()[both], r.mole_fractions()[both]
    there = other > TRACE
    apart = np.where(there, np.abs(own / np.where(there, other, 1.0) - 1.0), 0.0)
    # a trace is as good as the oxygen balance that makes it: what the reference leaves open of it, as a mole fraction
    still_open = np.abs(oxygen_excess(table, r.amounts[both]) - oxygen_excess(table, amounts[both])) / total(r.amounts[both])
    moved = np.where(apart > LIMIT, np.abs(own - other), 0.0).max(axis=1)
    explained = (moved > 0.0) & (still_open > 0.1 * moved)
    tally.explained += int(explained.sum())
    for label, rows in (("x, explained by the reference's open oxygen balance", explained), ("x", ~explained)):
        if rows.any():
            i, j = np.unravel_index(apart[rows].argmax(), apart[rows].shape)
            k = both[np.flatnonzero(rows)[i]]
            where = (
                f"{pair} {name} {table.names[j]} x {other[rows][i, j]:.1e} phi {phi[k]:.4f} {r.T[k]:.0f} K {r.p[k] / 1e5:.2g} bar"
            )
            tally.note(label, apart[rows].max(axis=1), where)
    T = np.abs(s.T[both] / r.T[both] - 1.0)
    if len(T):
        k = both[T.argmax()]
        tally.note("T", T, f"{pair} {name} phi {phi[k]:.4f} {r.T[k]:.0f} K {r.p[k] / 1e5:.2g} bar")


def main() -> None:
    """Run the campaign and print its summary."""
    given = [int(a) for a in sys.argv[1:]]
    size, also, seed = (given + [20000, 2000, 1][len(given) :])[:3]
    rng, fast, slow, tally = np.random.default_rng(seed), BatchGas(), CanteraGas(), Tally()
    tables = {name: build(fuels.load(name).vapour) for name in FUELS} | {CARBON_MONOXIDE.name: build(CARBON_MONOXIDE)}
    names = list(tables)
    while tally.states < size:
        name = names[rng.integers(len(names))]
        table, n = tables[name], min(BLOCK, size - tally.states)
        amounts, phi = mixtures(table, rng, n)
        T = np.exp(rng.uniform(np.log(200.0), np.log(5500.0), n))
        p = np.exp(rng.uniform(np.log(0.1e5), np.log(600e5), n))
        base = fast.state(table, "TP", T, p, amounts, "equilibrium")
        pair = PAIRS[rng.integers(len(PAIRS))]
        x = {"T": T, "H": base.h, "U": base.u, "S": base.s}[pair[0]]
        y = {"P": p, "V": base.v, "T": T}[pair[1]]
        s = fast.state(table, pair, x, y, amounts, "equilibrium")
        tally.states += n
        tally.ends.update(Counter(Status(int(k)).label for k in s.status))
        judge(tally, table, pair, x, y, amounts, s)
        tally.note("round trip of T", np.abs(s.T / T - 1.0)[s.status == Status.OK], f"{pair} {name}")
        m = min(max(also * n // size, 0), n)
        if m:
            r = slow.state(table, pair, x[:m], y[:m], amounts[:m], "equilibrium")
            picked = GasState(**{k: getattr(s, k)[:m] for k in GasState.__slots__})
            compare(tally, table, pair, amounts[:m], picked, r, phi[:m], name)
    print(f"{tally.states} states of the compiled engine, seed {seed}: {dict(tally.ends)}")
    print(
        f"{tally.compared} compared with the reference; ends that differ: {dict(tally.other_ends)}; {tally.explained} explained"
    )
    for name, (value, where) in sorted(tally.worst.items()):
        print(f"  {name:52} {value:.1e}  {where}")


if __name__ == "__main__":
    main()
