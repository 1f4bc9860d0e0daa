"""The joint Newton step of ln o, ln s and ln T of sixteen states, as the pair of properties demands."""

from __future__ import annotations

from fuelair.gas.compiled.balances import amounts, balances, evaluate, heats
from fuelair.gas.compiled.jit import inlined, vectorised
from fuelair.gas.compiled.rows import (
    B_S,
    B_T,
    B_Z,
    BASE,
    C_,
    CAP,
    COLDEST,
    DS,
    DT,
    DZ,
    ETA,
    ETA_S,
    ETA_T,
    ETA_Z,
    FIXED,
    FIXED_LOG,
    GATE_ENERGY,
    GATE_ENTROPY,
    H_,
    HIGHEST_POTENTIAL,
    HOTTEST,
    HP,
    KAPPA,
    LEVEL,
    LOG_T,
    LOWEST_POTENTIAL,
    MISS,
    N_,
    NU,
    NU_S,
    NU_T,
    NU_Z,
    OC,
    P_S,
    P_T,
    P_Z,
    S_T,
    SIGMA,
    SIZE,
    SP,
    ST,
    SUM_Q,
    SV,
    T_,
    TARGET,
    TINY,
    TP,
    TV,
    UV,
    W_S,
    W_T,
    W_Z,
    WHOLE,
    Z_E,
    Z_S,
    Z_T,
    Z,
)
from fuelair.gas.compiled.vector_math import LANES, exp, log, ranged
from fuelair.gas.engine import Array


@vectorised
def amount_of_gas(w: Array) -> None:
    """The step of ln s that the pressure asks for, at given temperature and with it."""
    for lane in range(LANES):
        per = 1.0 / w[WHOLE * LANES + lane]
        z_e, z_s, z_t = w[Z_E * LANES + lane], w[Z_S * LANES + lane], w[Z_T * LANES + lane]
        w_z, w_s, w_t = w[W_Z * LANES + lane] * per, w[W_S * LANES + lane] * per, w[W_T * LANES + lane] * per
        miss = log(w[WHOLE * LANES + lane]) - w[SIGMA * LANES + lane] - w[SIZE * LANES + lane]
        pivot = 1.0 / (w_s - 1.0 + w_z * z_s)
        w[DS * LANES + lane] = -(miss + w_z * z_e) * pivot
        w[S_T * LANES + lane] = -(w_t + w_z * z_t) * pivot


@vectorised
def heat_balance(w: Array, entropy: bool, per_volume: float) -> None:
    """Miss of energy or entropy and its slopes, into the rows of the heat of reaction."""
    for lane in range(LANES):
        T = w[T_ * LANES + lane]
        B = BASE * LANES + lane
        cp, h, s = ranged(
            w[B], w[B + LANES], w[B + 2 * LANES], w[B + 3 * LANES], w[B + 4 * LANES], w[B + 5 * LANES],
            w[B + 6 * LANES], w[B + 7 * LANES], w[B + 8 * LANES], w[B + 9 * LANES], w[B + 10 * LANES], w[B + 11 * LANES],
            w[B + 12 * LANES], w[B + 13 * LANES], w[B + 14 * LANES], w[B + 15 * LANES], w[B + 16 * LANES], w[B + 17 * LANES],
            T, w[LOG_T * LANES + lane],
        )  # fmt: skip
        w[B_T * LANES + lane] += cp
        w[LEVEL * LANES + lane] = s if entropy else h
    if entropy:
        for lane in range(LANES):
            carbon, hydrogen, nitrogen, oc = (
                w[C_ * LANES + lane],
                w[H_ * LANES + lane],
                w[N_ * LANES + lane],
                w[OC * LANES + lane],
            )
            kappa, eta, nu, fixed = w[KAPPA * LANES + lane], w[ETA * LANES + lane], w[NU * LANES + lane], w[FIXED * LANES + lane]
            mixing = (
                carbon * log(kappa + TINY) + hydrogen * log(eta + TINY) + nitrogen * log(nu + TINY) + oc * w[Z * LANES + lane]
            )
            mixing = mixing + w[FIXED_LOG * LANES + lane] - fixed * w[SIGMA * LANES + lane]
            w[LEVEL * LANES + lane] = w[TARGET * LANES + lane] - (w[LEVEL * LANES + lane] + w[SUM_Q * LANES + lane] - mixing)
            w[B_Z * LANES + lane] -= w[P_Z * LANES + lane] + oc
            w[B_S * LANES + lane] += fixed - w[P_S * LANES + lane]
            w[B_T * LANES + lane] -= w[SUM_Q * LANES + lane] + w[P_T * LANES + lane]
    else:
        for lane in range(LANES):
            whole = per_volume * w[WHOLE * LANES + lane]
            have = w[LEVEL * LANES + lane] + w[SUM_Q * LANES + lane] - whole
            w[LEVEL * LANES + lane] = w[TARGET * LANES + lane] / w[T_ * LANES + lane] - have
            w[B_Z * LANES + lane] -= per_volume * w[W_Z * LANES + lane]
            w[B_S * LANES + lane] -= per_volume * w[W_S * LANES + lane]
            w[B_T * LANES + lane] -= per_volume * w[W_T * LANES + lane] + whole


