"""Sapwood properties against worked numbers of the published forms."""

import numpy as np
import pytest

from sapflux.physics import wood


@pytest.mark.parametrize(
    ("dry_density", "water_content", "diffusivity"),
    # Form of Burgess et al. (2001) worked by hand, cm2 s-1, five decimals. For the first:
    # G = 0.5, F = 1 - 0.5 * 1.6536 = 0.1732, Kd = 0.04182 * (21 - 3.464) = 0.73336,
    # K = 0.5984 * 0.5 + 0.73336 * 0.5 = 0.66588; rho c = 1000 * 2691; K / (rho c) = 2.4745e-7.
    # For the second: F = 0.4232, Kd = 0.52426, K = 0.1496 + 0.39319 = 0.54279;
    # rho c = 500 * (1200 + 2091) = 1.6455e6.
    [(500.0, 1.0, 0.00247), (500.0, 0.5, 0.00330)],
)
def test_diffusivity_of_worked_examples(dry_density, water_content, diffusivity):
    found = wood.thermal_diffusivity(dry_density, water_content) * 1e4
    assert found == pytest.approx(diffusivity, abs=0.5e-5)


def test_conductivity_of_a_worked_example():
    # 0.66588, see above.
    assert wood.thermal_conductivity(500.0, 1.0) == pytest.approx(0.66588, abs=0.5e-5)


def test_diffusivity_lies_in_the_range_seen_in_sapwood():
    # 0.0015-0.0035 cm2 s-1 over densities and water contents of sapwood: common practice.
    density = np.array([380.0, 430.0, 480.0, 560.0, 620.0])
    water = np.array([1.6, 1.3, 1.0, 0.8, 0.6])
    found = wood.thermal_diffusivity(density, water) * 1e4
    assert ((found > 0.0015) & (found < 0.0035)).all()


@pytest.mark.parametrize(
    ("dry_density", "water_content", "factor"),
    # Formula of Barrett et al. (1995) worked by hand, three decimals, e.g.
    # 400 * (1200 + 1.5 * 4182) / (1000 * 4182) = 2989.2e3 / 4182e3 = 0.715.
    [(400.0, 1.5, 0.715), (500.0, 1.0, 0.643), (600.0, 0.7, 0.592), (450.0, 1.2, 0.669)],
)
def test_conversion_factor_of_worked_examples(dry_density, water_content, factor):
    found = wood.conversion_factor(dry_density, water_content)
    assert found == pytest.approx(factor, abs=0.5e-3)


def test_fresh_wood_that_is_all_water_is_water():
    # By hand: heat capacity tends to that of water as the water content grows without end.
    assert wood.specific_heat(1e9) == pytest.approx(4182.0, rel=1e-6)
    assert wood.specific_heat(0.0) == 1200.0


def test_void_fraction_is_zero_where_the_wood_is_full():
    # Water volume + cell wall volume = 1: 0.5 * (0.6536 + mc) = 1 at mc = 1.3464.
    assert wood.void_fraction(500.0, 1.3464) == pytest.approx(0.0, abs=1e-12)


def test_flux_density_in_trade_units():
    # 10 cm h-1 in wood of 500 kg m-3 with its mass of water: 6.435 cm3 cm-2 h-1, which is
    # 6.435 * 1000 / 100 / 3600 kg m-2 s-1 = 17.87 g m-2 s-1.
    found = wood.flux_density(10 / 100 / 3600, 500.0, 1.0)
    assert found * 1e3 == pytest.approx(17.87, abs=0.5e-2)


def test_flux_density_is_odd_and_linear_in_velocity():
    upward = np.linspace(0.0, 1e-4, 11)
    velocity = np.concatenate([-upward, upward])
    flux = wood.flux_density(velocity, 460.0, 1.1)
    np.testing.assert_array_equal(flux[:11], -flux[11:])
    assert flux[11] == 0.0
    np.testing.assert_allclose(wood.flux_density(2 * velocity, 460.0, 1.1), 2 * flux, rtol=1e-14)


def test_absent_wood_is_nan():
    assert np.isnan(
        wood.thermal_diffusivity(np.array([np.nan, 500.0]), np.array([1.0, np.nan]))
    ).all()
