"""Citation keys -> full reference and standing."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Standing = Literal["read", "computed", "from memory", "common practice"]


@dataclass(frozen=True, slots=True)
class Source:
    """One source: key, full reference, how it was used, and whether it was read or remembered."""

    key: str
    reference: str
    standing: Standing


_ALL = (
    Source(
        "cantera-data",
        "Species data nasa_gas.yaml bundled with Cantera (NASA seven-coefficient polynomials, "
        "200 to 6000 K; each entry there names its origin), N2 and O2 from airNASA9.yaml (nine-coefficient); "
        "Cantera, cantera.org",
        "read",
    ),
    Source("iso2533", "ISO 2533:1975, Standard Atmosphere (same dry air as US Standard Atmosphere 1976)", "from memory"),
    Source(
        "wagner1993",
        "W. Wagner, A. Pruss, J. Phys. Chem. Ref. Data 22 (1993) 783: saturation pressure of water; "
        "coefficients from memory, tested against IAPWS-95 and IAPWS-IF97",
        "from memory",
    ),
    Source("iso3046", "ISO 3046-1:2002, reference conditions", "from memory"),
    Source("iso1585", "ISO 1585, reference conditions", "from memory"),
    Source("iacsm28", "IACS UR M28, reference conditions of marine engines", "from memory"),
    Source("freeze1740", "Exhaust composition leaves equilibrium near 1740 K (water-gas ratio 3.5)", "common practice"),
    Source(
        "virial",
        "Second and third virial coefficients of the pure fluids' reference equations of state, evaluated with "
        "CoolProp 8.0.0 and fitted; fluids, references and fit errors in mechanisms/virial/virial.toml",
        "computed",
    ),
    Source(
        "pengrobinson1976",
        "D.-Y. Peng, D. B. Robinson, Ind. Eng. Chem. Fundam. 15 (1976) 59, as implemented in Cantera; critical "
        "constants as carried by the package chemicals 1.5.2",
        "from memory",
    ),
    Source(
        "lemmon2000",
        "E. W. Lemmon, R. T. Jacobsen, S. G. Penoncello, D. G. Friend, J. Phys. Chem. Ref. Data 29 "
        "(2000) 331: thermodynamic properties of air, through CoolProp 8.0.0",
        "computed",
    ),
    Source("szargut", "J. Szargut, exergy reference atmosphere and standard chemical exergies", "from memory"),
    Source("styrylo1964", "J. Szargut, T. Styrylo 1964: chemical exergy of technical fuels", "from memory"),
    Source("ratios", "Usual compression ratios: spark ignition 6 to 14, compression ignition 12 to 24", "common practice"),
    Source(
        "first-law",
        "Blowdown and residual gas by the first law of open systems; Heywood 1988 ch. 5 prints the "
        "same balances for constant specific heats",
        "from memory",
    ),
)

SOURCES: dict[str, Source] = {s.key: s for s in _ALL}


def cite(*keys: str) -> list[Source]:
    """Sources of the given keys, in the given order, without repeats; KeyError if unknown."""
    return [SOURCES[k] for k in dict.fromkeys(keys)]
