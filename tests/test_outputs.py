"""The weekly outputs by hand: power, flows, exhaust composition, dew point, carbon dioxide, companions."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest

import fuelair
from fuelair import air, resources
from fuelair.errors import InputError
from fuelair.gas.engine import Status
from fuelair.outputs import exhaust_equivalence_ratio

DEMOS = ("workboat", "hydrogen-genset", "methanol-ferry", "gasoline-launch")
ENGINE = {"bore": 0.1, "stroke": 0.12, "rod_length": 0.2, "cylinders": 4, "compression_ratio": 14.0, "speed": 25.0}
LEAN = {
    "engine": ENGINE,
    "fuel": {"name": "n-dodecane", "admission": "direct"},
    "charge": {"equivalence_ratio": 0.5, "pressure": 2e5, "temperature": 340.0},
    "combustion": {"heat_addition": "constant-pressure"},
}


def case(**changes):
    return fuelair.Case.from_dict(LEAN).replace({k.replace("__", "."): v for k, v in changes.items()})


@pytest.fixture(scope="module")
def lean():
    return fuelair.assess(case())


@pytest.fixture(scope="module")
def demos():
    return {name: fuelair.assess(fuelair.Case.read(resources.demos() / f"{name}.toml")) for name in DEMOS}


def test_power_and_flows_by_hand(lean):
    e, f = lean.engine_figures, lean.figures()
    swept = 0.25 * math.pi * 0.1**2 * 0.12
    assert lean.swept_volume == pytest.approx(swept, rel=1e-14)
    assert e["indicated_power_W"] == pytest.approx(f["imep_gross_Pa"] * swept * 4 * 12.5, rel=1e-12)
    assert e["net_indicated_power_W"] == pytest.approx(f["imep_net_Pa"] * swept * 4 * 12.5, rel=1e-12)
    trapped = swept * 14.0 / 13.0 / float(lean.charge.trapped.v[0])
    assert e["trapped_mass_kg"] == pytest.approx(trapped, rel=1e-12)
    assert e["fuel_mass_flow_kg_per_s"] == pytest.approx(float(lean.charge.fuel_mass[0]) * trapped * 50.0, rel=1e-12)
    assert e["air_mass_flow_kg_per_s"] == pytest.approx(trapped * 50.0, rel=1e-12)
    assert e["exhaust_mass_flow_kg_per_s"] == pytest.approx(e["air_mass_flow_kg_per_s"] + e["fuel_mass_flow_kg_per_s"], rel=1e-12)
    assert e["volumetric_efficiency"] == pytest.approx(14.0 / 13.0, rel=1e-9)
    assert e["indicated_power_W"] == pytest.approx(
        e["fuel_mass_flow_kg_per_s"] * float(lean.charge.lower_heating_value[0]) * f["indicated_efficiency"], rel=1e-12
    )


def test_a_two_stroke_fires_twice_as_often():
    two = fuelair.assess(case(engine__strokes_per_cycle=2, charge__scavenging_efficiency=1.0))
    one = fuelair.assess(case())
    assert two.engine_figures["indicated_power_W"] == pytest.approx(2.0 * one.engine_figures["indicated_power_W"], rel=1e-12)
    assert two.figures()["pmep_Pa"] == 0.0


def test_without_geometry_or_speed_there_is_no_power():
    bare = fuelair.Case.from_dict({**LEAN, "engine": {"compression_ratio": 14.0}})
    e = fuelair.assess(bare).engine_figures
    always = {"volumetric_efficiency", "effective_compression_ratio", "effective_expansion_ratio"}
    assert {k for k, v in e.items() if v is None} == set(e) - always
    assert e["effective_compression_ratio"] == pytest.approx(14.0, rel=1e-12)
    still = fuelair.Case.from_dict({**LEAN, "engine": {k: v for k, v in ENGINE.items() if k != "speed"}})
    e = fuelair.assess(still).engine_figures
    assert e["trapped_mass_kg"] > 0.0
    assert e["indicated_power_W"] is None


def test_exhaust_composition_of_a_lean_charge_by_hand(lean):
    """0.5 C12H26 + 18.5 O2 with the dry air it comes in: 6 CO2, 6.5 H2O, 9.25 O2, less what nitric oxide holds."""
    x, dry = lean.exhaust_figures, air.dry_air()
    other = 18.5 / dry.O2 * (1.0 - dry.O2)
    carbon = 6.0 + 18.5 / dry.O2 * dry.CO2
    whole = carbon + 6.5 + 9.25 + other - 18.5 / dry.O2 * dry.CO2
    # frozen at 1740 K: half a mole of oxygen is bound in each of nitric oxide, 0.1 % of it in hydroxyl
    assert x["exhaust_CO2_wet"] == pytest.approx(carbon / whole, rel=5e-4)
    assert x["exhaust_H2O_wet"] == pytest.approx(6.5 / whole, rel=2e-3)
    assert x["exhaust_O2_wet"] + 0.5 * x["exhaust_NO_wet"] == pytest.approx(9.25 / whole, rel=1e-3)
    assert x["exhaust_CO2_dry"] == pytest.approx(x["exhaust_CO2_wet"] / (1.0 - x["exhaust_H2O_wet"]), rel=1e-14)
    assert x["exhaust_O2_dry"] == pytest.approx(x["exhaust_O2_wet"] / (1.0 - x["exhaust_H2O_wet"]), rel=1e-14)
    dew = x["exhaust_dew_point_K"]
    assert float(air.water_saturation_pressure(dew)) == pytest.approx(x["exhaust_H2O_wet"] * 101325.0, rel=1e-9)
    assert x["exhaust_temperature_K"] == x["exhaust_temperature_before_scavenge_air_K"] == lean.figures()["exhaust_temperature_K"]


def test_carbon_dioxide_by_hand(lean):
    carbon = 12 * 12.011 / (12 * 12.011 + 26 * 1.008)
    per_kg = carbon * 44.009 / 12.011
    x, f = lean.exhaust_figures, lean.figures()
    assert x["co2_kg_per_J_fuel"] == pytest.approx(per_kg / float(lean.charge.lower_heating_value[0]), rel=2e-4)
    assert x["co2_kg_per_J"] == pytest.approx(per_kg * f["isfc_kg_per_J"], rel=2e-4)


@pytest.mark.parametrize("phi", [0.3, 0.8, 1.0, 1.3])
@pytest.mark.parametrize("name", ["iso-octane", "methanol", "ammonia", "natural-gas", "hydrogen"])
def test_the_equivalence_ratio_of_the_exhaust_is_that_of_the_charge(name, phi):
    a = fuelair.assess(
        fuelair.Case.from_dict(
            {
                "engine": {"compression_ratio": 9.0},
                "fuel": {"name": name, "admission": "premixed"},
                "charge": {
                    "equivalence_ratio": phi,
                    "intake_pressure": 1e5,
                    "intake_temperature": 400.0,
                    "residual_fraction": 0.1,
                    "egr_fraction": 0.15,
                    "relative_humidity": 0.5,
                    "ambient_temperature": 300.0,
                },
                "combustion": {"heat_addition": "constant-volume"},
            }
        )
    )
    assert a.exhaust_figures["exhaust_equivalence_ratio"] == pytest.approx(phi, rel=1e-9)


def test_no_tracer_no_equivalence_ratio(gas, make, solve):
    from fuelair.air import DryAir

    run = solve(gas, *make("ammonia", "premixed", equivalence_ratio=0.8, air=DryAir.from_ratio(3.76)))
    assert np.isnan(exhaust_equivalence_ratio(run.charge, run.exhaust.leaving.amounts)).all()
    run = solve(gas, *make("methane", "premixed", equivalence_ratio=0.8, air=DryAir.from_ratio(3.76)))
    assert exhaust_equivalence_ratio(run.charge, run.exhaust.leaving.amounts) == pytest.approx(0.8, rel=1e-10)


def test_short_circuited_air_in_flows_and_exhaust():
    keys = {"engine__strokes_per_cycle": 2, "charge__scavenging_efficiency": 0.9}
    plain, scavenged = fuelair.assess(case(**keys)), fuelair.assess(case(**keys, charge__scavenge_ratio=1.35))
    a, b = plain.engine_figures, scavenged.engine_figures
    assert b["indicated_power_W"] == a["indicated_power_W"]
    # 1.35 delivered per kg trapped, 0.9 of it kept: air flow 1.5 times what is trapped
    assert b["air_mass_flow_kg_per_s"] == pytest.approx(1.5 * a["air_mass_flow_kg_per_s"], rel=1e-12)
    extra = 0.5 * a["air_mass_flow_kg_per_s"]
    assert b["exhaust_mass_flow_kg_per_s"] == pytest.approx(a["exhaust_mass_flow_kg_per_s"] + extra, rel=1e-12)
    x, y = plain.exhaust_figures, scavenged.exhaust_figures
    assert y["exhaust_temperature_before_scavenge_air_K"] == x["exhaust_temperature_K"]
    assert 340.0 < y["exhaust_temperature_K"] < x["exhaust_temperature_K"]
    # carbon is diluted: what leaves of it per second is the same, less that the fresh air brings
    assert y["exhaust_equivalence_ratio"] < x["exhaust_equivalence_ratio"]
    assert scavenged.charge_figures()["equivalence_ratio"] == 0.5


def test_the_stoichiometric_flame_is_the_hottest():
    a = fuelair.assess(case())
    assert a.flame_temperature > a.figures()["peak_temperature_K"] + 300.0
    near = fuelair.assess(case(charge__equivalence_ratio=1.0))
    # all of the oxygen used by the fuel that is there: the same flame
    assert near.flame_temperature == pytest.approx(near.figures()["peak_temperature_K"], rel=1e-9)
    assert fuelair.assess(case(fuel__name="methane", fuel__admission="premixed")).flame_temperature is None


@pytest.mark.parametrize("name", DEMOS)
def test_demo_outputs_hang_together(demos, name):
    a = demos[name]
    e, x, f = a.engine_figures, a.exhaust_figures, a.figures()
    assert None not in e.values()
    rate = a.case.engine.speed / 2.0 * a.case.engine.cylinders
    assert e["net_indicated_power_W"] == pytest.approx(f["imep_net_Pa"] * a.swept_volume * rate, rel=1e-12)
    assert e["exhaust_mass_flow_kg_per_s"] == pytest.approx(e["air_mass_flow_kg_per_s"] + e["fuel_mass_flow_kg_per_s"], rel=1e-9)
    wet = x["exhaust_O2_wet"] + x["exhaust_CO2_wet"] + x["exhaust_H2O_wet"]
    assert 0.1 < wet < 0.35
    assert x["exhaust_equivalence_ratio"] == pytest.approx(a.charge_figures()["equivalence_ratio"], rel=1e-9)
    assert (x["co2_kg_per_J"] == 0.0) == (name == "hydrogen-genset")


def test_exhaust_flow_is_what_leaves_the_cylinder_recirculated_part_included():
    a = fuelair.assess(case(charge__egr_fraction=0.25))
    e = a.engine_figures
    through = float((a.charge.dry_air + a.charge.water_in + a.charge.recirculated + a.charge.fuel_mass)[0])
    per_second = e["trapped_mass_kg"] * 50.0
    assert a.charge.recirculated[0] == pytest.approx(0.25, rel=1e-12)  # of the trapped mass, the fuel not in it
    assert e["exhaust_mass_flow_kg_per_s"] == pytest.approx(through * per_second, rel=1e-9)


def test_heat_limited_by_oxygen_burns_what_the_oxygen_burns():
    """Just past the point where the oxygen runs out the limited heat is that of the unlimited cycle."""
    rich = {"fuel__name": "methane", "fuel__admission": "premixed", "combustion__heat_addition": "constant-volume"}
    for efficiency, phi in ((1.0, 1.0 + 1e-6), (0.9, (1.0 + 1e-6) / 0.9)):
        a = fuelair.assess(case(**rich, charge__equivalence_ratio=phi, combustion__combustion_efficiency=efficiency))
        heat = a.companions["oxygen-limited-heat"]["air-cold"].figures["heat_added_J_per_kg"][0]
        assert heat == pytest.approx(float(a.charge.heat_added[0]), rel=1e-5), efficiency
    a = fuelair.assess(case(**rich, charge__equivalence_ratio=1.25))
    heat = a.companions["oxygen-limited-heat"]["air-cold"].figures["heat_added_J_per_kg"][0]
    assert heat == pytest.approx(float(a.charge.heat_added[0]) / 1.25, rel=1e-9)


def test_companions_that_were_not_solved_show_no_figures():
    # at r = 16 constant k compresses above 48 bar, real air stays below
    a = fuelair.assess(
        case(
            combustion__heat_addition="pressure-limited",
            combustion__pressure_limit=48e5,
            charge__pressure=101325.0,
            charge__temperature=350.0,
            engine__compression_ratio=16.0,
        )
    )
    group = a.companions["same-cutoff-ratio"]
    assert [m for m, r in group.items() if r.status[0] != Status.OK] == ["air-cold"]
    shown = a.to_dict()["companions"]["same-cutoff-ratio"]
    assert shown["air-variable"]["indicated_efficiency"] > 0.5
    figures = {k: v for k, v in shown["air-cold"].items() if k not in ("status", "reason", "flags")}
    assert set(figures.values()) == {None}


def test_more_vapour_than_air_is_a_mistake_of_the_input():
    """Saturated air of 335 K at 0.2 bar does not exist: its vapour alone has 0.22 bar."""
    wrong = case(charge__ambient_pressure=0.2e5, charge__ambient_temperature=335.0, charge__relative_humidity=1.0)
    with pytest.raises(InputError, match="humidity"):
        fuelair.assess(wrong)


@pytest.mark.parametrize("name", DEMOS)
def test_numbers_of_a_demo_are_numbers(demos, name):
    text = json.dumps(demos[name].to_dict(), allow_nan=False)
    assert len(text) > 5000
    frame = demos[name].table()
    assert np.isfinite(frame.drop(columns="status").to_numpy(float)).all()
    states = demos[name].states()
    assert np.isfinite(states[["T_K", "p_Pa", "v_m3_per_kg", "V_m3", "mass_kg"]].to_numpy(float)).all()
    assert (states["V_m3"] / states["mass_kg"]).to_numpy() == pytest.approx(states["v_m3_per_kg"].to_numpy(), rel=1e-12)
