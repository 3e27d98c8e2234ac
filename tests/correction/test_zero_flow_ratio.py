import numpy as np
import pytest
import xarray as xr
from correction_records import CM_H, beside, evaluated, fact, record, stamps, table_of

import sapflux.correction  # noqa: F401
from sapflux.correction.zero_ratio_nights import slope_of
from sapflux.physics import heat_pulse, spacing
from sapflux.stage import REGISTRY, bind

STAGE = REGISTRY["heat_ratio", "zero_flow_ratio"]
K, X = 2.5e-7, 6e-3
MOMENT = spacing.reading_time(60.0, 100.0, 8.0)


def arrays_of(velocity_cm_h, time, deficit_Pa=20.0, needles=(X, X), diffusivity=K, **around):
    """Signals of needles 6 mm away that show a velocity, and what the stage reads beside them."""
    log_ratio = record(np.asarray(velocity_cm_h) * CM_H * X / K, time)
    reading = {"window_from": 60.0, "window_to": 100.0, "pulse_length": 8.0}
    reading |= {"spacing_downstream": needles[0], "spacing_upstream": needles[1]}
    reading |= {"thermal_diffusivity": diffusivity}
    probes = log_ratio.sizes["probe"]
    return {
        "log_heat_ratio": log_ratio,
        **{name: fact([value] * probes, log_ratio) for name, value in reading.items()},
        **beside(log_ratio, deficit_Pa=deficit_Pa, **around),
    }


def run(arrays, **changed):
    table = table_of(STAGE, arrays, **changed)
    return table, evaluated(STAGE, arrays, table, **changed)


def day_course(time, day=12.0, rest=0.0):
    # Flow begins after the sun is up, at 06:45 in early March at 48 degrees north.
    hour = (time - time.astype("datetime64[D]")) / np.timedelta64(1, "h")
    return rest + day * np.sin(np.pi * (hour - 7.5) / 9).clip(0)


def along(values, time):
    return xr.DataArray(np.asarray(values, float), {"time": time}, "time")


def test_one_zero_for_the_installation_by_hand():
    time = stamps("2031-03-01", 8)
    table, made = run(arrays_of(day_course(time, rest=1.5), time))
    assert table["accepted"].all()
    np.testing.assert_allclose(table["offset_cm_h"], 1.5, atol=1e-12)
    assert set(table["verdict"]) == {"usable"}
    # 1.5 cm h-1 by the plain formula: ln r = 1.5 / 3.6e5 * 6e-3 / 2.5e-7 = 0.1
    np.testing.assert_allclose(made["zero_flow_log_ratio"], 0.1, atol=1e-12)
    assert not made["unusable_offset"].any()
    # Squares apart by 4 * 2.5e-7 * 82.39 * 0.1 = 8.239e-6 m2: 6 - sqrt(36 - 8.239) = 0.731 mm
    np.testing.assert_allclose(table["misplacement_mm"], 0.731, atol=5e-4)


def test_needles_known_to_stand_unequally_far_show_no_offset():
    # (6.5**2 - 6**2) / (4 t) over their mean 6.25 mm, at the time of the window: 3.03 cm h-1 by
    # the plain formula; known, it is no error, and still the ratio that is taken off.
    time = stamps("2031-03-01", 8)
    zero = (6.5e-3**2 - 6e-3**2) / (4 * K * MOMENT)
    arrays = arrays_of(np.full(len(time), zero * K / X / CM_H), time, needles=(6e-3, 6.5e-3))
    table, made = run(arrays)
    np.testing.assert_allclose(table["offset_cm_h"], 0.0, atol=1e-12)
    np.testing.assert_allclose(table["misplacement_mm"], 0.0, atol=1e-9)
    np.testing.assert_allclose(made["zero_flow_log_ratio"], zero, rtol=1e-12)


