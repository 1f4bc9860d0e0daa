"""The stages of the cycle, each over arrays of N cases: compress, burn, expand.

Every function takes numbers and a gas engine, never a case. Volumes are specific to the kg of gas
that enters the stage. Sources: first and second law; the pressure-limited form is
H3 = U2 + m_f h_f + p3 V2, constant volume up to the limit, then constant pressure.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, fields
from typing import Literal

import numpy as np

from fuelair.gas.complete import oxygen_excess
from fuelair.gas.engine import Array, Chemistry, Codes, Engine, GasState, Index, Mask, Status, taken, worst
from fuelair.gas.graphite import carbon_activity
from fuelair.gas.species import FUEL, UNBURNED, SpeciesTable
from fuelair.roots import bracketed

HeatAddition = Literal["constant-volume", "constant-pressure", "pressure-limited"]
Expansion = Literal["equilibrium", "frozen"]

SPLIT_TOLERANCE = 1e-10
"""Width at which the share of fuel burned at constant volume is found."""
LIMIT_SLACK = 1e-12
"""A volume this close above that at constant volume counts as equal: the limit is then just reached."""
POLYTROPIC_WIDTH = 1e-11
"""Width at which the end temperature of polytropic compression is found [K]."""
CARBON_WIDTH = 1e-3
"""Width at which the temperature where graphite would begin to form is found [K]."""


@dataclass(frozen=True, slots=True)
class Compression:
    """End of compression with what it took, per kg of gas: work done on the gas and heat taken in [J/kg]."""

    state: GasState
    work: Array
    heat: Array


@dataclass(frozen=True, slots=True)
class Burn:
    """End of combustion.

    Attributes
    ----------
    state : burned gas, per kg present (N,).
    expansion_work : p (V3 - V2) of the constant-pressure part [J/kg present].
    volume_ratio : cut-off ratio V3 / V2 [-].
    limited : where the pressure limit acts.
    status : first failure.
    """

    state: GasState
    expansion_work: Array
    volume_ratio: Array
    limited: Mask
    status: Codes


@dataclass(frozen=True, slots=True)
class ClosedPart:
    """The gas between intake closing and exhaust opening: end of compression, combustion, release; what burned (N, S)."""

    compression: Compression
    burn: Burn
    release: GasState
    status: Codes
    reactants: Array


@dataclass(frozen=True, slots=True)
class Passage(ClosedPart):
    """The gas once through the cycle: the closed part, and what stays after blowdown."""

    remaining: GasState


def compress(
    engine: Engine, table: SpeciesTable, start: GasState, volume_ratio: Array, exponent: Array | None = None
) -> Compression:
    """Compress at frozen composition from ``start`` to its volume divided by ``volume_ratio``.

    Isentropic, or along p v^exponent = const if exponents (N,) are given, the heat then booked.
    """
    v = start.v / volume_ratio
    if exponent is None:
        state = engine.state(table, "SV", start.s, v, start.amounts)
        return Compression(state, state.u - start.u, np.zeros_like(v))
    pressure = start.p * volume_ratio**exponent

    def miss(T: Array) -> Array:
        return np.asarray(engine.state(table, "TV", T, v, start.amounts).p / pressure - 1.0)

    ideal = start.T * volume_ratio ** (exponent - 1.0)
    T, _ = bracketed(miss, 0.5 * ideal, 2.0 * ideal, width=POLYTROPIC_WIDTH)
    state = engine.state(table, "TV", T, v, start.amounts)
    with np.errstate(divide="ignore", invalid="ignore"):
        work = (state.p * state.v - start.p * start.v) / (exponent - 1.0)
    work = np.where(exponent == 1.0, start.p * start.v * np.log(volume_ratio), work)
    return Compression(state, work, np.asarray(state.u - start.u - work))


def burn(
    engine: Engine,
    table: SpeciesTable,
    compressed: GasState,
    *,
    reactants: Array,
    injected: Array,
    fuel_enthalpy: Array,
    heat_addition: HeatAddition,
    pressure_limit: Array,
    chemistry: Chemistry,
) -> Burn:
    """Adiabatic combustion of all gas and injected fuel.

    Parameters
    ----------
    compressed : gas before combustion, per kg of it.
    reactants : composition of gas plus injected fuel (N, S) [kmol/kg present].
    injected : fuel mass that joins per kg of compressed gas [kg/kg].
    fuel_enthalpy : of that fuel as supplied [J/kg fuel].
    pressure_limit : [Pa], used by ``pressure-limited``.
    chemistry : ``equilibrium`` or ``complete``.
    """
    whole = 1.0 + injected
    u2 = (compressed.u + injected * fuel_enthalpy) / whole
    h2 = (compressed.h + injected * fuel_enthalpy) / whole
    v2 = compressed.v / whole
    n = len(v2)
    status = np.zeros(n, np.int8)
    if heat_addition == "constant-pressure":
        state = engine.state(table, "HP", h2, compressed.p, reactants, chemistry)
        limited = np.ones(n, np.bool_)
    else:

        def at_volume(rows: Index) -> GasState:
            return engine.state(table, "UV", taken(u2, rows), taken(v2, rows), taken(reactants, rows), chemistry)

        limited = np.zeros(n, np.bool_)
        if heat_addition == "constant-volume":
            state = at_volume(np.arange(n))
        else:  # held at the limit the gas takes more room than it has at constant volume, or the limit is not reached
            held = engine.state(table, "HP", u2 + pressure_limit * v2, pressure_limit, reactants, chemistry)
            limited = held.v > v2 * (1.0 + LIMIT_SLACK)
            state = replaced(held, ~limited, at_volume)
            status[compressed.p > pressure_limit] = Status.LIMIT_BELOW_COMPRESSION
    work = np.where(limited, state.p * (state.v - v2), 0.0)
    return Burn(state, work, np.where(limited, state.v / v2, 1.0), limited, worst(status, compressed.status, state.status))


def end_of_constant_volume(
    engine: Engine,
    table: SpeciesTable,
    compressed: GasState,
    *,
    reactants: Array,
    injected: Array,
    fuel_enthalpy: Array,
    pressure_limit: Array,
    limited: Mask,
    chemistry: Chemistry,
) -> tuple[GasState, Array]:
    """State at which the pressure reaches its limit at constant volume, and the share of fuel burned by then.

    Fuel that is not yet burned is not yet there (injected) or still vapour (admitted before).
    Where nothing is limited, share and state are NaN.
    """
    burns, rests = table.index(FUEL), table.index(UNBURNED)
    late = injected > 0.0

    def at(share: Array) -> GasState:
        present = 1.0 + np.where(late, injected * share, 0.0)
        whole = reactants * (1.0 + injected)[:, None]
        waiting = whole.copy()
        waiting[:, rests] += waiting[:, burns] * (1.0 - share)
        waiting[:, burns] *= share
        arriving = compressed.amounts + share[:, None] * (whole - compressed.amounts)
        amounts = np.where(late[:, None], arriving, waiting) / present[:, None]
        u = (compressed.u + (present - 1.0) * fuel_enthalpy) / present
        u = np.where(limited, u, np.nan)
        return engine.state(table, "UV", u, compressed.v / present, amounts, chemistry)

    n = len(injected)
    share, _ = bracketed(lambda x: at(x).p - pressure_limit, np.zeros(n), np.ones(n), width=SPLIT_TOLERANCE)
    share = np.where(limited, share, np.nan)
    return at(share), share


def expand(
    engine: Engine,
    table: SpeciesTable,
    burned: GasState,
    volume: Array,
    expansion: Expansion,
    freeze_temperature: Array | None = None,
) -> GasState:
    """Isentropic expansion of burned gas to a specific ``volume`` [m3/kg].

    ``equilibrium`` shifts with the state; with a ``freeze_temperature`` [K] it shifts down to that
    temperature and is frozen below. Where the gas would form solid carbon on the way, it is frozen
    from there on (see `carbon_frozen`).
    """
    if expansion == "frozen":
        return engine.state(table, "SV", burned.s, volume, burned.amounts)
    shifting = engine.state(table, "SV", burned.s, volume, burned.amounts, "equilibrium")
    if freeze_temperature is not None:
        amounts = freeze_composition(engine, table, burned, shifting, freeze_temperature)
        shifting = replaced(
            shifting, freeze_temperature > shifting.T, lambda i: engine.state(table, "SV", burned.s[i], volume[i], amounts[i])
        )
    return carbon_frozen(engine, table, burned, shifting, volume)


def freeze_composition(engine: Engine, table: SpeciesTable, burned: GasState, released: GasState, T: Array) -> Array:
    """Composition (N, S) with which an expansion from ``burned`` to ``released`` leaves equilibrium at ``T``.

    The equilibrium at ``T`` on the isentrope; burned gas already colder keeps its own composition,
    released gas still hotter its own.
    """
    cold = burned.T <= T
    out = np.where(cold[:, None], burned.amounts, released.amounts) if cold.any() else released.amounts
    crosses = np.flatnonzero(~cold & (released.T < T))
    if len(crosses):
        s, limit, amounts = (taken(values, crosses) for values in (burned.s, T, burned.amounts))
        at = engine.state(table, "ST", s, limit, amounts, "equilibrium")
        good = at.status != Status.NO_SOLUTION
        if good.all() and len(crosses) == len(T):
            return at.amounts
        out = out.copy()
        out[crosses[good]] = at.amounts[good]
    return out


def carbon_frozen(engine: Engine, table: SpeciesTable, burned: GasState, released: GasState, volume: Array) -> GasState:
    """Replace ``released`` where graphite would form by an expansion frozen from where it starts to.

    The temperature at which its activity reaches 1 on the isentrope; gas that would form it already
    when burned keeps its burned composition. Gas-phase data cannot say more; the caller warns.
    """
    sooting = oxygen_excess(table, released.amounts) < 0.0
    if not sooting.any():
        return released
    sooting[sooting] = carbon_activity(table, rows_of(released, np.flatnonzero(sooting))) > 1.0

    def frozen(rows: Index) -> GasState:
        entropy, whole = burned.s[rows], burned.amounts[rows]

        def at(T: Array) -> GasState:
            return engine.state(table, "ST", entropy, T, whole, "equilibrium")

        T, found = bracketed(lambda x: carbon_activity(table, at(x)) - 1.0, released.T[rows], burned.T[rows], width=CARBON_WIDTH)
        return engine.state(table, "SV", entropy, volume[rows], np.where(found[:, None], at(T).amounts, whole))

    return replaced(released, sooting, frozen)


def rows_of(state: GasState, rows: Index) -> GasState:
    """The states of some rows."""
    return GasState(**{field.name: taken(getattr(state, field.name), rows) for field in fields(GasState)})


def replaced(state: GasState, where: Mask, compute: Callable[[Index], GasState]) -> GasState:
    """``state`` with the rows ``where`` computed anew; ``compute`` takes their numbers and is not called for none."""
    rows = np.flatnonzero(where)
    if not len(rows):
        return state
    new = compute(rows)
    if len(rows) == len(where):
        return new
    both = {field.name: getattr(state, field.name).copy() for field in fields(GasState)}
    for name, values in both.items():
        values[rows] = getattr(new, name)
    return GasState(**both)
