"""A gas whose answers are closed formulas: constant cp of 3.5 R a mole, nothing dissociates.

It meets the engine's seam with its own arithmetic (no polynomial, no iteration), so that tests of the cycle can
be compared with textbook formulas. Its fuel is C2H4: C2H4 + 3 O2 -> 2 CO2 + 2 H2O keeps the number of moles, so the
heating value is the same at every temperature and volume.
"""

from __future__ import annotations

import numpy as np

from fuelair.fuel import Fuel, Vapour
from fuelair.gas.complete import composition
from fuelair.gas.engine import GasState, Status, total
from fuelair.gas.polynomials import R
from fuelair.gas.species import SpeciesTable

K = 1.4
CP = K / (K - 1.0)  # cp over R, per mole
HEATING_VALUE = 47e6
REFERENCE_PRESSURE = 101325.0
ELEMENTS = ("C", "H", "O", "N", "Ar")
ATOMS = {
    "CO2": (1, 0, 2, 0, 0),
    "CO": (1, 0, 1, 0, 0),
    "H2O": (0, 2, 1, 0, 0),
    "H2": (0, 2, 0, 0, 0),
    "O2": (0, 0, 2, 0, 0),
    "N2": (0, 0, 0, 2, 0),
    "Ar": (0, 0, 0, 0, 1),
    "fuel": (2, 4, 0, 0, 0),
    "unburned-fuel": (2, 4, 0, 0, 0),
}
WEIGHTS = np.array([12.0, 1.0, 16.0, 14.0, 40.0])
VAPOUR = Vapour("ethylene", (("C", 2.0), ("H", 4.0)), 28.0, HEATING_VALUE, (("C2H4", 1.0),))
FUEL = Fuel("ethylene", "ethylene with constant specific heat", "own", VAPOUR)


def fake_table() -> SpeciesTable:
    atoms = np.array(list(ATOMS.values()), float)
    mass = atoms @ WEIGHTS
    n = len(mass)
    data = np.zeros((n, 9))
    data[:, 0] = CP
    burns = np.array([name.endswith("fuel") for name in ATOMS])
    data[burns, 5] = HEATING_VALUE * mass[burns] / R
    return SpeciesTable(
        names=tuple(ATOMS),
        elements=ELEMENTS,
        atoms=atoms,
        molar_mass=mass,
        low=data,
        high=data.copy(),
        t_min=np.full(n, 1.0),
        t_max=np.full(n, 1e5),
        forms=~burns,
        inert=np.array([name == "unburned-fuel" for name in ATOMS]),
        graphite=np.zeros((2, 9)),
        reference_pressure=REFERENCE_PRESSURE,
    )


class FakeGas:
    """The engine's seam in closed form; counts its calls."""

    name = "fake"
    fuel = FUEL
    heating_value = HEATING_VALUE
    k = K

    def __init__(self) -> None:
        self.table = fake_table()
        self.calls = 0

    def state(self, table, pair, x, y, amounts, chemistry="frozen", guess=None):
        self.calls += 1
        x, y, n = np.array(x, float), np.broadcast_to(np.array(y, float), np.shape(x)).copy(), np.array(amounts, float)
        if chemistry != "frozen":
            n, _ = composition(table, n, np.full(len(x), 2000.0))
        r = R * total(n)
        formation = R * np.sum(n * table.low[:, 5], axis=1)
        with np.errstate(divide="ignore", invalid="ignore"):
            parts = np.where(n > 0.0, n * np.log(n / total(n)[:, None]), 0.0)
        mixing = -R * np.sum(parts, axis=1)
        cp, cv = CP * r, (CP - 1.0) * r
        with np.errstate(invalid="ignore", divide="ignore"):
            T = {
                "TP": lambda: x,
                "TV": lambda: x,
                "ST": lambda: y,
                "HP": lambda: (x - formation) / cp,
                "UV": lambda: (x - formation) / cv,
                "SP": lambda: np.exp((x - mixing + r * np.log(y / REFERENCE_PRESSURE)) / cp),
                "SV": lambda: np.exp((x - mixing + r * np.log(r / (y * REFERENCE_PRESSURE))) / cv),
            }[pair]()
            if pair == "ST":
                p = REFERENCE_PRESSURE * np.exp((cp * np.log(T) + mixing - x) / r)
            else:
                p = y if pair[1] == "P" else r * T / y
            s = cp * np.log(T) + mixing - r * np.log(p / REFERENCE_PRESSURE)
            bad = ~(T > 0.0) | ~(p > 0.0)
            return GasState(
                T=T,
                p=p,
                v=r * T / p,
                u=cv * T + formation,
                h=cp * T + formation,
                s=s,
                cp=cp,
                sound=np.sqrt(np.abs(K * r * T)),
                amounts=n,
                status=np.where(bad, Status.NO_SOLUTION, Status.OK).astype(np.int8),
                iterations=np.zeros(len(x), np.int32),
            )
