"""Shared fixtures: the reference gas, a fake gas, and cases as the physics rooms take them."""

from __future__ import annotations

import importlib.util
import sys
from pathlib import Path

import cantera as ct
import numpy as np
import pytest

from fuelair import fuel as fuels
from fuelair.air import dry_air
from fuelair.charge import Recipe
from fuelair.cycle import fuel_air
from fuelair.cycle.breathing import DEFAULT_FREEZE, Settings, solve_charge
from fuelair.cycle.geometry import Volumes
from fuelair.gas.cantera_gas import CanteraGas
from fuelair.gas.species import build

RECIPE = {
    "equivalence_ratio": 1.0,
    "humidity": 0.0,
    "pressure": 101325.0,
    "temperature": 350.0,
    "egr_fraction": 0.0,
    "egr_temperature": np.nan,
    "combustion_efficiency": 1.0,
    "fuel_temperature": 298.15,
    "fuel_pressure": 101325.0,
    "evaporated_by_gas": 1.0,
    "exhaust_pressure": np.nan,
    "water_ratio": 0.0,
    "water_temperature": 298.15,
}
SETTINGS = {"pressure_limit": np.nan, "freeze_temperature": DEFAULT_FREEZE, "swept_volume": np.nan}


def make(
    fuel="iso-octane",
    admission="premixed",
    heat_addition="constant-volume",
    *,
    r=8.0,
    volumes=None,
    air=None,
    from_intake=False,
    residual=0.0,
    four_stroke=True,
    exponent=None,
    size=None,
    **given,
):
    """Recipe and settings of a batch; every physical key may be a number or an array."""
    values = RECIPE | SETTINGS | given
    residual_array = None if residual is None else np.asarray(residual, float)
    n = size or np.broadcast(r, *values.values(), 0.0 if residual is None else residual_array).size
    full = {k: np.array(np.broadcast_to(np.asarray(v, float), (n,))) for k, v in values.items()}
    full["exhaust_pressure"] = np.where(np.isnan(full["exhaust_pressure"]), full["pressure"], full["exhaust_pressure"])
    record = fuels.load(fuel) if isinstance(fuel, str) else fuel
    recipe = Recipe(
        table=build(record.vapour),
        fuel=record,
        air=air or dry_air(),
        admission=admission,
        from_intake=from_intake,
        **{k: full[k] for k in RECIPE},
    )
    settings = Settings(
        volumes=volumes or Volumes.dead_centres(np.array(np.broadcast_to(np.asarray(r, float), (n,)))),
        heat_addition=heat_addition,
        residual=None if residual is None else np.array(np.broadcast_to(residual_array, (n,))),
        exhaust_pressure=full["exhaust_pressure"],
        intake_pressure=full["pressure"],
        four_stroke=four_stroke,
        compression_exponent=None if exponent is None else np.array(np.broadcast_to(np.asarray(exponent, float), (n,))),
        **{k: full[k] for k in SETTINGS},
    )
    return recipe, settings


def trap(gas, recipe, settings, model="fuel-air-equilibrium", **basis):
    """The charge, its gas exchange solved with ``model``."""

    return solve_charge(recipe, gas, settings, lambda charge, own: fuel_air.passage(gas, charge, own, model), **basis)


def solve(gas, recipe, settings, model="fuel-air-equilibrium", **basis):
    """The solved cycle of ``model`` on its own charge."""
    return fuel_air.run(gas, trap(gas, recipe, settings, model, **basis), settings, model)


def _fake_module():
    spec = importlib.util.spec_from_file_location("fuelair_tests_fake_gas", Path(__file__).with_name("fake_gas.py"))
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="session")
def gas():
    return CanteraGas()


@pytest.fixture(scope="session")
def bundled_species():
    """Cantera's own species by name, N2 and O2 from its nine-coefficient file; read as text, see `gas.species`."""
    folder = Path(ct.__file__).parent / "data"
    files = ("nasa_gas.yaml", "airNASA9.yaml")
    gas, air = (ct.Species.list_from_yaml((folder / f).read_text(encoding="utf-8"), "species") for f in files)
    return {s.name: s for s in gas} | {s.name: s for s in air if s.name in ("N2", "O2")}


@pytest.fixture(scope="session")
def fake():
    """The class of the constant-cp gas in ``fake_gas.py``."""
    return _fake_module().FakeGas


@pytest.fixture(scope="session", name="make")
def _make():
    return make


@pytest.fixture(scope="session", name="trap")
def _trap():
    return trap


@pytest.fixture(scope="session", name="solve")
def _solve():
    return solve
