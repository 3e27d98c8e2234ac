import numpy as np
import pytest
import xarray as xr
from correction_records import CM_H, fact, record, stamps
from hypothesis import given
from hypothesis import strategies as st

import sapflux.correction  # noqa: F401
from sapflux.stage import REGISTRY


def call(name, *arrays, **settings):
    return REGISTRY["heat_dissipation", name].function(*arrays, **settings)


def probe_series(values, like):
    return xr.DataArray(
        np.asarray(values, float)[None],
        {"probe": like["probe"].values, "time": like["time"].values},
        ("probe", "time"),
    )


# Signal


def test_type_t_voltage_to_kelvin_published():
    # ITS-90, type T: 0.4 mV over a reference at 20 degC is 29.833701 degC; 20 to 30 degC is
    # 0.406835 mV (NIST Monograph 175, by two libraries).
    emf = record([0.4e-3, 0.406835e-3, 0.0])
    found = call("heated_difference", emf)["heated_difference"].values[0, 0]
    assert found[0] == pytest.approx(9.833701, abs=5e-7)
    assert found[1] == pytest.approx(10.0, abs=2e-5)  # half a digit of the voltage
    assert found[2] == pytest.approx(0.0, abs=1e-12)


def test_constant_sensitivity_reads_high_at_20_degrees_published():
    # 40 uV/K makes 10.171 K of the 10 K between 20 and 30 degC (from the same table).
    found = call("heated_difference", record([0.406835e-3]), method="constant")
    assert found["heated_difference"].item() == pytest.approx(10.171, abs=5e-4)


def test_measured_stem_temperature_is_used_record_by_record():
    emf = record([0.4e-3, 0.4e-3, 0.4e-3, np.nan])
    stem = probe_series([293.15, 278.15, np.nan, np.nan], emf)
    made = call("heated_difference", emf, None, stem, method="its90_alone")
    found = made["heated_difference"].values[0, 0]
    assert found[0] == pytest.approx(9.833701, abs=5e-7)
    # Seebeck 38.748106 uV/K at 0 and 39.859152 at 15 degC: a colder stem needs a larger difference.
    assert 0.4e-3 / 39.859152e-6 < found[1] < 0.4e-3 / 38.748106e-6
    assert np.isnan(found[2:]).all()
    assert made["no_stem_temperature"].values[0, 0].tolist() == [False, False, True, False]


def test_kelvin_as_logged_stay_and_fill_a_mixed_cube():
    emf = record([[[0.4e-3]], [[np.nan]]])
    kelvin = record([[[np.nan]], [[8.5]]])
    assert call("heated_difference", None, kelvin)["heated_difference"].equals(kelvin)
    mixed = call("heated_difference", emf, kelvin)["heated_difference"].values.ravel()
    assert mixed == pytest.approx([9.833701, 8.5], abs=5e-7)


def test_no_signal_is_an_error():
    with pytest.raises(ValueError, match="neither heated_emf nor heated_difference"):
        call("heated_difference")


# Power loss


def test_power_loss_is_taken_out_with_its_margin_and_the_recovery_by_hand():
    values = np.full(30, 9.0)
    values[10:14] = [5.0, 0.4, -0.2, 6.0]
    made = call("screen_power_loss", record(values))
    # Half-hourly: records 11 and 12 are below 1.5 K; 10 is within 30 min before, and 13 to 18
    # within 3 h after.
    assert np.flatnonzero(made["heater_failure"].values).tolist() == [10, 11, 12]
    assert np.flatnonzero(made["heater_recovery"].values).tolist() == [13, 14, 15, 16, 17, 18]


def test_voltage_and_state_tell_of_an_outage_that_the_difference_hides():
    heated = record(np.full(20, 9.0))
    volts, state = np.full(20, 2.0), np.ones(20)
    volts[3], volts[5], state[12] = 0.1, np.nan, 0.5
    made = call(
        "screen_power_loss",
        heated,
        probe_series(volts, heated),
        probe_series(state, heated),
        margin_min=0.0,
        recovery_h=0.5,
    )
    assert np.flatnonzero(made["heater_failure"].values).tolist() == [3, 12]
    assert np.flatnonzero(made["heater_recovery"].values).tolist() == [4, 13]


def test_power_screen_is_the_same_for_every_block_length():
    generator = np.random.default_rng(2)
    time = stamps("2031-06-01", 8)
    heated = record(np.where(generator.random(len(time)) < 0.03, 0.2, 9.0), time)
    stage = REGISTRY["heat_dissipation", "screen_power_loss"]
    settings = stage.defaults()
    whole = stage.function(heated, **settings)
    reach = int(np.ceil(stage.reach_s(settings) / 1800))
    assert whole["heater_failure"].any()
    for size in (1, 7, 48, 100):
        for first in range(0, len(time), size):
            begin = max(0, first - reach)
            part = stage.function(heated.isel(time=slice(begin, first + size + reach)), **settings)
            core = slice(first - begin, first - begin + size)
            for name, flag in part.items():
                assert flag[..., core].equals(whole[name][..., first : first + size])


# Contact