def test_needles_out_of_place_show_less_of_a_ratio_in_wood_that_conducts_better():
    time = stamps("2031-03-01", 8)
    arrays = arrays_of(np.zeros(len(time)), time)
    diffusivity = np.where(np.arange(len(time)) < len(time) // 2, K, 1.25 * K)
    arrays["thermal_diffusivity"] = xr.DataArray(
        diffusivity[None], {"probe": ["P1"], "time": time}, ("probe", "time")
    )
    zero = spacing.zero_log_ratio(6e-3, 6.3e-3, diffusivity, MOMENT)
    arrays["log_heat_ratio"] = record(zero, time)
    table, made = run(arrays)
    assert table["spread_cm_h"].max() < 1e-12
    np.testing.assert_allclose(made["zero_flow_log_ratio"][0, 0], zero, rtol=1e-12)


def test_flow_on_dry_nights_does_not_enter_the_zero():
    time = stamps("2031-03-01", 12)
    dry = (np.arange(len(time)) // 48) % 2 == 1
    velocity = day_course(time, rest=0.5) + np.where(dry, 1.2, 0.0)
    arrays = arrays_of(velocity, time, deficit_Pa=np.where(dry, 600.0, 20.0))
    table, made = run(arrays)
    assert table["accepted"].sum() == 6
    assert table["offset_cm_h"].iloc[0] == pytest.approx(0.5)
    assert not made["unusable_offset"].any()
    # Every night taken for one at rest, the rise with the deficit betrays the flow.
    every, _ = run(arrays, method="all_nights", widest_spread_cm_h=5.0)
    assert set(every["verdict"]) == {"rises by 1.2 cm h-1 with the deficit: flow at night"}
    told, _ = run(arrays, method="all_nights", widest_spread_cm_h=5.0, least_slope_probability=0.0)
    assert told["offset_cm_h"].iloc[0] == pytest.approx((0.5 + 1.7) / 2)


def test_a_rise_too_small_or_too_unsure_does_not_refuse_a_zero():
    time = stamps("2031-03-01", 8)
    night = np.arange(len(time)) // 48
    deficit = 10.0 + 10.0 * night  # 0.01 to 0.08 kPa
    rising = run(arrays_of(0.05 * night, time, deficit_Pa=deficit))[0]
    assert rising["verdict"].iloc[0] == "rises by 0.35 cm h-1 with the deficit: flow at night"
    np.testing.assert_allclose(rising["slope_cm_h_per_kPa"], 5.0, rtol=1e-9)
    small = run(arrays_of(0.04 * night, time, deficit_Pa=deficit))[0]
    assert small["usable"].all() and small["slope_probability"].max() < 1e-6
    unsure = run(arrays_of(np.array([0, 1, 0, 0, 1, 0, 1, 1])[night] * 0.45, time, deficit))[0]
    assert unsure["usable"].all() and unsure["slope_probability"].min() > 0.05
    falling = run(arrays_of(-0.05 * night, time, deficit_Pa=deficit))[0]
    assert falling["usable"].all()


def test_slope_and_its_probability_against_a_reference():
    # scipy.stats.linregress as the reference library
    from scipy.stats import linregress

    generator = np.random.default_rng(11)
    x, y = generator.uniform(0, 0.1, 20), generator.normal(0, 1, 20)
    told = linregress(x, y)
    slope, probability, rise = slope_of(x, y)
    assert (slope, probability) == pytest.approx((told.slope, told.pvalue), rel=1e-9)
    assert rise == pytest.approx(slope * np.ptp(x))
    assert np.isnan(slope_of(np.full(5, 0.1), y[:5])[1])
    assert np.isnan(slope_of(np.array([0.1, 0.2, np.nan]), y[:3])[1])
    assert slope_of(np.arange(3.0), np.arange(3.0))[1] == 0.0


def test_every_night_says_why_it_is_not_accepted():
    time = stamps("2031-03-01", 6)
    velocity = np.full(len(time), 1.0)
    deficit = np.full(len(time), 20.0)
    deficit[48:64] = 240.0
    velocity[96:112] = np.nan
    velocity[97] = 1.0
    velocity[144:160] = np.nan
    deficit[192:208] = np.nan
    arrays = arrays_of(velocity, time, deficit_Pa=deficit)
    air = np.full(len(time), 278.0)
    air[242] = 272.45  # -0.7 degC at half past one on the last night
    arrays["air_temperature"] = along(air, time)
    table, _ = run(arrays)
    assert table["reason"].tolist() == [
        "accepted",
        "deficit 0.24 kPa above 0.1",
        "too few records",
        "no night record",
        "no vapour pressure deficit",
        "frost: -0.7 degC, below -0.5",
    ]
    # Whatever the method, frost never counts.
    for method in ("all_nights", "reference_dates"):
        arrays["at_rest"] = along(np.ones(len(time)), time)
        table, _ = run(arrays, method=method)
        assert table["accepted"].tolist() == [True, True, False, False, True, False]
        assert table["reason"].iloc[5] == "frost: -0.7 degC, below -0.5"


def test_only_nights_for_which_somebody_vouches_are_references():
    time = stamps("2031-03-01", 12)
    night = np.arange(len(time)) // 48
    velocity = np.where(night < 5, 0.4, 3.0)
    arrays = arrays_of(velocity, time, deficit_Pa=900.0)
    rest = (night < 5).astype(float)
    rest[5 * 48 : 5 * 48 + 11] = 1.0  # until half past five; the sixth night ends at six
    arrays["at_rest"] = xr.DataArray(rest[None], {"probe": ["P1"], "time": time}, ("probe", "time"))
    table, made = run(arrays, method="reference_dates")
    assert table["accepted"].tolist() == [True] * 5 + [False] * 7
    assert set(table["reason"]) == {"accepted", "not at rest by references.csv"}
    assert table["offset_cm_h"].iloc[0] == pytest.approx(0.4)
    assert not made["unusable_offset"].any()
    # Laid once for a probe that is cut for good, the fact has no time.
    arrays["at_rest"] = fact([1.0], arrays["log_heat_ratio"])
    assert table_of(STAGE, arrays, method="reference_dates")["accepted"].all()


@pytest.mark.parametrize(
    ("nights", "rest", "verdict"),
    [
        (4, 1.0, "4 accepted nights, 5 needed"),
        (8, 5.5, "offset 5.5 cm h-1 beyond 5"),
        (8, -5.5, "offset -5.5 cm h-1 beyond 5"),
        # 4 * 82.39 s * 6 mm * 3.5 cm h-1 = 19.22 mm2: 6 - sqrt(36 - 19.22) = 1.90 mm
        (8, 3.5, "a needle 1.9 mm out of place, beyond 1.5"),
        (8, -3.5, "a needle 1.9 mm out of place, beyond 1.5"),
        # 0, 1, ... 7: quartiles 1.75 and 5.25
        (8, None, "spread 3.5 cm h-1 above 0.5"),
    ],
)
def test_a_zero_that_cannot_be_trusted_takes_the_probe_out(nights, rest, verdict):
    time = stamps("2031-03-01", nights)
    level = np.arange(nights) if rest is None else np.full(nights, rest)
    table, made = run(arrays_of(np.repeat(level, 48), time))
    assert set(table["verdict"]) == {verdict}
    assert not table["usable"].any()
    assert made["unusable_offset"].all()
    assert np.isnan(made["zero_flow_log_ratio"]).all()


def test_a_ratio_that_no_needle_explains_is_refused_in_words():
    # 7 cm h-1: 38.4 mm2 of 36
    time = stamps("2031-03-01", 8)
    table, _ = run(arrays_of(np.full(len(time), 7.0), time), largest_offset_cm_h=10.0)
    assert table["verdict"].iloc[0] == (
        "no place of one needle shows this, or no reading window is given"
    )


def test_each_installation_has_its_own_zero():
    time = stamps("2031-03-01", 16)
    installation = np.repeat([0, 1], 8 * 48)[None]
    installation[0, :5] = -1
    velocity = np.where(installation[0] == 1, -2.0, 1.0)
    velocity[:5] = np.nan
    arrays = arrays_of(velocity, time, installation=installation)
    table, made = run(arrays)
    assert table.groupby("installation")["offset_cm_h"].first().tolist() == pytest.approx([1, -2])
    known = installation[0] >= 0
    signal = arrays["log_heat_ratio"].values[0, 0]
    np.testing.assert_allclose(made["zero_flow_log_ratio"][0, 0, known], signal[known], atol=1e-15)
    assert not made["unusable_offset"][0, 0, ~known].any()


@pytest.mark.parametrize(
    ("needles_mm", "method", "left"),
    # What is left of the flow of 8 days up to 40 cm h-1: see the tests of `spacing`. By the
    # assumption that holds, nothing but what the thermocouple passes for: 4 k t ln 1.01 =
    # 0.82 mm2, 0.82 / 12.6 = 0.065 mm of 12.3 or 0.5 %, and 0.1 % for the time of the window.
    [
        ((5.7, 6.3), "both_spacings", 0.02),
        ((6.3, 5.7), "both_spacings", 0.02),
        ((6.0, 6.3), "downstream_right", 0.007),
        ((5.7, 6.0), "upstream_right", 0.007),
        ((6.0, 6.3), "both_spacings", 0.03),
        ((6.0, 5.7), "additive_offset", 0.03),
    ],
)
def test_flow_of_misplaced_needles_from_rises_to_velocity(needles_mm, method, left):
    # Line source of Marshall (1958), mean rises of 60 to 100 s after 8 s of heating, and a
    # thermocouple that reads 1 % too much.
    time = stamps("2031-03-01", 8)
    truth = day_course(time, day=40.0)
    ages = (np.arange(60.5, 100.0)[:, None] + np.arange(0.5, 8.0)).ravel()
    down, up = (
        heat_pulse.line_source_rise(x * 1e-3, ages, truth[:, None] * CM_H, K, 1, 1).mean(axis=1)
        for x in (needles_mm[0], -needles_mm[1])
    )
    arrays = arrays_of(truth, time)
    arrays["log_heat_ratio"] = record(np.log(1.01 * down / up), time)
    table, made = run(arrays)
    assert table["usable"].all()
    arrays["zero_flow_log_ratio"] = record(made["zero_flow_log_ratio"], time)
    velocity = REGISTRY["heat_ratio", "heat_pulse_velocity"].function
    found = {
        name: bind(velocity, arrays, {"method": name})["heat_pulse_velocity"].values.mean() / CM_H
        for name in (method, "as_given")
    }
    assert found[method] == pytest.approx(truth.mean(), rel=left)
    assert abs(found["as_given"] / truth.mean() - 1) > 0.04


@pytest.mark.parametrize("longitude", [-170.0, 0.0, 170.0])
def test_same_bytes_for_every_block_length(longitude):
    generator = np.random.default_rng(3)
    time = stamps("2031-03-01", 17)
    velocity = generator.normal(1.0, 0.1, (2, 2, len(time)))
    velocity[generator.random(velocity.shape) < 0.1] = np.nan
    installation = np.zeros((2, len(time)), dtype=int)
    installation[1, 400:] = 1
    deficit = generator.uniform(0.0, 120.0, 17).repeat(48)
    arrays = arrays_of(
        velocity, time, deficit_Pa=deficit, longitude=longitude, installation=installation
    )
    arrays["air_temperature"] = along(generator.normal(276.0, 1.0, len(time)), time)
    table = table_of(STAGE, arrays)
    assert table["usable"].any()
    whole = evaluated(STAGE, arrays, table)
    for days in (1, 1.3, 5, 12):
        other = table_of(STAGE, arrays, block_days=days)
        assert table.equals(other)
        parts = evaluated(STAGE, arrays, other, block_days=days)
        for name in whole:
            assert whole[name].tobytes() == parts[name].tobytes()
