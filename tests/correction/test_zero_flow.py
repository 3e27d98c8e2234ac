import numpy as np
import pytest
from correction_records import beside, evaluated, record, stamps, table_of
from hypothesis import given, settings
from hypothesis import strategies as st

import sapflux.correction  # noqa: F401
from sapflux.correction.baseline_line import baseline_line
from sapflux.physics import dissipation
from sapflux.stage import REGISTRY

STAGE = REGISTRY["heat_dissipation", "zero_flow_difference"]
DAY = 86_400_000_000_000


def arrays_of(heated, **around):
    return {"heated_difference": heated, **beside(heated, **around)}


def day_course(time, day_index=0.3, night_index=0.0, zero_flow=10.0, longitude=0.0):
    """Difference under a half sine of flow by day and a constant one by night."""
    hour = ((time - time.astype("datetime64[D]")) / np.timedelta64(1, "h") + longitude / 15) % 24
    index = night_index + (day_index - night_index) * np.sin(np.pi * (hour - 6) / 12).clip(0)
    return zero_flow / (1.0 + index)


def run(arrays, **changed):
    table = table_of(STAGE, arrays, **changed)
    return table, evaluated(STAGE, arrays, table, **changed)


def test_zero_flow_is_found_where_nights_are_quiet_by_hand():
    time = stamps("2031-03-01", 5)
    heated = record(day_course(time), time)
    table, made = run(arrays_of(heated))
    assert table["accepted"].all()
    assert set(table["reason"]) == {"accepted"}
    # No flow at night, so every 2 h mean is the zero-flow difference itself.
    np.testing.assert_allclose(table["difference_K"], 10.0, rtol=0, atol=1e-12)
    np.testing.assert_allclose(made["zero_flow_difference"], 10.0, rtol=0, atol=1e-12)
    assert not made["no_baseline"].any()


def test_candidate_is_the_highest_mean_after_solar_midnight_by_hand():
    time = stamps("2031-03-01", 2)
    values = np.full(len(time), 8.0)
    night = slice(48, 48 + 12)  # 2 March 00:00 to 06:00; solar midnight is at 00:12
    values[night] = [20, 8, 8, 8, 9.0, 9.4, 9.2, 9.6, 8, 8, 8, 8]
    table, _ = run(arrays_of(record(values, time)), method="nightly_maximum")
    row = table[table["start"] > np.datetime64("2031-03-01")].iloc[0]
    # The 20 K record ends at 00:30 and is centred at 00:15, after solar midnight: with it the
    # first window has mean (20 + 3 * 8) / 4 = 11, above (9 + 9.4 + 9.2 + 9.6) / 4 = 9.3.
    assert row["difference_K"] == pytest.approx(11.0, abs=1e-12)
    values[48] = 8.0
    table, _ = run(arrays_of(record(values, time)), method="nightly_maximum")
    row = table[table["start"] > np.datetime64("2031-03-01")].iloc[0]
    assert row["difference_K"] == pytest.approx(9.3, abs=1e-12)
    # Stamps 02:30, 03:00, 03:30, 04:00: the middle is 03:15.
    assert row["time"] == np.datetime64("2031-03-02T03:15")
    assert row["records"] == 4


def test_records_before_solar_midnight_do_not_count():
    time = stamps("2031-03-01", 2)
    values = np.full(len(time), 9.0)
    values[40:48] = 12.0  # 20:00 to 24:00
    table, _ = run(arrays_of(record(values, time)), method="nightly_maximum")
    assert (table["difference_K"] == 9.0).all()


def test_every_night_says_why_it_is_not_accepted():
    time = stamps("2031-03-01", 6)
    values = np.full(len(time), 10.0)
    deficit = np.full(len(time), 20.0)
    hour_of = lambda day, hour: (day - 1) * 48 + hour * 2  # noqa: E731
    deficit[hour_of(2, 0) : hour_of(2, 8)] = 310.0
    values[hour_of(3, 0) : hour_of(3, 8)] += 0.2 * (-1.0) ** np.arange(16)
    values[hour_of(4, 0) : hour_of(4, 8)] = np.nan
    values[hour_of(4, 3)] = 10.0
    values[hour_of(5, 0) : hour_of(5, 8)] = np.nan
    deficit[hour_of(6, 0) : hour_of(6, 8)] = np.nan
    table, _ = run(arrays_of(record(values, time), deficit_Pa=deficit))
    # The alternating 9.8, 10.2 has a standard deviation of 0.2 * sqrt(4/3), 2.31 % of 10.
    assert table["reason"].tolist() == [
        "accepted",
        "deficit 0.31 kPa above 0.05",
        "variation 0.0231 above 0.005",
        "too few records",
        "no night record",
        "no vapour pressure deficit",
    ]
    assert table["accepted"].tolist() == [True] + [False] * 5
    assert table["baseline_K"].notna().tolist() == table["accepted"].tolist()


def test_a_short_night_is_named():
    time = stamps("2031-06-20", 2)
    heated = record(np.full(len(time), 10.0), time)
    table, _ = run(arrays_of(heated, latitude=62.0), averaging_h=6.0)
    assert set(table["reason"]) == {"night after midnight shorter than 6 h"}


