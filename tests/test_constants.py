"""Constants of water against the reference equation of state."""

import pytest

from sapflux import constants


def test_water_at_20_degrees_is_near_the_reference_equation():
    # Source: IAPWS-95 at 20 degC and 101 325 Pa, computed by the library CoolProp: 998.20715
    # kg m-3, 4184.0509 J kg-1 K-1, 0.598012 W m-1 K-1. The sap flow literature rounds to 1000,
    # 4182 and 0.5984: off by 0.18, 0.05 and 0.07 %.
    assert constants.WATER_DENSITY == pytest.approx(998.20715, rel=2e-3)
    assert constants.WATER_SPECIFIC_HEAT == pytest.approx(4184.0509, rel=6e-4)
    assert constants.WATER_CONDUCTIVITY == pytest.approx(0.598012, rel=8e-4)


def test_the_solar_constant_is_that_of_fao_56():
    # Source: FAO-56, equation 21: 0.0820 MJ m-2 min-1
    assert constants.SOLAR_CONSTANT == pytest.approx(1366.67, abs=0.005)
