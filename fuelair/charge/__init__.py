"""From air, fuel, water, recirculated exhaust and residual gas to the trapped charge.

Streams are kept per kg of fresh dry air and mixed at the end; results are per kg of trapped gas.
Trapped gas holds the fuel when it is admitted before compression (``premixed``, ``port-liquid``,
``early-direct``); with ``direct`` the fuel joins at combustion and the trapped gas holds none.
"""

from fuelair.charge.mixing import COLDEST, compose, held
from fuelair.charge.recipe import (
    ADMISSIONS,
    WATER_CP,
    WATER_LATENT_HEAT,
    Admission,
    Recipe,
    enters_as_liquid,
    heating_value,
    supply_enthalpy,
    water_enthalpy,
)
from fuelair.charge.trapped import BurnedGas, Charge

__all__ = [
    "ADMISSIONS",
    "COLDEST",
    "WATER_CP",
    "WATER_LATENT_HEAT",
    "Admission",
    "BurnedGas",
    "Charge",
    "Recipe",
    "compose",
    "enters_as_liquid",
    "heating_value",
    "held",
    "supply_enthalpy",
    "water_enthalpy",
]