def test_quiet_nights_take_the_highest_window_that_meets_the_conditions():
    time = stamps("2031-03-01", 2)
    values = np.full(len(time), 10.0)
    deficit = np.full(len(time), 20.0)
    values[48:53] = 10.5  # higher, but in dry air
    deficit[48:54] = 200.0
    table, _ = run(arrays_of(record(values, time), deficit_Pa=deficit))
    row = table.iloc[-1]
    assert row["accepted"]
    assert row["difference_K"] == pytest.approx(10.0, abs=1e-12)
    assert row["mean_deficit_kPa"] == pytest.approx(0.02)


@pytest.mark.parametrize(
    ("night", "day", "share"),
    [(0.05, 0.3, 75), (0.02, 0.3, 90), (0.05, 0.15, 57), (0.02, 0.15, 82)],
)
def test_nightly_maximum_reads_low_under_night_flow_published(night, day, share):
    # Share of daytime flux density left when flow never stops at night, calculated from the
    # calibration of Granier (1985), to the printed per cent.
    time = stamps("2031-03-01", 4)
    heated = record(day_course(time, day, night), time)
    _, made = run(arrays_of(heated, deficit_Pa=800.0), method="nightly_maximum")
    noon = 2 * 48 + 23
    index = dissipation.flow_index(made["zero_flow_difference"], heated.values)[0, 0, noon]
    true = dissipation.flux_density(day)
    assert dissipation.flux_density(index) / true * 100 == pytest.approx(share, abs=0.5)


def test_quiet_nights_bridge_dry_nights_with_flow():
    time = stamps("2031-03-01", 9)
    day = np.arange(len(time)) // 48
    dry = (day > 1) & (day < 7)
    values = np.where(dry, day_course(time, 0.3, 0.05), day_course(time))
    arrays = arrays_of(record(values, time), deficit_Pa=np.where(dry, 900.0, 20.0))
    table, made = run(arrays)
    assert table["accepted"].sum() == 4
    np.testing.assert_allclose(made["zero_flow_difference"], 10.0, rtol=0, atol=1e-12)


def test_mean_has_little_of_the_bias_of_the_highest_record():
    generator = np.random.default_rng(11)
    time = stamps("2031-03-01", 200, step_min=10)
    heated = record(10.0 + generator.normal(0, 0.02, len(time)), time)
    arrays = arrays_of(heated, latitude=0.0)
    mean = table_of(STAGE, arrays, method="nightly_maximum")
    single = table_of(STAGE, arrays, method="nightly_maximum", averaging_h=1 / 6)
    # At the equator a night after midnight has 36 or 37 records. The expected maximum of as many
    # normal values is 2.11 deviations for 35, 2.16 for 40 (Harter 1961, from memory), and over
    # 200 nights it is met within 0.1; the mean of 12 has a deviation of 1/sqrt(12).
    assert 2.02 < (single["difference_K"].mean() - 10) / 0.02 < 2.24
    assert 0 < (mean["difference_K"].mean() - 10) / 0.02 < 2.12 / np.sqrt(12)


def test_moving_window_takes_the_highest_of_the_nights_around():
    time = stamps("2031-03-01", 12)
    level = np.array([10, 10.2, 10.1, 10.0, 9.9, 9.8, 9.7, 9.6, 10.5, 9.5, 9.4, 9.3])
    heated = record(np.repeat(level, 48), time)
    table, _ = run(arrays_of(heated), method="moving_window", window_d=3)
    expected = [max(level[max(0, n - 1) : n + 2]) for n in range(len(level))]
    np.testing.assert_allclose(table["baseline_K"], expected)
    np.testing.assert_allclose(table["difference_K"], level)


def test_moving_window_does_not_count_a_missing_night_as_a_neighbour():
    time = stamps("2031-03-01", 6)
    level = np.array([10.6, np.nan, 10.0, 10.1, 10.0, 9.0])
    table, _ = run(
        arrays_of(record(np.repeat(level, 48), time)), method="moving_window", window_d=3
    )
    np.testing.assert_allclose(
        table["baseline_K"], [10.6, np.nan, 10.1, 10.1, 10.1, 10.0], equal_nan=True
    )


def test_baseline_is_linear_between_nights_and_held_at_the_ends_by_hand():
    knots = np.array([10, 20, 70]) * DAY
    values = np.array([9.0, 10.0, 8.0])
    days = np.array([0, 4, 5, 10, 12.5, 20, 25, 26, 64, 65, 70, 75, 76])
    stamps_ns = (days * DAY).astype(np.int64)
    line = baseline_line(stamps_ns, knots, values, farthest_d=5.0, widest_d=42.0)
    nan = np.nan
    # Nights 50 days apart are not bridged; each is held for 5 days.
    np.testing.assert_allclose(
        line, [nan, nan, 9, 9, 9.25, 10, 10, nan, nan, 8, 8, 8, nan], equal_nan=True, atol=1e-12
    )


