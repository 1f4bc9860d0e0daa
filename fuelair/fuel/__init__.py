"""Fuels: records with sourced values, blends, a user's own fuels, and the enthalpy of the supplied liquid.

Nothing here knows gas tables: the vapour goes to the gas room as plain numbers (:class:`Vapour`).
"""

from fuelair.fuel.blending import blend
from fuelair.fuel.cards import Row, card
from fuelair.fuel.model import Fuel, Value, Vapour
from fuelair.fuel.records import load, names
from fuelair.fuel.saturation import Saturation
from fuelair.fuel.users import own

__all__ = ["Fuel", "Row", "Saturation", "Value", "Vapour", "blend", "card", "load", "names", "own"]