@vectorised
def foresee(w: Array) -> None:
    """Potentials of hydrogen and nitrogen after the step, to first order, for the lagged species of the next one."""
    for lane in range(LANES):
        d_z, d_s, d_t = w[DZ * LANES + lane], w[DS * LANES + lane], w[DT * LANES + lane]
        eta = w[ETA_Z * LANES + lane] * d_z + w[ETA_S * LANES + lane] * d_s + w[ETA_T * LANES + lane] * d_t
        nu = w[NU_Z * LANES + lane] * d_z + w[NU_S * LANES + lane] * d_s + w[NU_T * LANES + lane] * d_t
        w[ETA * LANES + lane] *= exp(min(max(eta, -1.0), 1.0))
        w[NU * LANES + lane] *= exp(min(max(nu, -1.0), 1.0))


@vectorised
def move_at_temperature(w: Array, pair: int) -> None:
    """Step of ln o, and of ln s where it is free; the temperature is given."""
    for lane in range(LANES):
        z_e, z_s = w[Z_E * LANES + lane], w[Z_S * LANES + lane]
        by_entropy = (w[LEVEL * LANES + lane] - w[B_Z * LANES + lane] * z_e) / (
            w[B_S * LANES + lane] + w[B_Z * LANES + lane] * z_s
        )
        d_s = by_entropy if pair == ST else (w[DS * LANES + lane] if pair == TP else 0.0)
        d_z = z_e + z_s * d_s
        w[DZ * LANES + lane], w[DS * LANES + lane], w[DT * LANES + lane] = d_z, d_s, 0.0
        w[MISS * LANES + lane] = max(abs(d_s), 0.1 * abs(d_z))
        w[SIGMA * LANES + lane] = w[SIGMA * LANES + lane] + d_s
        w[Z * LANES + lane] = min(max(w[Z * LANES + lane] + d_z, LOWEST_POTENTIAL), HIGHEST_POTENTIAL)


@vectorised
def move(w: Array, at_pressure: bool, entropy: bool) -> None:
    """Joint step of ln o, ln s and ln T: the isothermal part, then along with the temperature, linear in 1/T."""
    gate = GATE_ENTROPY if entropy else GATE_ENERGY
    with_s = 1.0 if at_pressure else 0.0
    for lane in range(LANES):
        z_e, z_s, z_t = w[Z_E * LANES + lane], w[Z_S * LANES + lane], w[Z_T * LANES + lane]
        by_z, by_s, by_t = w[B_Z * LANES + lane], w[B_S * LANES + lane], w[B_T * LANES + lane]
        d_s = with_s * w[DS * LANES + lane]
        s_t = w[S_T * LANES + lane] if at_pressure else -1.0
        slope = z_t + z_s * s_t
        iso = z_e + z_s * d_s
        d_t = (w[LEVEL * LANES + lane] - by_z * iso - by_s * d_s) / (by_t + by_s * s_t + by_z * slope)
        w[DZ * LANES + lane], w[DS * LANES + lane], w[DT * LANES + lane] = iso + slope * d_t, d_s + s_t * d_t, d_t
        w[MISS * LANES + lane] = max(max(abs(d_t), abs(d_s)), 0.1 * abs(iso))
        T = w[T_ * LANES + lane]
        change = min(max(d_t, -CAP), CAP)
        change = 0.0 if abs(z_e) > gate else change
        factor = exp(change) if entropy else 1.0 + change
        new = min(max(T * factor, COLDEST), HOTTEST)
        back = 1.0 - T / new
        sigma = w[SIGMA * LANES + lane] + d_s + s_t * back
        by_volume = w[SIZE * LANES + lane] - log(new)
        w[T_ * LANES + lane] = new
        w[SIGMA * LANES + lane] = sigma if at_pressure else by_volume
        w[Z * LANES + lane] = min(max(w[Z * LANES + lane] + iso + slope * back, LOWEST_POTENTIAL), HIGHEST_POTENTIAL)


@inlined
def step(w: Array, tab: Array, pair: int) -> None:
    """One joint Newton step of every lane."""
    at_pressure = pair in (TP, HP, SP)
    free_T = pair not in (TP, TV, ST)
    entropy = pair in (SP, SV, ST)
    evaluate(w, tab)
    amounts(w)
    balances(w)
    if free_T or entropy:
        heats(w)
    if at_pressure:
        amount_of_gas(w)
    if free_T or entropy:
        heat_balance(w, entropy, 1.0 if pair == UV else 0.0)
    if free_T:
        move(w, at_pressure, entropy)
    else:
        move_at_temperature(w, pair)
    foresee(w)