@given(
    knots=st.lists(st.integers(0, 200), min_size=1, max_size=8, unique=True),
    widest=st.floats(1, 60),
)
@settings(max_examples=60, deadline=None)
def test_baseline_stays_within_the_nights_it_rests_on(knots, widest):
    knots = np.sort(knots)
    values = 8.0 + np.sin(knots)
    stamps_d = np.arange(-30, 230, 3)
    line = baseline_line(stamps_d * DAY, knots * DAY, values, 10.0, widest)
    known = np.isfinite(line)
    assert np.all(line[known] <= values.max() + 1e-12)
    assert np.all(line[known] >= values.min() - 1e-12)
    near = np.abs(stamps_d[:, None] - knots).min(axis=1) <= 10
    assert known[near].all()


def test_baseline_never_crosses_an_installation():
    time = stamps("2031-03-01", 10)
    installation = np.repeat([0, 1], len(time) // 2)[None]
    installation[0, 230:250] = -1
    level = np.where(installation[0] == 0, 10.0, 6.0)
    heated = record(np.where(installation[0] >= 0, level, np.nan), time)
    arrays = arrays_of(heated, installation=installation)
    table, made = run(arrays, method="moving_window")
    line = made["zero_flow_difference"][0, 0]
    assert set(table["installation"]) == {0, 1}
    assert np.all(line[installation[0] == 0] == 10.0)
    assert np.all(line[installation[0] == 1] == 6.0)
    assert np.isnan(line[installation[0] == -1]).all()


def test_two_installations_within_one_night_have_a_row_each():
    time = stamps("2031-03-01", 3)
    installation = np.zeros((1, len(time)), dtype=int)
    change = 48 + 6  # 2 March 03:00
    installation[0, change:] = 1
    heated = record(np.where(installation[0] == 0, 10.0, 6.0), time)
    table, made = run(arrays_of(heated, installation=installation))
    night = table[table["start"].between("2031-03-01", "2031-03-02")]
    assert night["installation"].tolist() == [0, 1]
    assert night["difference_K"].tolist() == [10.0, 6.0]
    np.testing.assert_allclose(made["zero_flow_difference"][0, 0], heated.values[0, 0])


def test_without_an_accepted_night_there_is_no_baseline_and_a_flag():
    time = stamps("2031-03-01", 4)
    heated = record(day_course(time), time)
    table, made = run(arrays_of(heated, deficit_Pa=500.0))
    assert not table["accepted"].any()
    assert np.isnan(made["zero_flow_difference"]).all()
    assert made["no_baseline"].all()


def test_midnight_sun_gives_no_rows_and_no_baseline():
    time = stamps("2031-06-20", 3)
    heated = record(day_course(time), time)
    table, made = run(arrays_of(heated, latitude=75.0))
    assert not len(table)
    assert made["no_baseline"].all()


def test_points_without_a_needle_have_no_rows():
    time = stamps("2031-03-01", 3)
    values = np.full((2, 2, len(time)), 10.0)
    values[1, 1] = np.nan
    table, _ = run(arrays_of(record(values, time)))
    kept = {
        (probe, int(point)) for probe, point in zip(table["probe"], table["point"], strict=True)
    }
    assert kept == {("P1", 1), ("P1", 2), ("P2", 1)}


@pytest.mark.parametrize("longitude", [-170.0, 0.0, 170.0])
@pytest.mark.parametrize("method", ["quiet_nights", "nightly_maximum", "moving_window"])
def test_same_bytes_for_every_block_length(longitude, method):
    generator = np.random.default_rng(3)
    time = stamps("2031-03-01", 17, step_min=30)
    values = np.stack(
        [
            day_course(time, 0.3, 0.01, longitude=longitude),
            day_course(time, 0.6, longitude=longitude),
        ]
    )[:, None]
    values = values + generator.normal(0, 0.01, values.shape)
    values[generator.random(values.shape) < 0.1] = np.nan
    installation = np.zeros((2, len(time)), dtype=int)
    installation[1, 400:] = 1
    deficit = generator.uniform(0, 90, 18)[np.arange(len(time)) // 48]
    arrays = arrays_of(
        record(values, time), deficit_Pa=deficit, longitude=longitude, installation=installation
    )
    table = table_of(STAGE, arrays, method=method)
    assert table["accepted"].sum() > 0
    whole = evaluated(STAGE, arrays, table, method=method)
    for days in (1, 1.3, 5, 12):
        other = table_of(STAGE, arrays, method=method, block_days=days)
        assert table.equals(other)
        parts = evaluated(STAGE, arrays, other, method=method, block_days=days)
        for name in whole:
            assert whole[name].tobytes() == parts[name].tobytes()


def test_a_clock_shift_shifts_the_baseline():
    time = stamps("2031-03-01", 6)
    values = np.repeat([10, 10.2, 10.1, 9.9, 10.0, 10.3], 48)
    later = time + np.timedelta64(12 * 3600, "s")
    _, here = run(arrays_of(record(values, time)), method="nightly_maximum")
    _, there = run(arrays_of(record(values, later), longitude=-180.0), method="nightly_maximum")
    np.testing.assert_allclose(
        here["zero_flow_difference"], there["zero_flow_difference"], atol=1e-12
    )
