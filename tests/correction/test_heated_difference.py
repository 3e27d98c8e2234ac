"""Millivolts to kelvin: what the stem's temperature does to the voltage and to the wood.

The numbers are those of the type T reference function; that wood conducts 0.2 % better for each
kelvin is from memory (Wood Handbook: 2 to 3 % in 10 K).
"""

import numpy as np
import pytest
import thermocouple_its90
import xarray as xr
from correction_records import record

import sapflux.correction  # noqa: F401
from sapflux.physics import dissipation
from sapflux.stage import REGISTRY

ZERO = 273.15
NIGHT, DAY = 15.0, 23.0  # degC of the stem
AT_REST, IN_FLOW = 10.0, 10.0 / 1.2  # K: an index of 0.2
METHODS = ("its90_given", "its90_and_wood", "its90_alone", "constant")


def call(*arrays, **settings):
    return REGISTRY["heat_dissipation", "heated_difference"].function(*arrays, **settings)


def volts(kelvin, celsius):
    """Voltage of a pair by the reference library."""
    hot, cold = (thermocouple_its90.TypeT.emf(t) for t in (celsius + kelvin, celsius))
    return (hot - cold) * 1e-3


def night_and_day(growth):
    """Voltages at rest by night and in flow by day, in wood that conducts better when warm.

    growth : of the conductivity per kelvin above 20 degC [K-1].
    """
    return record([
        volts(AT_REST / (1.0 + growth * (NIGHT - 20.0)), NIGHT),
        volts(IN_FLOW / (1.0 + growth * (DAY - 20.0)), DAY),
    ])  # fmt: skip


def stem(like):
    return xr.DataArray(
        [[NIGHT + ZERO, DAY + ZERO]], {"probe": like["probe"], "time": like["time"]},
        ("probe", "time"),
    )  # fmt: skip


def flux_error(emf, method, **settings):
    """Relative error of the day's flux density where the night is the zero."""
    made = call(emf, None, stem(emf), method=method, **settings)["heated_difference"].values
    index = dissipation.flow_index(made[0, 0, 0], made[0, 0, 1])
    return dissipation.flux_density(index) / dissipation.flux_density(0.2) - 1.0


def test_a_stem_warmer_by_8_kelvin_by_day_inflates_the_voltage():
    # Voltage per kelvin by ITS-90, calculated: 1.6 %, to one decimal.
    warm, cool = (thermocouple_its90.TypeT.seebeck(t) for t in (DAY, NIGHT))
    assert 100.0 * (warm / cool - 1.0) == pytest.approx(1.6, abs=0.05)


def test_uncorrected_that_would_lower_the_flux_by_12_per_cent():
    # If nothing else changed; calculated, to whole per cents. By hand: index 1.2 / 1.016 - 1 =
    # 0.1811, (0.1811 / 0.2)^1.231 = 0.885. One sensitivity for all differences does a little
    # better by chance: the voltage per kelvin is higher over 10 K at rest than over 8.3 K in flow.
    assert flux_error(night_and_day(0.0), "its90_given") == pytest.approx(-0.12, abs=0.005)
    assert -0.12 < flux_error(night_and_day(0.0), "constant") < -0.10


@pytest.mark.parametrize("method", ["its90_given", "constant"])
def test_better_conduction_of_warm_wood_offsets_it(method):
    # 1.6 % either way leave less than a tenth of them, times the amplification of 7.4.
    assert abs(flux_error(night_and_day(0.002), method)) < 0.0016 * 7.4


def test_both_corrections_together_return_the_flux():
    assert flux_error(night_and_day(0.002), "its90_and_wood") == pytest.approx(0.0, abs=1e-8)
    assert flux_error(night_and_day(0.0), "its90_alone") == pytest.approx(0.0, abs=1e-8)


def test_either_alone_makes_the_error_that_the_pair_avoids():
    # By hand: 1.6 % lower by day, index 1.2 * 1.016 - 1 = 0.2192, (0.2192 / 0.2)^1.231 = 1.119.
    assert flux_error(night_and_day(0.002), "its90_alone") == pytest.approx(0.12, abs=0.005)


def test_both_corrections_return_the_difference_of_the_reference_temperature():
    emf = record([volts(8.0 / (1.0 + 0.002 * 10.0), 30.0)])
    warm = xr.DataArray([[303.15]], {"probe": emf["probe"], "time": emf["time"]}, ("probe", "time"))
    made = call(emf, None, warm, method="its90_and_wood")["heated_difference"]
    assert made.item() == pytest.approx(8.0, abs=1e-8)
    # At 30 degC as its own reference the wood is as it is: 8 K / 1.02.
    own = call(emf, None, warm, method="its90_and_wood", reference_temperature_degC=30.0)
    assert own["heated_difference"].item() == pytest.approx(8.0 / 1.02, abs=1e-8)
    less = call(emf, None, warm, method="its90_and_wood", conductivity_growth_percent_per_K=0.3)
    assert less["heated_difference"].item() == pytest.approx(8.0 / 1.02 * 1.03, abs=1e-8)


@pytest.mark.parametrize("method", METHODS)
def test_kelvin_as_logged_stay_with_every_method(method):
    # Nothing is known of how the logger converted them, so they are corrected for neither.
    kelvin = record([9.0, 8.0])
    warm = stem(kelvin)
    assert call(None, kelvin, warm, method=method)["heated_difference"].equals(kelvin)
    emf = record([np.nan, 0.35e-3])
    mixed = call(emf, record([9.0, np.nan]), warm, method=method)
    assert mixed["heated_difference"].values[0, 0, 0] == 9.0
    assert not mixed.get("no_stem_temperature", xr.zeros_like(emf, dtype=bool)).any()


@pytest.mark.parametrize("method", ["its90_and_wood", "its90_alone"])
def test_a_voltage_without_its_stem_temperature_is_flagged(method):
    emf = record([0.35e-3, 0.35e-3, np.nan])
    some = xr.DataArray(
        [[293.15, np.nan, np.nan]], {"probe": emf["probe"], "time": emf["time"]}, ("probe", "time")
    )
    made = call(emf, None, some, method=method)
    assert made["heated_difference"].notnull().values[0, 0].tolist() == [True, False, False]
    assert made["no_stem_temperature"].values[0, 0].tolist() == [False, True, False]
