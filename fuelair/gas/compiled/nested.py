"""Equilibrium of combustion gas by the oxygen potential: closed-form element balances inside one small Newton.

Every species is a reaction product of the basis CO, H2, O2, N2. With s = p0 V/(R T), o = (p_O2/p0)^(1/2),
h = (p_H2/p0)^(1/2), n = (p_N2/p0)^(1/2), c = p_CO/p0 the amounts are

    n_j = s K_j(T) c^C h^H n^N o^(O - C)

so that for given T, s, o the balances of carbon, hydrogen and nitrogen are closed forms: linear for c, quadratic
for h and n. One scalar equation is left, for the oxygen *excess* E = O - 2 C - H/2 (which keeps its digits at exact
stoichiometry, where O itself cancels):

    f(ln o) = ln(sum of e_j n_j > 0, plus -E if rich) - ln(sum of -e_j n_j > 0, plus E if lean) = 0

and beside it, as the pair of properties demands, one for the amount of gas at the pressure and one for energy or
entropy. Methane, ammonia and hydrogen cyanide couple the balances; they enter the closed forms with the potentials
of the step before, which converges while they are a small share of their elements. Where they are not (rich, cold,
dense gas) the state is handed back as `WIDE`, for the generic solver. Sulfur is carried as SO2, and what is inert
stays as it is.

Sixteen states run side by side in vector lanes; a lane that is done takes the next state of its batch. No lane
sees another, so no bit depends on the neighbours.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from fuelair.gas.compiled.jit import compiled, inlined, vectorised
from fuelair.gas.compiled.vector_math import LANES, exp, log, ranged
from fuelair.gas.complete import CARBON_LIMIT
from fuelair.gas.engine import Array, Codes

Indices = npt.NDArray[np.int64]
REACTIONS = 14
"""CO2 H2O OH H O NO N NO2 HO2 N2O H2O2 CH4 NH3 HCN, in this order, after the basis CO H2 O2 N2."""
SPECIES = 4 + REACTIONS
CO, H2, O2, N2, CO2, H2O = range(6)
PARTS = 8
"""Columns of the sums over species: C, H, N, O beyond C, oxygen excess, up to three fixed species."""
TP, TV, HP, UV, SP, SV, ST = range(7)
DONE, FAILED, WIDE, SOOT = range(4)
"""How a state ended: solved, not solved here, rich in methane, ammonia or hydrogen cyanide, or bound to form carbon."""

MAX_STEPS = 60
TOLERANCE = 1e-7
"""Step of ln T and ln s, and a tenth of that of ln o, from which one correction of first order ends a state."""
LAG = 1e-13
"""Change of the lagged species over their element at which they count as settled."""
WIDEST = 0.02
"""Share of an element in lagged species from which a state is handed back."""
START = 2000.0
COLDEST, HOTTEST = 60.0, 2.0e4
GATE_ENERGY, GATE_ENTROPY = 0.25, 0.1
"""Miss of ln o from which the temperature is held for a step."""
CAP = 0.5
"""Largest relative step of temperature."""
LOWEST_POTENTIAL, HIGHEST_POTENTIAL = -340.0, 40.0
TINY = 1e-300

BLOCK = 128
"""States whose first guesses are made together."""

# Rows of the workspace, each of LANES numbers; the first LOADED of them come with a state.
SUMS = 0  # 8 rows, the columns of the sums over species
C_, H_, N_, OC, E_, STAYS = range(6)
Z, SIGMA, T_, TARGET, SIZE, FIXED, FIXED_LOG, ETA, NU = range(8, 17)
BASE = 17  # 18 rows: coefficients of the unreacted basis, low then high
LOADED = BASE + 18
(
    KAPPA, LOG_T, DZ, DS, DT, SHARE, LAGGED, MISS, COUNT,
    Z_E, Z_S, Z_T, W_Z, W_S, W_T, WHOLE, B_Z, B_S, B_T, SUM_Q, P_Z, P_S, P_T, S_T, LEVEL,
    ETA_Z, ETA_S, ETA_T, NU_Z, NU_S, NU_T,
) = range(LOADED, LOADED + 31)  # fmt: skip
K_ROW = LOADED + 31  # REACTIONS rows: equilibrium constant, then amount of each product
THETA = K_ROW + REACTIONS  # enthalpy of reaction over R T
DCP = THETA + REACTIONS
MAJOR = DCP + REACTIONS  # 4 rows: amounts of CO H2 O2 N2
ROWS = MAJOR + 4


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
            w[row + REACTIONS * LANES + lane] = h
            w[row + 2 * REACTIONS * LANES + lane] = cp


@vectorised
def balances(w: Array) -> None:
    """Amounts from the potentials, and how they, the gas and its heat follow ln o, ln s and ln T."""
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
        # heats of reaction times amounts
        t_co2 = w[K + REACTIONS * LANES + lane]
        t_h2o = w[K + (REACTIONS + 1) * LANES + lane]
        t_oh = w[K + (REACTIONS + 2) * LANES + lane]
        t_h = w[K + (REACTIONS + 3) * LANES + lane]
        t_o = w[K + (REACTIONS + 4) * LANES + lane]
        t_no = w[K + (REACTIONS + 5) * LANES + lane]
        t_n = w[K + (REACTIONS + 6) * LANES + lane]
        t_no2 = w[K + (REACTIONS + 7) * LANES + lane]
        t_ho2 = w[K + (REACTIONS + 8) * LANES + lane]
        t_n2o = w[K + (REACTIONS + 9) * LANES + lane]
        t_h2o2 = w[K + (REACTIONS + 10) * LANES + lane]
        t_ch4 = w[K + (REACTIONS + 11) * LANES + lane]
        t_nh3 = w[K + (REACTIONS + 12) * LANES + lane]
        t_hcn = w[K + (REACTIONS + 13) * LANES + lane]
        q_co2, q_h2o, q_oh, q_h, q_o, q_no, q_n = (
            n_co2 * t_co2, n_h2o * t_h2o, n_oh * t_oh, n_h * t_h, n_o * t_o, n_no * t_no, n_n * t_n,
        )  # fmt: skip
        q_no2, q_ho2, q_n2o, q_h2o2, q_ch4, q_nh3, q_hcn = (
            n_no2 * t_no2, n_ho2 * t_ho2, n_n2o * t_n2o, n_h2o2 * t_h2o2, n_ch4 * t_ch4, n_nh3 * t_nh3, n_hcn * t_hcn,
        )  # fmt: skip
        # how the potentials follow ln o, ln s and ln T
        per_c = 1.0 / (sum_c + TINY)
        per_h = 1.0 / (4.0 * (n_h2 + n_h2o + n_h2o2) + n_h + n_oh + n_ho2 + 16.0 * n_ch4 + 9.0 * n_nh3 + n_hcn + TINY)
        per_n = 1.0 / (4.0 * (n_n2 + n_n2o) + n_n + n_no + n_no2 + n_nh3 + n_hcn + TINY)
        o_c = n_co2 - n_ch4 - n_hcn
        o_h = 2.0 * (n_h2o + n_ho2) + n_oh + 4.0 * (n_h2o2 - n_ch4) - n_hcn
        o_n = n_no + 2.0 * (n_no2 + n_n2o) - n_hcn
        q_c = q_co2 + q_ch4 + q_hcn
        q_hyd = 2.0 * (q_h2o + q_h2o2) + q_oh + q_h + q_ho2 + 4.0 * q_ch4 + 3.0 * q_nh3 + q_hcn
        q_nit = q_no + q_n + q_no2 + 2.0 * q_n2o + q_nh3 + q_hcn
        c_z, c_s, c_t = -o_c * per_c, -sum_c * per_c, -q_c * per_c
        h_z, h_s, h_t = -o_h * per_h, -sum_h * per_h, -q_hyd * per_h
        n_z, n_s, n_t = -o_n * per_n, -sum_n * per_n, -q_nit * per_n
        # the oxygen equation
        m_c = n_co + 4.0 * n_ch4 + 2.5 * n_hcn
        m_h = 2.0 * n_h2 + 0.5 * n_h + 16.0 * n_ch4 + 4.5 * n_nh3 + 2.5 * n_hcn
        p_h = 0.5 * n_oh + 1.5 * n_ho2 + 2.0 * n_h2o2
        m_n = 1.5 * n_nh3 + 2.5 * n_hcn
        p_n = n_no + 2.0 * (n_no2 + n_n2o)
        m_o = -4.0 * n_ch4 - 2.5 * n_hcn
        p_o = 4.0 * (n_o2 + n_no2) + n_o + 0.5 * n_oh + n_no + 3.0 * n_ho2 + n_n2o + 2.0 * n_h2o2
        m_q = 0.5 * q_h + 4.0 * q_ch4 + 1.5 * q_nh3 + 2.5 * q_hcn
        p_q = q_o + 0.5 * q_oh + q_no + 2.0 * q_no2 + 1.5 * q_ho2 + q_n2o + q_h2o2
        g_c, g_h, g_n = down * m_c, up * p_h + down * m_h, up * p_n + down * m_n
        f_z = up * p_o + down * m_o + g_c * c_z + g_h * h_z + g_n * n_z
        f_s = up * plus + down * minus + g_c * c_s + g_h * h_s + g_n * n_s
        f_t = up * p_q + down * m_q + g_c * c_t + g_h * h_t + g_n * n_t
        per_f = 1.0 / f_z
        z_e, z_s, z_t = -f * per_f, -f_s * per_f, -f_t * per_f
        w[Z_E * LANES + lane], w[Z_S * LANES + lane], w[Z_T * LANES + lane] = z_e, z_s, z_t
        # amount of gas
        count = (
            n_co + n_h2 + n_o2 + n_n2 + n_co2 + n_h2o + n_oh + n_h + n_o + n_no + n_n + n_no2 + n_ho2 + n_n2o + n_h2o2
            + n_ch4 + n_nh3 + n_hcn
        )  # fmt: skip
        sum_o = 2.0 * (n_o2 + n_no2 + n_ho2 + n_h2o2) + n_co2 + n_h2o + n_oh + n_o + n_no + n_n2o - n_ch4 - n_hcn
        sum_q = q_co2 + q_h2o + q_oh + q_h + q_o + q_no + q_n + q_no2 + q_ho2 + q_n2o + q_h2o2 + q_ch4 + q_nh3 + q_hcn
        w[WHOLE * LANES + lane] = count + w[FIXED * LANES + lane]
        w[SUM_Q * LANES + lane] = sum_q
        w[W_Z * LANES + lane] = sum_o + sum_c * c_z + sum_h * h_z + sum_n * n_z
        w[W_S * LANES + lane] = count + sum_c * c_s + sum_h * h_s + sum_n * n_s
        w[W_T * LANES + lane] = sum_q + sum_c * c_t + sum_h * h_t + sum_n * n_t
        # heat
        D = DCP * LANES + lane
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
        w[ETA_Z * LANES + lane], w[ETA_S * LANES + lane], w[ETA_T * LANES + lane] = h_z, h_s, h_t
        w[NU_Z * LANES + lane], w[NU_S * LANES + lane], w[NU_T * LANES + lane] = n_z, n_s, n_t
        w[P_Z * LANES + lane] = carbon * c_z + hydrogen * h_z + nitrogen * n_z
        w[P_S * LANES + lane] = carbon * c_s + hydrogen * h_s + nitrogen * n_s
        w[P_T * LANES + lane] = carbon * c_t + hydrogen * h_t + nitrogen * n_t


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
    balances(w)
    if at_pressure:
        amount_of_gas(w)
    if free_T or entropy:
        heat_balance(w, entropy, 1.0 if pair == UV else 0.0)
    if free_T:
        move(w, at_pressure, entropy)
    else:
        move_at_temperature(w, pair)
    foresee(w)


@vectorised
def _sums(q: Array, amounts: Array, first: int, size: int, linear: Array) -> None:
    """Atoms, oxygen excess and fixed species of a block of states, into its rows, species added one after the other."""
    for m in range(PARTS):
        row = (SUMS + m) * BLOCK
        for k in range(BLOCK):
            q[row + k] = 0.0
    for j in range(amounts.shape[1]):
        for k in range(size):
            q[Z * BLOCK + k] = amounts[first + k, j]
        for m in range(PARTS):
            row, weight = (SUMS + m) * BLOCK, linear[j, m]
            if weight != 0.0:
                for k in range(BLOCK):
                    q[row + k] += q[Z * BLOCK + k] * weight


@vectorised
def _two_constants(q: Array, tab: Array) -> None:
    """Equilibrium constants of carbon dioxide and water at the first temperatures, into the rows of eta and nu."""
    for r in range(2):
        k, row = 18 * r, (ETA + r) * BLOCK
        a0, a1, a2, a3, a4 = tab[k], tab[k + 1], tab[k + 2], tab[k + 3], tab[k + 4]
        a5, a6, a7, a8 = tab[k + 5], tab[k + 6], tab[k + 7], tab[k + 8]
        b0, b1, b2, b3, b4 = tab[k + 9], tab[k + 10], tab[k + 11], tab[k + 12], tab[k + 13]
        b5, b6, b7, b8 = tab[k + 14], tab[k + 15], tab[k + 16], tab[k + 17]
        for lane in range(BLOCK):
            T = q[T_ * BLOCK + lane]
            _, h, s = ranged(a0, a1, a2, a3, a4, a5, a6, a7, a8, b0, b1, b2, b3, b4, b5, b6, b7, b8, T, log(T))
            q[row + lane] = exp(s - h)


@vectorised
def _first_guess(q: Array, at_pressure: float) -> None:
    """First ln o and ln s from complete combustion.

    Lean: the oxygen left over; rich: the water-gas quadratic; near stoichiometric the cube root that dissociation
    of carbon dioxide and water to equal parts leaves.
    """
    for k in range(BLOCK):
        carbon, half, nitrogen = q[C_ * BLOCK + k], 0.5 * q[H_ * BLOCK + k], q[N_ * BLOCK + k]
        excess, sigma = q[E_ * BLOCK + k], q[SIGMA * BLOCK + k]
        x1, x2, x3 = q[STAYS * BLOCK + k], q[(STAYS + 1) * BLOCK + k], q[(STAYS + 2) * BLOCK + k]
        k1, k2 = q[ETA * BLOCK + k], q[NU * BLOCK + k]
        fixed = x1 + x2 + x3
        spare, lack = max(excess, 0.0), max(-excess, 0.0)
        whole = carbon + half + 0.5 * nitrogen + fixed + 0.5 * spare + TINY
        sigma = sigma + at_pressure * log(whole)
        per_s = exp(-sigma)
        near = exp(log(0.5 * (carbon / k1 + half / k2) * per_s + TINY) / 3.0)
        lean = math.sqrt(0.5 * spare * per_s)
        a, b, c = lack * k1 * k2 + TINY, lack * (k1 + k2) - carbon * k2 - half * k1, min(lack - carbon - half, 0.0)
        root = math.sqrt(b * b - 4.0 * a * c)
        up = max(b, 0.0)
        rich_up = -2.0 * c / (up + root + TINY)
        rich_down = 0.5 * (root - min(b, 0.0)) / a
        rich = rich_up if b > 0.0 else rich_down
        o = max(lean, near) if excess >= 0.0 else min(rich, near)
        o = min(max(o, 1e-140), 1e15)
        q[FIXED * BLOCK + k] = fixed
        q[FIXED_LOG * BLOCK + k] = x1 * log(x1 + TINY) + x2 * log(x2 + TINY) + x3 * log(x3 + TINY)
        q[SIGMA * BLOCK + k] = sigma
        q[Z * BLOCK + k] = log(o)
        q[ETA * BLOCK + k] = math.sqrt(half * per_s / (1.0 + k2 * o))
        q[NU * BLOCK + k] = math.sqrt(0.5 * nitrogen * per_s)


@vectorised
def _basis(q: Array, base: Array) -> None:
    """Coefficients of the gas as if all of it were CO, H2, O2, N2 and what stays."""
    for c in range(18):
        row = (BASE + c) * BLOCK
        b0, b1, b2, b3 = base[0, c], 0.5 * base[1, c], 0.5 * base[2, c], 0.5 * base[3, c]
        b4, b5, b6 = base[4, c], base[5, c], base[6, c]
        for k in range(BLOCK):
            value = q[C_ * BLOCK + k] * b0 + q[H_ * BLOCK + k] * b1 + q[OC * BLOCK + k] * b2 + q[N_ * BLOCK + k] * b3
            x1, x2, x3 = q[STAYS * BLOCK + k], q[(STAYS + 1) * BLOCK + k], q[(STAYS + 2) * BLOCK + k]
            q[row + k] = value + x1 * b4 + x2 * b5 + x3 * b6


@inlined
def _block(
    q: Array, codes: Codes, first: int, size: int, pair: int, x: Array, y: Array, start: Array,
    amounts: Array, linear: Array, base: Array, tab: Array, gas_constant: float, p0: float,
) -> None:  # fmt: skip
    """Fill the rows of a block of states; ``codes`` says where there is nothing that this method can solve."""
    _sums(q, amounts, first, size, linear)
    at_pressure = pair in (TP, HP, SP)
    for k in range(size):
        i = first + k
        excess, oc = q[E_ * BLOCK + k], q[OC * BLOCK + k]
        carbon, half = q[C_ * BLOCK + k], 0.5 * q[H_ * BLOCK + k]
        known = x[i] if pair in (TP, TV) else (y[i] if pair == ST else start[i])
        fine = math.isfinite(x[i]) and math.isfinite(y[i]) and y[i] > 0.0 and known > COLDEST and known < HOTTEST
        fine = fine and oc > 0.0 and carbon + half + excess > 0.0 and -excess < carbon + half
        codes[k] = SOOT if carbon > (oc + carbon) * CARBON_LIMIT else (DONE if fine else FAILED)
        T = known if fine else START
        size_ = math.log((y[i] / p0 if at_pressure else p0 * y[i] / gas_constant) if fine else 1.0)
        q[T_ * BLOCK + k] = T
        q[TARGET * BLOCK + k] = x[i] / gas_constant if fine else 1.0
        q[SIZE * BLOCK + k] = 0.0 if pair == ST else size_
        # ln s; at a pressure less the amount of gas, which `_first_guess` adds
        q[SIGMA * BLOCK + k] = -size_ if at_pressure else (-math.log(5e6 / p0) if pair == ST else size_ - math.log(T))
    _two_constants(q, tab)
    _first_guess(q, 1.0 if at_pressure or pair == ST else 0.0)
    _basis(q, base)


@vectorised
def _finish(w: Array, lane: int, atoms: Array, n: Array, own: Array) -> None:
    """Amounts ``n`` of a lane, corrected by its last step, the elements closed on those that it came with.

    ``atoms`` (5, SPECIES): C, H, N, O beyond C, and oxygen excess of the basis and the products.
    """
    d_z, d_s, d_t = w[DZ * LANES + lane], w[DS * LANES + lane], w[DT * LANES + lane]
    for j in range(4):
        n[j] = w[(MAJOR + j) * LANES + lane]
        own[j] = 0.0
    for j in range(REACTIONS):
        n[4 + j] = w[(K_ROW + j) * LANES + lane]
        own[4 + j] = w[(THETA + j) * LANES + lane]
    pull_c = pull_h = pull_n = weight_c = weight_h = weight_n = TINY
    for j in range(SPECIES):
        own[j] = d_s + atoms[3, j] * d_z + own[j] * d_t
        a_c, a_h, a_n = atoms[0, j] * n[j], atoms[1, j] * n[j], atoms[2, j] * n[j]
        pull_c += a_c * own[j]
        pull_h += a_h * own[j]
        pull_n += a_n * own[j]
        weight_c += a_c
        weight_h += a_h * atoms[1, j]
        weight_n += a_n * atoms[2, j]
    d_c, d_h, d_n = -pull_c / weight_c, -pull_h / weight_h, -pull_n / weight_n
    have_c = have_h = have_n = 0.0
    for j in range(SPECIES):
        n[j] *= 1.0 + (own[j] + atoms[0, j] * d_c + atoms[1, j] * d_h + atoms[2, j] * d_n)
        have_c += atoms[0, j] * n[j]
        have_h += atoms[1, j] * n[j]
        have_n += atoms[2, j] * n[j]
    n[CO2 if n[CO2] > n[CO] else CO] += w[C_ * LANES + lane] - have_c
    n[H2O if n[H2O] > n[H2] else H2] += 0.5 * (w[H_ * LANES + lane] - have_h)
    n[N2] += 0.5 * (w[N_ * LANES + lane] - have_n)
    have_e = 0.0
    for j in range(SPECIES):
        have_e += n[j] * atoms[4, j]
    left = w[E_ * LANES + lane] - have_e
    if n[O2] > n[CO] and n[O2] > n[H2]:
        n[O2] += 0.5 * left
    elif n[CO] > n[H2]:
        n[CO] -= left
        n[CO2] += left
    else:
        n[H2] -= left
        n[H2O] += left


@compiled
def solve(
    pair: int, x: Array, y: Array, amounts: Array, linear: Array, base: Array, tab: Array,
    atoms: Array, columns: Indices, stays: Indices, constants: tuple[float, float],
    start: Array, out: Array, T: Array, code: Codes, steps: npt.NDArray[np.int32],
) -> None:  # fmt: skip
    """Equilibrium of a batch.

    Parameters
    ----------
    pair, x, y, amounts : a code of `TP` to `ST`, arrays (N,) in SI, amounts (N, S) [kmol/kg].
    linear, base, tab, atoms, columns, stays : see `batch_gas.Constants`. constants : molar gas constant [J/(kmol K)]
        and reference pressure [Pa].
    start : (N,) temperature to start from [K].
    out, T, code, steps : results, written in place.
    """
    n = x.shape[0]
    gas_constant, p0 = constants
    w, q = np.zeros(ROWS * LANES), np.zeros(LOADED * BLOCK)
    codes = np.zeros(BLOCK, np.int8)
    found, own = np.zeros(SPECIES), np.zeros(SPECIES)
    state = np.full(LANES, -1)
    q[T_ * BLOCK : (T_ + 1) * BLOCK] = START
    following, loaded, busy = 0, 0, 0
    for lane in range(LANES):  # an idle lane computes something harmless
        for row in (T_, C_, H_, N_, FIXED, ETA, NU):
            w[row * LANES + lane] = START if row == T_ else 1.0
    while following < n or busy > 0:
        for lane in range(LANES):
            while state[lane] < 0 and following < n:
                if following == loaded:
                    size = min(BLOCK, n - loaded)
                    _block(q, codes, loaded, size, pair, x, y, start, amounts, linear, base, tab, gas_constant, p0)
                    loaded += size
                i = following
                k = i % BLOCK
                following += 1
                if codes[k] == DONE:
                    for row in range(LOADED):
                        w[row * LANES + lane] = q[row * BLOCK + k]
                    w[COUNT * LANES + lane] = 0.0
                    state[lane] = i
                    busy += 1
                else:
                    code[i] = codes[k]
                    steps[i] = 0
        step(w, tab, pair)
        for lane in range(LANES):
            i = state[lane]
            if i < 0:
                continue
            w[COUNT * LANES + lane] += 1.0
            miss, share = w[MISS * LANES + lane], w[SHARE * LANES + lane]
            ended = -1
            if miss < TOLERANCE and share > WIDEST:
                ended = WIDE
            elif miss < TOLERANCE and w[LAGGED * LANES + lane] < LAG:
                ended = DONE
                _finish(w, lane, atoms, found, own)
                out[i, :] = 0.0
                for j in range(SPECIES):
                    out[i, columns[j]] = max(found[j], 0.0)
                for j in range(stays.shape[0]):
                    out[i, stays[j]] = w[(STAYS + j) * LANES + lane]
                T[i] = w[T_ * LANES + lane]
            elif w[COUNT * LANES + lane] >= MAX_STEPS or not miss < 1e300:
                ended = WIDE if share > WIDEST else FAILED
            if ended >= 0:
                code[i] = ended
                steps[i] = int(w[COUNT * LANES + lane])
                state[lane] = -1
                busy -= 1