@pytest.mark.parametrize(
    ("fraction", "share"), [(0.9, 0.85), (0.75, 0.64), (0.5, 0.36), (0.25, 0.14)]
)
def test_needle_partly_in_heartwood_published(fraction, share):
    # Apparent over true flux density at a true index of 0.3, calculated from Clearwater et al.
    # (1999) and Granier (1985), printed to two digits.
    zero = record([10.0])
    sapwood = 10.0 / 1.3
    heated = record([fraction * sapwood + (1 - fraction) * 10.0])
    flux = lambda h: call("flux_density", call("flow_index", h, zero)["flow_index"])["flux_density"]  # noqa: E731
    corrected = call("sapwood_contact", heated, zero, fact(fraction, zero), least_fraction=0.2)
    true = flux(corrected["heated_difference"]).item()
    assert true == pytest.approx(0.11899 * 0.3**1.231, rel=1e-12)
    assert flux(heated).item() / true == pytest.approx(share, abs=0.005)


def test_contact_flags_by_hand():
    heated = record([[[9.0, 9.0]], [[9.0, 9.0]], [[4.9, 5.1]], [[9.0, np.nan]]])
    zero = record(np.full((4, 1, 2), 10.0))
    fraction = fact([0.4, np.nan, 0.5, 0.5], heated)
    made = call("sapwood_contact", heated, zero, fraction)
    assert made["no_contact"].values[:, 0].tolist() == [[True, True]] + [[False, False]] * 3
    # (4.9 - 0.5 * 10) / 0.5 < 0 is undefined; (5.1 - 5) / 0.5 = 0.2.
    assert made["contact_undefined"].values[2, 0].tolist() == [True, False]
    found = made["heated_difference"].values[:, 0]
    assert np.isnan(found[0]).all()
    assert found[1].tolist() == [9.0, 9.0]
    assert found[2, 1] == pytest.approx(0.2)
    assert found[3, 0] == 8.0 and np.isnan(found[3, 1])


def test_a_whole_needle_is_untouched():
    heated, zero = record([9.1, 10.3]), record([10.0, np.nan])
    for fraction in (None, fact(1.0, heated)):
        assert call("sapwood_contact", heated, zero, fraction)["heated_difference"].equals(heated)


# Index and flux density


def test_flow_index_by_hand():
    made = call("flow_index", record([8.0, 10.0, 12.5, 0.0, np.nan]), record([10.0] * 5))
    found = made["flow_index"].values[0, 0]
    assert found[:3].tolist() == [0.25, 0.0, -0.2]
    assert np.isnan(found[3:]).all()
    assert made["above_baseline"].values[0, 0].tolist() == [False, False, True, False, False]
    assert made["heater_failure"].values[0, 0].tolist() == [False, False, False, True, False]


@pytest.mark.parametrize(
    ("index", "cm_h", "digits"),
    [
        (0.05, 1.07, 2),
        (0.1, 2.52, 2),
        (0.2, 5.91, 2),
        (0.3, 9.73, 2),
        (0.5, 18.25, 2),
        (1.0, 42.84, 2),
        (1.5, 70.56, 2),
        (2.0, 100.5, 1),
    ],
)
def test_general_calibration_published(index, cm_h, digits):
    # Granier (1985), from memory, calculated; tolerance half a unit of the last digit.
    made = call("flux_density", record([index]))
    assert made["flux_density"].item() / 1000 / CM_H == pytest.approx(cm_h, abs=0.5 * 10**-digits)
    assert made["beyond_calibration"].item() == (cm_h > 70)


def test_general_calibration_from_differences_published():
    # Zero flow 10 K, 8 K measured: index 0.25, 21.6 g m-2 s-1. Granier (1985), calculated.
    index = call("flow_index", record([8.0]), record([10.0]))["flow_index"]
    assert call("flux_density", index)["flux_density"].item() * 1e3 == pytest.approx(21.6, abs=0.05)


def test_species_calibration_goes_before_the_general_one_by_hand():
    index = record(np.full((2, 1, 3), [0.05, 0.5, 2.5]))
    factor, exponent = fact([0.3, np.nan], index), fact([2.0, np.nan], index)
    lowest, highest = fact([0.1, np.nan], index), fact([1.0, np.nan], index)
    made = call("flux_density", index, factor, exponent, lowest, highest)
    found = made["flux_density"].values[:, 0]
    assert found[0] == pytest.approx([0.3 * 0.0025, 0.3 * 0.25, 0.3 * 6.25])
    assert found[1] == pytest.approx(0.11899 * np.array([0.05, 0.5, 2.5]) ** 1.231)
    assert made["beyond_calibration"].values[:, 0].tolist() == [
        [True, False, True],
        [False, False, True],
    ]
    alone = call("flux_density", index, factor, exponent, lowest, highest, method="species")
    assert np.isnan(alone["flux_density"].values[1]).all()
    assert alone["no_calibration"].values[:, 0, 0].tolist() == [False, True]
    general = call("flux_density", index, factor, exponent, method="general")
    assert np.array_equal(general["flux_density"].values[0], general["flux_density"].values[1])


@given(st.floats(1e-4, 3.0))
def test_flux_density_is_odd_and_zero_without_flow(index):
    up, none, down = call("flux_density", record([index, 0.0, -index]))["flux_density"].values[0, 0]
    assert none == 0.0
    assert down == -up < 0


@given(st.floats(5.0, 15.0), st.floats(0.5, 1.0))
def test_no_flow_gives_zero_through_the_chain(zero_flow, fraction):
    heated = record([zero_flow])
    corrected = call("sapwood_contact", heated, heated, fact(fraction, heated))
    index = call("flow_index", corrected["heated_difference"], heated)["flow_index"]
    assert abs(call("flux_density", index)["flux_density"].item()) < 1e-15
