"""Amounts of every species from the potentials, and how they follow them: the heart of `nested`."""

from __future__ import annotations

import math

from fuelair.gas.compiled.jit import vectorised
from fuelair.gas.compiled.rows import (
    B_S,
    B_T,
    B_Z,
    C_,
    C_S,
    C_Z,
    DCP,
    DOWN,
    E_,
    ETA,
    ETA_S,
    ETA_T,
    ETA_Z,
    FIXED,
    G_C,
    G_H,
    G_N,
    H_,
    K_ROW,
    KAPPA,
    LAGGED,
    LOG_T,
    MAJOR,
    N_,
    NU,
    NU_S,
    NU_T,
    NU_Z,
    P_S,
    P_T,
    P_Z,
    PER_C,
    PER_F,
    PER_H,
    PER_N,
    REACTIONS,
    SHARE,
    SIGMA,
    SPECIES,
    SUM_C,
    SUM_H,
    SUM_N,
    SUM_Q,
    T_,
    TINY,
    UP,
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
def evaluate(w: Array, tab: Array) -> None:
    """Equilibrium constant, enthalpy and heat capacity of every reaction at the temperatures of the lanes."""
    for lane in range(LANES):
        w[LOG_T * LANES + lane] = log(w[T_ * LANES + lane])
    for r in range(REACTIONS):
        k, row = 18 * r, (K_ROW + r) * LANES
        # read before the loop, for the compiler cannot know that the two arrays are not one
        a0, a1, a2, a3, a4 = tab[k], tab[k + 1], tab[k + 2], tab[k + 3], tab[k + 4]
        a5, a6, a7, a8 = tab[k + 5], tab[k + 6], tab[k + 7], tab[k + 8]
        b0, b1, b2, b3, b4 = tab[k + 9], tab[k + 10], tab[k + 11], tab[k + 12], tab[k + 13]
        b5, b6, b7, b8 = tab[k + 14], tab[k + 15], tab[k + 16], tab[k + 17]
        for lane in range(LANES):
            cp, h, s = ranged(
                a0, a1, a2, a3, a4, a5, a6, a7, a8, b0, b1, b2, b3, b4, b5, b6, b7, b8,
                w[T_ * LANES + lane], w[LOG_T * LANES + lane],
            )  # fmt: skip
            w[row + lane] = exp(s - h)
            w[row + SPECIES * LANES + lane] = h
            w[row + 2 * SPECIES * LANES + lane] = cp


@vectorised
def amounts(w: Array) -> None:
    """Amounts of every species from the potential of oxygen, the closed forms of the others, and the size."""
    K, M = K_ROW * LANES, MAJOR * LANES
    for lane in range(LANES):
        z = w[Z * LANES + lane]
        sigma = w[SIGMA * LANES + lane]
        o = exp(z)
        s = exp(sigma)
        per_o = 1.0 / o
        per_s = 1.0 / s
        k_co2, k_h2o, k_oh, k_h, k_o = (
            w[K + lane],
            w[K + LANES + lane],
            w[K + 2 * LANES + lane],
            w[K + 3 * LANES + lane],
            w[K + 4 * LANES + lane],
        )
        k_no, k_n, k_no2, k_ho2 = (
            w[K + 5 * LANES + lane],
            w[K + 6 * LANES + lane],
            w[K + 7 * LANES + lane],
            w[K + 8 * LANES + lane],
        )
        k_n2o, k_h2o2 = w[K + 9 * LANES + lane], w[K + 10 * LANES + lane]
        k_ch4, k_nh3, k_hcn = w[K + 11 * LANES + lane], w[K + 12 * LANES + lane], w[K + 13 * LANES + lane]
        k_ch4 = k_ch4 * per_o
        k_hcn = k_hcn * per_o
        eta = w[ETA * LANES + lane]
        nu = w[NU * LANES + lane]
        carbon, hydrogen, nitrogen = w[C_ * LANES + lane], w[H_ * LANES + lane], w[N_ * LANES + lane]
        # closed forms, lagged species with the potentials of the step before
        e2 = eta * eta
        kappa = carbon * per_s / (1.0 + k_co2 * o + k_ch4 * e2 * e2 + k_hcn * nu * eta)
        a = 1.0 + o * (k_h2o + k_h2o2 * o)
        b = k_h + o * (k_oh + k_ho2 * o) + 3.0 * k_nh3 * e2 * nu + kappa * (4.0 * k_ch4 * e2 * eta + k_hcn * nu)
        x = hydrogen * per_s
        eta = 2.0 * x / (b + math.sqrt(b * b + 8.0 * a * x))
        e2 = eta * eta
        a = 1.0 + k_n2o * o
        b = k_n + o * (k_no + k_no2 * o) + k_nh3 * e2 * eta + k_hcn * kappa * eta
        x = nitrogen * per_s
        nu = 2.0 * x / (b + math.sqrt(b * b + 8.0 * a * x))
        w[KAPPA * LANES + lane] = kappa
        w[ETA * LANES + lane] = eta
        w[NU * LANES + lane] = nu
        so = s * o
        n_co = s * kappa
        n_h2 = s * e2
        n_o2 = so * o
        n_n2 = s * nu * nu
        n_co2 = so * kappa * k_co2
        n_h2o = so * e2 * k_h2o
        n_oh = so * eta * k_oh
        n_h = s * eta * k_h
        n_o = so * k_o
        n_no = so * nu * k_no
        n_n = s * nu * k_n
        n_no2 = n_o2 * nu * k_no2
        n_ho2 = n_o2 * eta * k_ho2
        n_n2o = so * nu * nu * k_n2o
        n_h2o2 = n_o2 * e2 * k_h2o2
        n_ch4 = n_co * e2 * e2 * k_ch4
        n_nh3 = n_h2 * eta * nu * k_nh3
        n_hcn = n_co * eta * nu * k_hcn
        w[M + lane], w[M + LANES + lane], w[M + 2 * LANES + lane], w[M + 3 * LANES + lane] = n_co, n_h2, n_o2, n_n2
        w[K + lane], w[K + LANES + lane], w[K + 2 * LANES + lane], w[K + 3 * LANES + lane], w[K + 4 * LANES + lane] = (
            n_co2,
            n_h2o,
            n_oh,
            n_h,
            n_o,
        )
        w[K + 5 * LANES + lane], w[K + 6 * LANES + lane], w[K + 7 * LANES + lane], w[K + 8 * LANES + lane] = (
            n_no,
            n_n,
            n_no2,
            n_ho2,
        )
        w[K + 9 * LANES + lane], w[K + 10 * LANES + lane] = n_n2o, n_h2o2
        w[K + 11 * LANES + lane], w[K + 12 * LANES + lane], w[K + 13 * LANES + lane] = n_ch4, n_nh3, n_hcn


@vectorised
def balances(w: Array) -> None:
    """What the amounts leave open, and how potentials, oxygen and gas follow ln o and ln s."""
    M = MAJOR * LANES
    for lane in range(LANES):
        n_co = w[M + lane]
        n_h2 = w[M + LANES + lane]
        n_o2 = w[M + 2 * LANES + lane]
        n_n2 = w[M + 3 * LANES + lane]
        n_co2 = w[M + 4 * LANES + lane]
        n_h2o = w[M + 5 * LANES + lane]
        n_oh = w[M + 6 * LANES + lane]
        n_h = w[M + 7 * LANES + lane]
        n_o = w[M + 8 * LANES + lane]
        n_no = w[M + 9 * LANES + lane]
        n_n = w[M + 10 * LANES + lane]
        n_no2 = w[M + 11 * LANES + lane]
        n_ho2 = w[M + 12 * LANES + lane]
        n_n2o = w[M + 13 * LANES + lane]
        n_h2o2 = w[M + 14 * LANES + lane]
        n_ch4 = w[M + 15 * LANES + lane]
        n_nh3 = w[M + 16 * LANES + lane]
        n_hcn = w[M + 17 * LANES + lane]
        carbon, hydrogen, nitrogen = w[C_ * LANES + lane], w[H_ * LANES + lane], w[N_ * LANES + lane]
        # amounts of atoms, and what lagged species left open
        sum_c = n_co + n_co2 + n_ch4 + n_hcn
        sum_h = 2.0 * (n_h2 + n_h2o + n_h2o2) + n_h + n_oh + n_ho2 + 4.0 * n_ch4 + 3.0 * n_nh3 + n_hcn
        sum_n = 2.0 * (n_n2 + n_n2o) + n_n + n_no + n_no2 + n_nh3 + n_hcn
        open_c = abs(sum_c - carbon) / (carbon + TINY)
        open_h = abs(sum_h - hydrogen) / (hydrogen + TINY)
        open_n = abs(sum_n - nitrogen) / (nitrogen + TINY)
        w[LAGGED * LANES + lane] = max(open_c, max(open_h, open_n))
        part_c = (n_ch4 + n_hcn) / (carbon + TINY)
        part_h = (4.0 * n_ch4 + 3.0 * n_nh3 + n_hcn) / (hydrogen + TINY)
        part_n = (n_nh3 + n_hcn) / (nitrogen + TINY)
        w[SHARE * LANES + lane] = max(part_c, max(part_h, part_n))
        # oxygen excess
        excess = w[E_ * LANES + lane]
        plus = 2.0 * n_o2 + n_o + 0.5 * n_oh + n_no + 2.0 * n_no2 + 1.5 * n_ho2 + n_n2o + n_h2o2
        minus = n_co + n_h2 + 0.5 * n_h + 4.0 * n_ch4 + 1.5 * n_nh3 + 2.5 * n_hcn
        all_plus = plus + max(-excess, 0.0) + TINY
        all_minus = minus + max(excess, 0.0) + TINY
        f = log(all_plus) - log(all_minus)
        up = 1.0 / all_plus
        down = -1.0 / all_minus
        # how the potentials follow ln o and ln s
        per_c = 1.0 / (sum_c + TINY)
        per_h = 1.0 / (4.0 * (n_h2 + n_h2o + n_h2o2) + n_h + n_oh + n_ho2 + 16.0 * n_ch4 + 9.0 * n_nh3 + n_hcn + TINY)
        per_n = 1.0 / (4.0 * (n_n2 + n_n2o) + n_n + n_no + n_no2 + n_nh3 + n_hcn + TINY)
        c_z, c_s = -(n_co2 - n_ch4 - n_hcn) * per_c, -sum_c * per_c
        h_z, h_s = -(2.0 * (n_h2o + n_ho2) + n_oh + 4.0 * (n_h2o2 - n_ch4) - n_hcn) * per_h, -sum_h * per_h
        n_z, n_s = -(n_no + 2.0 * (n_no2 + n_n2o) - n_hcn) * per_n, -sum_n * per_n
        # the oxygen equation
        m_h = 2.0 * n_h2 + 0.5 * n_h + 16.0 * n_ch4 + 4.5 * n_nh3 + 2.5 * n_hcn
        p_h = 0.5 * n_oh + 1.5 * n_ho2 + 2.0 * n_h2o2
        m_n = 1.5 * n_nh3 + 2.5 * n_hcn
        p_n = n_no + 2.0 * (n_no2 + n_n2o)
        m_o = -4.0 * n_ch4 - 2.5 * n_hcn
        p_o = 4.0 * (n_o2 + n_no2) + n_o + 0.5 * n_oh + n_no + 3.0 * n_ho2 + n_n2o + 2.0 * n_h2o2
        g_c, g_h, g_n = down * (n_co + 4.0 * n_ch4 + 2.5 * n_hcn), up * p_h + down * m_h, up * p_n + down * m_n
        per_f = 1.0 / (up * p_o + down * m_o + g_c * c_z + g_h * h_z + g_n * n_z)
        f_s = up * plus + down * minus + g_c * c_s + g_h * h_s + g_n * n_s
        w[Z_E * LANES + lane], w[Z_S * LANES + lane] = -f * per_f, -f_s * per_f
        # amount of gas
        count = (
            n_co + n_h2 + n_o2 + n_n2 + n_co2 + n_h2o + n_oh + n_h + n_o + n_no + n_n + n_no2 + n_ho2 + n_n2o + n_h2o2
            + n_ch4 + n_nh3 + n_hcn
        )  # fmt: skip
        sum_o = 2.0 * (n_o2 + n_no2 + n_ho2 + n_h2o2) + n_co2 + n_h2o + n_oh + n_o + n_no + n_n2o - n_ch4 - n_hcn
        w[WHOLE * LANES + lane] = count + w[FIXED * LANES + lane]
        w[W_Z * LANES + lane] = sum_o + sum_c * c_z + sum_h * h_z + sum_n * n_z
        w[W_S * LANES + lane] = count + sum_c * c_s + sum_h * h_s + sum_n * n_s
        # for what follows the temperature
        w[C_Z * LANES + lane], w[ETA_Z * LANES + lane], w[NU_Z * LANES + lane] = c_z, h_z, n_z
        w[C_S * LANES + lane], w[ETA_S * LANES + lane], w[NU_S * LANES + lane] = c_s, h_s, n_s
        w[PER_C * LANES + lane], w[PER_H * LANES + lane], w[PER_N * LANES + lane] = per_c, per_h, per_n
        w[SUM_C * LANES + lane], w[SUM_H * LANES + lane], w[SUM_N * LANES + lane] = sum_c, sum_h, sum_n
        w[G_C * LANES + lane], w[G_H * LANES + lane], w[G_N * LANES + lane] = g_c, g_h, g_n
        w[UP * LANES + lane], w[DOWN * LANES + lane], w[PER_F * LANES + lane] = up, down, per_f


@vectorised
def heats(w: Array) -> None:
    """How potentials, oxygen and gas follow ln T, and the heat all three unknowns."""
    K = K_ROW * LANES
    for lane in range(LANES):
        n_co2 = w[K + lane]
        n_h2o = w[K + LANES + lane]
        n_oh = w[K + 2 * LANES + lane]
        n_h = w[K + 3 * LANES + lane]
        n_o = w[K + 4 * LANES + lane]
        n_no = w[K + 5 * LANES + lane]
        n_n = w[K + 6 * LANES + lane]
        n_no2 = w[K + 7 * LANES + lane]
        n_ho2 = w[K + 8 * LANES + lane]
        n_n2o = w[K + 9 * LANES + lane]
        n_h2o2 = w[K + 10 * LANES + lane]
        n_ch4 = w[K + 11 * LANES + lane]
        n_nh3 = w[K + 12 * LANES + lane]
        n_hcn = w[K + 13 * LANES + lane]
        # heats of reaction times amounts
        t_co2 = w[K + SPECIES * LANES + lane]
        t_h2o = w[K + (SPECIES + 1) * LANES + lane]
        t_oh = w[K + (SPECIES + 2) * LANES + lane]
        t_h = w[K + (SPECIES + 3) * LANES + lane]
        t_o = w[K + (SPECIES + 4) * LANES + lane]
        t_no = w[K + (SPECIES + 5) * LANES + lane]
        t_n = w[K + (SPECIES + 6) * LANES + lane]
        t_no2 = w[K + (SPECIES + 7) * LANES + lane]
        t_ho2 = w[K + (SPECIES + 8) * LANES + lane]
        t_n2o = w[K + (SPECIES + 9) * LANES + lane]
        t_h2o2 = w[K + (SPECIES + 10) * LANES + lane]
        t_ch4 = w[K + (SPECIES + 11) * LANES + lane]
        t_nh3 = w[K + (SPECIES + 12) * LANES + lane]
        t_hcn = w[K + (SPECIES + 13) * LANES + lane]
        q_co2, q_h2o, q_oh, q_h, q_o, q_no, q_n = (
            n_co2 * t_co2, n_h2o * t_h2o, n_oh * t_oh, n_h * t_h, n_o * t_o, n_no * t_no, n_n * t_n,
        )  # fmt: skip
        q_no2, q_ho2, q_n2o, q_h2o2, q_ch4, q_nh3, q_hcn = (
            n_no2 * t_no2, n_ho2 * t_ho2, n_n2o * t_n2o, n_h2o2 * t_h2o2, n_ch4 * t_ch4, n_nh3 * t_nh3, n_hcn * t_hcn,
        )  # fmt: skip
        q_c = q_co2 + q_ch4 + q_hcn
        q_hyd = 2.0 * (q_h2o + q_h2o2) + q_oh + q_h + q_ho2 + 4.0 * q_ch4 + 3.0 * q_nh3 + q_hcn
        q_nit = q_no + q_n + q_no2 + 2.0 * q_n2o + q_nh3 + q_hcn
        c_z, h_z, n_z = w[C_Z * LANES + lane], w[ETA_Z * LANES + lane], w[NU_Z * LANES + lane]
        c_s, h_s, n_s = w[C_S * LANES + lane], w[ETA_S * LANES + lane], w[NU_S * LANES + lane]
        c_t, h_t, n_t = -q_c * w[PER_C * LANES + lane], -q_hyd * w[PER_H * LANES + lane], -q_nit * w[PER_N * LANES + lane]
        w[ETA_T * LANES + lane], w[NU_T * LANES + lane] = h_t, n_t
        m_q = 0.5 * q_h + 4.0 * q_ch4 + 1.5 * q_nh3 + 2.5 * q_hcn
        p_q = q_o + 0.5 * q_oh + q_no + 2.0 * q_no2 + 1.5 * q_ho2 + q_n2o + q_h2o2
        f_t = w[UP * LANES + lane] * p_q + w[DOWN * LANES + lane] * m_q
        f_t = f_t + w[G_C * LANES + lane] * c_t + w[G_H * LANES + lane] * h_t + w[G_N * LANES + lane] * n_t
        w[Z_T * LANES + lane] = -f_t * w[PER_F * LANES + lane]
        sum_q = q_co2 + q_h2o + q_oh + q_h + q_o + q_no + q_n + q_no2 + q_ho2 + q_n2o + q_h2o2 + q_ch4 + q_nh3 + q_hcn
        w[SUM_Q * LANES + lane] = sum_q
        sum_c, sum_h, sum_n = w[SUM_C * LANES + lane], w[SUM_H * LANES + lane], w[SUM_N * LANES + lane]
        w[W_T * LANES + lane] = sum_q + sum_c * c_t + sum_h * h_t + sum_n * n_t
        # heat
        D = (DCP + 4) * LANES + lane
        heat = (
            n_co2 * w[D] + n_h2o * w[D + LANES] + n_oh * w[D + 2 * LANES] + n_h * w[D + 3 * LANES] + n_o * w[D + 4 * LANES]
            + n_no * w[D + 5 * LANES] + n_n * w[D + 6 * LANES] + n_no2 * w[D + 7 * LANES] + n_ho2 * w[D + 8 * LANES]
            + n_n2o * w[D + 9 * LANES] + n_h2o2 * w[D + 10 * LANES] + n_ch4 * w[D + 11 * LANES] + n_nh3 * w[D + 12 * LANES]
            + n_hcn * w[D + 13 * LANES]
        )  # fmt: skip
        e_o = q_co2 + q_h2o + q_oh + q_o + q_no + q_n2o + 2.0 * (q_no2 + q_ho2 + q_h2o2) - q_ch4 - q_hcn
        e_q = (
            q_co2 * t_co2 + q_h2o * t_h2o + q_oh * t_oh + q_h * t_h + q_o * t_o + q_no * t_no + q_n * t_n
            + q_no2 * t_no2 + q_ho2 * t_ho2 + q_n2o * t_n2o + q_h2o2 * t_h2o2 + q_ch4 * t_ch4 + q_nh3 * t_nh3 + q_hcn * t_hcn
        )  # fmt: skip
        w[B_Z * LANES + lane] = e_o + q_c * c_z + q_hyd * h_z + q_nit * n_z
        w[B_S * LANES + lane] = sum_q + q_c * c_s + q_hyd * h_s + q_nit * n_s
        w[B_T * LANES + lane] = heat + e_q + q_c * c_t + q_hyd * h_t + q_nit * n_t
        carbon, hydrogen, nitrogen = w[C_ * LANES + lane], w[H_ * LANES + lane], w[N_ * LANES + lane]
        w[P_Z * LANES + lane] = carbon * c_z + hydrogen * h_z + nitrogen * n_z
        w[P_S * LANES + lane] = carbon * c_s + hydrogen * h_s + nitrogen * n_s
        w[P_T * LANES + lane] = carbon * c_t + hydrogen * h_t + nitrogen * n_t
