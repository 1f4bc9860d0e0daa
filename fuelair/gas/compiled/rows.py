"""Layout of the workspace of `nested`, the codes that its parts share, and their tolerances."""

from __future__ import annotations

REACTIONS = 14
"""CO2 H2O OH H O NO N NO2 HO2 N2O H2O2 CH4 NH3 HCN, in this order, after the basis CO H2 O2 N2."""
SPECIES = 4 + REACTIONS
CO, H2, O2, N2, CO2, H2O = range(6)
PARTS = 8
"""Columns of the sums over species: C, H, N, O beyond C, oxygen excess, up to three fixed species."""
TP, TV, HP, UV, SP, SV, ST = range(7)
DONE, FAILED, WIDE, SOOT, UNFIT = range(5)
"""How a state ended: solved, not solved here, rich in methane, ammonia or hydrogen cyanide, bound to form carbon, no
numbers given."""

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
    ETA_Z, ETA_S, ETA_T, NU_Z, NU_S, NU_T, C_Z, C_S,
    PER_C, PER_H, PER_N, SUM_C, SUM_H, SUM_N, G_C, G_H, G_N, UP, DOWN, PER_F,
) = range(LOADED, LOADED + 45)  # fmt: skip
MAJOR = LOADED + 45  # SPECIES rows of amounts: CO H2 O2 N2, then the products
K_ROW = MAJOR + 4  # the products' rows; before their amounts they hold the equilibrium constants
THETA = MAJOR + SPECIES  # enthalpy of reaction over R T, zero for the basis
DCP = THETA + SPECIES
ROWS = DCP + SPECIES
ANSWER = Z_E
"""Where a finished state has its 8 rows of properties: T p v u h s cp and speed of sound."""
BOUNDED = 1e-8
"""Largest relative step of temperature that a finished state may still ask for."""
