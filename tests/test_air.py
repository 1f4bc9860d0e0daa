"""Air: saturation, humidity, the standard atmosphere, dry composition, reference conditions."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fuelair import air
from fuelair.air import DryAir

# Saturation pressure of water [Pa], computed with CoolProp (IAPWS-IF97).
SATURATION_IF97 = {
    273.16: 611.66,
    283.15: 1228.2,
    293.15: 2339.2,
    298.15: 3169.7,
    303.15: 4246.7,
    313.15: 7384.4,
    318.15: 9594.4,
    333.15: 19946.0,
    373.15: 101418.0,
}
# Humidity ratio of moist air as a real gas (ASHRAE RP-1485 as in CoolProp, computed): T, p, relative humidity, W.
HUMIDITY_REAL = [
    (298.15, 100e3, 0.30, 0.005997),
    (298.15, 101325.0, 0.50, 0.009926),
    (318.15, 100e3, 0.60, 0.03819),
    (303.15, 101325.0, 0.60, 0.01612),
]
# US Standard Atmosphere 1976 (= ISO 2533 here), geometric height; computed with the package `fluids`.
ATMOSPHERE = {
    1000.0: (281.651, 89876.0, 1.1117),
    2000.0: (275.154, 79501.0, 1.0066),
    3000.0: (268.659, 70121.0, 0.9093),
    5000.0: (255.676, 54048.0, 0.7364),
}


@pytest.mark.parametrize(("T", "p"), SATURATION_IF97.items())
def test_saturation_pressure_against_if97(T, p):
    # IAPWS-IF97 and the auxiliary equation of IAPWS-95 differ by up to 0.01 %; the list is rounded to 5 digits
    assert float(air.water_saturation_pressure(T)) == pytest.approx(p, rel=1.5e-4)


def test_saturation_pressure_against_iapws95():
    CoolProp = pytest.importorskip("CoolProp.CoolProp")
    T = np.linspace(273.16, 646.0, 60)
    reference = [CoolProp.PropsSI("P", "T", float(t), "Q", 1, "Water") for t in T]
    # The auxiliary equation is stated to meet IAPWS-95 within 0.025 % (Wagner and Pruss 2002, table 1, from memory)
    assert air.water_saturation_pressure(T) == pytest.approx(np.array(reference), rel=2.5e-4)


def test_saturation_pressure_at_and_above_the_critical_point():
    assert float(air.water_saturation_pressure(647.0959)) == pytest.approx(22.064e6, rel=1e-4)
    assert np.isposinf(air.water_saturation_pressure(np.array([647.096, 900.0]))).all()
    cold = air.water_saturation_pressure(np.array([230.0, 250.0, 273.16]))
    assert (np.diff(cold) > 0.0).all()
    # supercooled liquid at 250 K: 95.6 Pa by the hypsometric extension of IAPWS-95 (Murphy and Koop 2005 eq. 10, below)
    t = 250.0
    murphy_koop = np.exp(
        54.842763
        - 6763.22 / t
        - 4.210 * np.log(t)
        + 0.000367 * t
        + np.tanh(0.0415 * (t - 218.8)) * (53.878 - 1331.22 / t - 9.44523 * np.log(t) + 0.014025 * t)
    )  # coefficients from memory
    assert cold[1] == pytest.approx(murphy_koop, rel=0.01)


@given(st.floats(260.0, 640.0))
def test_dew_point_is_the_inverse_of_saturation(T):
    assert air.water_dew_point(air.water_saturation_pressure(T))[0] == pytest.approx(T, rel=1e-12)


def test_dry_gas_has_no_dew_point():
    dew = air.water_dew_point(np.array([0.0, 611.66]))
    assert np.isnan(dew[0])
    assert dew[1] == pytest.approx(273.16, abs=2e-3)


@pytest.mark.parametrize(("T", "p", "relative", "real"), HUMIDITY_REAL)
def test_humidity_ratio_lies_below_the_real_gas_by_the_enhancement_factor(T, p, relative, real):
    ideal = float(air.humidity_ratio(relative, T, p, air.dry_air().molar_mass))
    # the enhancement factor is 1.004 to 1.005 here; W rises a little more than in proportion to the vapour pressure
    assert 0.9940 < ideal / real < 0.9970


def test_humidity_ratio_by_hand():
    vapour = 0.6 * float(air.water_saturation_pressure(318.15))
    expected = 18.01528 / 28.9652 * vapour / (100e3 - vapour)
    assert float(air.humidity_ratio(0.6, 318.15, 100e3, 28.9652)) == pytest.approx(expected, rel=1e-14)


def test_vapour_that_would_exceed_the_pressure_has_no_humidity_ratio():
    assert np.isnan(air.humidity_ratio(1.0, 373.15, 101325.0, 28.9652))


@pytest.mark.parametrize(("altitude", "expected"), ATMOSPHERE.items())
def test_standard_atmosphere(altitude, expected):
    T, p = air.standard_atmosphere(altitude)
    assert pytest.approx(expected[0], abs=6e-4) == T
    assert p == pytest.approx(expected[1], abs=0.6)
    assert p / (287.05287 * T) == pytest.approx(expected[2], abs=6e-5)


def test_standard_atmosphere_at_sea_level_and_beyond_its_range():
    assert air.standard_atmosphere(0.0) == (288.15, 101325.0)
    assert air.standard_atmosphere(-2000.0)[1] > 127e3
    for altitude in (-2000.1, 11000.1, float("nan")):
        with pytest.raises(ValueError, match="outside -2000 to 11000 m"):
            air.standard_atmosphere(altitude)


def test_dry_air_of_the_standard():
    # ISO 2533 / US Standard Atmosphere 1976: molar mass 28.9644 kg/kmol with its traces of neon and lighter gases (from memory)
    old = air.dry_air(1976)
    assert old.molar_mass == pytest.approx(28.9644, abs=8e-4)
    assert sum(old.composition().values()) == pytest.approx(1.0, abs=1e-15)
    assert pytest.approx(314e-6, rel=1e-4) == old.CO2
    assert air.dry_air(2020).CO2 > air.dry_air(2010).CO2 > air.dry_air(2005).CO2 > air.dry_air(2000).CO2
    assert air.dry_air(2040) == air.dry_air(2025)
    assert pytest.approx(0.209476 / 0.78084, rel=1e-14) == old.O2 / old.N2


def test_simplified_air():
    mixture = DryAir.from_ratio(3.76)
    assert pytest.approx(3.76, rel=1e-15) == mixture.N2 / mixture.O2
    assert mixture.molar_mass == pytest.approx((31.9988 + 3.76 * 28.0134) / 4.76, rel=1e-12)


@pytest.mark.parametrize(
    "parts",
    [
        {"N2": 0.79, "O2": 0.22},
        {"N2": 0.79, "O2": 0.2},
        {"N2": 1.01, "O2": -0.01},
        {"N2": 0.995, "O2": 0.005},
        {"N2": 0.8, "O2": 0.21, "Ar": -0.01},
        {"N2": float("nan"), "O2": 0.21},
    ],
)
def test_dry_air_that_is_none_is_refused(parts):
    with pytest.raises(ValueError, match="dry air must be mole fractions"):
        DryAir(**parts)


def test_reference_conditions_agree_with_their_own_text():
    assert set(air.REFERENCE) == {"isa", "iso-3046", "iso-1585", "iacs-m28"}
    iso = air.REFERENCE["iso-1585"]
    vapour = iso.relative_humidity * float(air.water_saturation_pressure(iso.temperature))
    assert vapour == pytest.approx(1000.0, rel=2e-4)  # 99 kPa dry air and 1 kPa vapour
    for ambient in air.REFERENCE.values():
        assert 0.0 <= ambient.relative_humidity <= 1.0
        assert ambient.source
