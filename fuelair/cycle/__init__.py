"""Cycle models: air-standard and fuel-air, their stages, gas exchange, ladder and exergy."""
