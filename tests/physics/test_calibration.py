"""Calibrations fitted to gravimetric flux, against a reference library and by simulation."""

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given
from hypothesis import strategies as st

from sapflux.physics.calibration import fit_power_law


def observations(generator, stems=6, each=10, between=0.15, within=0.2):
    """(index, flux [g m-2 s-1], stem) about 120 K^1.25, with departures of stems and points."""
    index = generator.uniform(0.05, 1.2, stems * each)
    stem = np.repeat(np.arange(stems), each)
    own = generator.gamma(1 / between**2, between**2, stems)[stem]
    point = generator.gamma(1 / within**2, within**2, len(index))
    return index, 120.0 * index**1.25 * own * point, stem


def reference(index, flux):
    """statsmodels: generalised linear model, Gamma family, logarithmic link."""
    design = np.column_stack([np.ones(len(index)), np.log(index)])
    return sm.GLM(flux, design, family=sm.families.Gamma(sm.families.links.Log()))


@pytest.mark.parametrize("seed", range(5))
def test_estimates_and_covariance_are_those_of_a_gamma_model(seed):
    index, flux, _ = observations(np.random.default_rng(seed))
    found, expected = fit_power_law(index, flux), reference(index, flux).fit(tol=1e-14, maxiter=99)
    assert [np.log(found.factor), found.exponent] == pytest.approx(expected.params, rel=1e-8)
    np.testing.assert_allclose(found.covariance, expected.cov_params(), rtol=1e-6)
    assert found.residual_spread**2 == pytest.approx(expected.scale, rel=1e-8)
    assert not found.by_stem and found.stems == 0


@pytest.mark.parametrize("seed", range(5))
def test_with_stems_the_covariance_is_that_of_the_reference_without_each_stem(seed):
    index, flux, stem = observations(np.random.default_rng(seed))
    found = fit_power_law(index, flux, stem)
    left = np.array([
        reference(index[stem != n], flux[stem != n]).fit(tol=1e-14, maxiter=99).params
        for n in range(6)
    ])  # fmt: skip
    assert found.by_stem and found.stems == 6
    # Jackknife, Efron (1982): (G - 1) / G times the sum of squares, np.cov divides by G - 1.
    expected = 25.0 / 6.0 * np.cov(left.T)
    np.testing.assert_allclose(found.covariance, expected, rtol=1e-6)


def test_two_stems_are_too_few_for_a_scatter_among_stems():
    index, flux, stem = observations(np.random.default_rng(1), stems=2)
    found = fit_power_law(index, flux, stem)
    assert not found.by_stem and found.stems == 2
    np.testing.assert_array_equal(found.covariance, fit_power_law(index, flux).covariance)


def test_a_simulated_calibration_is_recovered_without_bias():
    # 400 calibrations of 6 stems. Means: three standard errors of 400; intervals: 95 % by Student's
    # t of 5 degrees of freedom (2.571), three standard errors of 400 to either side.
    generator = np.random.default_rng(8)
    found = [fit_power_law(*observations(generator, stems=6)) for _ in range(400)]
    for values, errors, true in (
        ([np.log(f.factor) for f in found], [f.ln_factor_error for f in found], np.log(120.0)),
        ([f.exponent for f in found], [f.exponent_error for f in found], 1.25),
    ):
        values = np.array(values)
        # the logarithm of the factor is biased by half its variance at most
        bias = 3 * values.std() / 20 + values.var()
        assert values.mean() == pytest.approx(true, abs=bias)
        inside = (np.abs(values - true) < 2.571 * np.array(errors)).mean()
        assert inside == pytest.approx(0.95, abs=0.033)


def test_the_curve_is_the_mean_flux_not_the_mean_of_its_logarithm():
    generator = np.random.default_rng(3)
    index = generator.uniform(0.2, 1.0, 20000)
    # A lognormal of deviation 0.6 has the mean exp(0.18) = 1.197 over its median.
    flux = 100.0 * index * np.exp(generator.normal(0.0, 0.6, len(index)))
    found = fit_power_law(index, flux)
    assert found.factor == pytest.approx(119.7, rel=0.02)
    assert found.exponent == pytest.approx(1.0, abs=0.03)


def test_observations_at_and_below_zero_count():
    index = np.array([0.05, 0.06, 0.05, 0.06, 0.05, 0.1, 0.2, 0.5, 1.0])
    flux = np.array([-0.5, 0.0, 4.0, 5.0, 6.0, 8.0, 18.0, 52.0, 120.0])
    found = fit_power_law(index, flux)
    without = fit_power_law(index[2:], flux[2:])
    assert found.mean(0.05) < without.mean(0.05)
    relative = flux / found.mean(index) - 1.0
    # by hand: the equations of the estimate, sums of relative residuals with 1 and ln K
    assert abs(relative.sum()) < 1e-9 and abs((relative * np.log(index)).sum()) < 1e-9


def test_fluxes_that_no_power_law_has_as_its_mean_are_refused():
    # The mean at the low end would have to be zero and below.
    with pytest.raises(ValueError, match="does not settle"):
        fit_power_law([0.01, 0.02, 0.1, 0.2, 0.5, 1.0], [-0.2, 0.0, 8.0, 18.0, 52.0, 120.0])


def test_fluxes_without_a_positive_mean_are_refused():
    with pytest.raises(ValueError, match="sum of the flux is not positive"):
        fit_power_law([0.1, 0.2, 0.3, 0.4, 0.5], [0.0, -1.0, 0.5, 0.2, 0.1])


@given(st.floats(20.0, 800.0), st.floats(0.6, 2.0))
def test_points_on_a_curve_give_the_curve(factor, exponent):
    index = np.array([0.05, 0.1, 0.3, 0.7, 1.1])
    found = fit_power_law(index, factor * index**exponent)
    assert found.factor == pytest.approx(factor, rel=1e-9)
    assert found.exponent == pytest.approx(exponent, abs=1e-9)
    assert found.residual_spread < 1e-9


@given(st.floats(0.1, 10.0))
def test_another_unit_of_flux_changes_the_factor_alone(scale):
    index, flux, stem = observations(np.random.default_rng(2))
    one, other = fit_power_law(index, flux, stem), fit_power_law(index, scale * flux, stem)
    assert other.factor == pytest.approx(scale * one.factor, rel=1e-9)
    np.testing.assert_allclose(other.covariance, one.covariance, rtol=1e-6)
