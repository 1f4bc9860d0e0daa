"""The Newton iteration of the equilibrium of one state: steps, damping, when it is done.

Damping is that of `fuelair.gas.gibbs`. While T or V is far off, the composition is placed anew (`start.place`)
instead of moved. A state is done when the steps of all species have become small, traces included.
"""

from __future__ import annotations

import numpy as np

from fuelair.gas.compiled import virial
from fuelair.gas.compiled.equations import equations, properties, solve, state
from fuelair.gas.compiled.jit import bare
from fuelair.gas.compiled.layout import (
    ENERGY,
    EXCESS,
    HP,
    LOG,
    POTENTIAL,
    RIGHT,
    SIZE,
    SP,
    ST,
    STATE,
    STEP,
    SV,
    TP,
    USABLE,
    UV,
    Species,
    Work,
)
from fuelair.gas.compiled.start import burned, place
from fuelair.gas.gibbs import LOWEST, MAJOR

TOLERANCE = 1e-13
"""Error of ln n, ln T and ln V at which a state is done, judged by the last step and how much smaller it was."""
STALL = 1e-10
"""Step that counts as done when it no longer shrinks."""
LEAST_SHRINKING = 1e-3
"""Share of a step that the next one has at least in a real gas, whose matrix is not complete."""
NEAR = 1e-5
"""Step above which nothing is done."""
FAR = 0.05
"""Step of ln T or ln V above which the composition is placed anew."""
PLACINGS = 6
"""How often that may happen."""
LEAP = 9.2103404
"""-ln of the mole fraction that a trace may reach in one step (1e-4)."""
LOG_MAJOR, LOG_COLDEST, LOG_HOTTEST = float(np.log(MAJOR)), float(np.log(20.0)), float(np.log(2e4))
"""ln of the mole fraction of a large amount, and of the temperatures at which the search gives up [K]."""


@bare
def steps(t: Species, w: Work, step_T: float, step_size: float) -> float:
    """Steps of ln n from the solution into the rows of ``w``; returns the largest that counts."""
    s = w.species
    step, largest = s[STEP], 0.0
    for j in range(len(step)):
        step[j] = s[ENERGY, j] * step_T + s[SIZE, j] * step_size - s[EXCESS, j]
    for i in range(len(t.atoms)):
        change = w.elements[RIGHT, i]
        for j in range(len(step)):
            step[j] += change * t.atoms[i, j]
    for j in range(len(step)):
        if s[USABLE, j] > 0.0 and (s[LOG, j] > LOWEST or step[j] > 0.0):
            largest = max(largest, abs(step[j]))
    return largest


@bare
def damping(w: Work, log_whole: float, step_T: float, step_size: float) -> float:
    """Share of the step to take: large amounts, ln T and ln n may not run away, traces may not leap up."""
    s = w.species
    limit, trace = 5.0 * max(abs(step_T), abs(step_size)), 1.0
    for j in range(s.shape[1]):
        if s[USABLE, j] > 0.0:
            log_x = s[LOG, j] - log_whole
            if log_x > LOG_MAJOR:
                limit = max(limit, abs(s[STEP, j]))
            elif s[STEP, j] - step_size > 0.0:
                trace = min(trace, abs((-log_x - LEAP) / (s[STEP, j] - step_size)))
    return min(trace, 2.0 / limit if limit > 2.0 else 1.0)


@bare
def advance(t: Species, w: Work, log_whole: float, step_T: float, step_size: float, at_entropy: bool) -> float:
    """Take the step; returns its size, at least 1 where it was damped."""
    s, change = w.species, max(abs(step_T), abs(step_size) if at_entropy else 0.0)
    change = max(change, steps(t, w, step_T, step_size))
    share = damping(w, log_whole, step_T, step_size)
    for j in range(s.shape[1]):
        if s[USABLE, j] > 0.0:
            s[LOG, j] = max(s[LOG, j] + share * s[STEP, j], LOWEST)
    for i in range(len(t.atoms)):
        w.elements[POTENTIAL, i] += share * w.elements[RIGHT, i]
    w.elements[STATE, 0] += share * step_T
    if at_entropy:
        w.elements[STATE, 1] += share * step_size
    return change if share == 1.0 else max(change, 1.0)


@bare
def jump(pair: int, step_T: float, step_size: float, w: Work) -> None:
    """Move T, or V of the pair ST, alone: energy is nearly linear in T, entropy in ln T."""
    if pair in (HP, UV):
        step_T = np.log1p(min(max(step_T, -0.6), 1.5))
    w.elements[STATE, 0] += min(max(step_T, -1.0), 1.0)
    if pair == ST:
        w.elements[STATE, 1] += min(max(step_size, -3.0), 3.0)


@bare
def search(
    t: Species, f: virial.Fluids, real: bool, pair: int, x: float, y: float, placings: int, most: int, w: Work, v: virial.Blend
) -> tuple[bool, int]:
    """Newton from ln T, ln V and, without ``placings``, the amounts in ``w``: whether it came to rest, and its steps.

    ``placings``: how often the composition may be placed anew; ``most``: steps allowed.
    """
    pressure, free = pair in (TP, HP, SP), pair in (HP, UV, SP, SV)
    at, e, burnt, anew, previous, T = w.elements[STATE], len(t.atoms), burned(t, w), placings > 0, 1.0, 0.0
    for done in range(1, most + 1):
        if free or done == 1:
            T = np.exp(at[0])
            properties(t, T, w.species)
        given = y if pressure else np.exp(at[1])
        if anew:
            place(t, burnt, pressure, given, w)
        sums = state(t, f, real, pressure, T, given, w, v)
        if not solve(w.matrix, w.elements[RIGHT], equations(t, pair, T, x, sums, w)):
            return False, done
        step_T = w.elements[RIGHT, e] if free else 0.0
        step_size = w.elements[RIGHT, e + 1] if pressure or pair == ST else 0.0
        distance = max(abs(step_T), abs(step_size) if pair == ST else 0.0)
        placings -= 1
        anew = placings > 0 and distance > FAR
        if anew:
            jump(pair, step_T, step_size, w)
        else:
            change = advance(t, w, np.log(sums.whole), step_T, step_size, pair == ST)
            shrinking = min(1.0, max(change / previous, LEAST_SHRINKING if real else 0.0))
            if (change <= NEAR and change * shrinking <= TOLERANCE) or (change <= STALL and change >= previous):
                return True, done
            previous = change
        if not LOG_COLDEST < at[0] < LOG_HOTTEST:
            return False, done
    return False, most
