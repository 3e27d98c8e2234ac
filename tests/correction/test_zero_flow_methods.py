"""The families of zero flow: each on small records worked by hand, and against references."""

from typing import get_args

import numpy as np
import pytest
import xarray as xr
from correction_records import beside, evaluated, record, stamps, table_of
from scipy import stats

import sapflux.correction  # noqa: F401
from sapflux.correction.zero_flow_methods import (
    deficit_regression,
    double_regression,
    highest_around,
    lines_through,
    scatter,
)
from sapflux.physics import dissipation
from sapflux.stage import REGISTRY

STAGE = REGISTRY["heat_dissipation", "zero_flow_difference"]
METHODS = get_args(STAGE.settings["method"].annotation)
NAN = np.nan
UM = 1e-6


def nightly(levels, deficits_kPa=0.02, **facts):
    """Half-hourly arrays of a probe with one level a day; facts : (time) or (day) of the probe."""
    levels = np.atleast_1d(np.asarray(levels, float))
    time = stamps("2031-03-01", len(levels))
    heated = record(np.repeat(levels, 48), time)
    deficits = np.broadcast_to(np.asarray(deficits_kPa, float), len(levels)) * 1000
    arrays = {"heated_difference": heated, **beside(heated, np.repeat(deficits, 48))}
    along = {"probe": heated["probe"].values, "time": time}
    for name, values in facts.items():
        values = np.asarray(values, float)
        values = np.repeat(values, 48) if len(values) == len(levels) else values
        arrays[name] = xr.DataArray(values[None], along, ("probe", "time"))
    return arrays


def run(arrays, **changed):
    table = table_of(STAGE, arrays, **changed)
    return table, evaluated(STAGE, arrays, table, **changed)["zero_flow_difference"][0, 0]


@pytest.mark.parametrize(
    ("index", "amplification"),
    [(0.05, 25.9), (0.1, 13.5), (0.2, 7.4), (0.3, 5.3), (0.5, 3.7), (1.0, 2.5)],
)
def test_a_small_change_of_the_baseline_is_amplified_published(index, amplification):
    # exponent * (1 + index) / index of the calibration of Granier (1985), to the printed digit:
    # relative change of flux density over relative change of the zero-flow difference.
    hour = np.tile(np.arange(48) / 2, 4)
    by_day = (hour >= 8) & (hour < 18)
    flux = []
    for change in (0.0, 1e-6):
        arrays = nightly([10.0] * 4)
        values = np.where(by_day, 10.0 / (1 + index), 10.0 * (1 + change))
        arrays["heated_difference"] = arrays["heated_difference"].copy(data=values[None, None])
        _, line = run(arrays)
        noon = 2 * 48 + 24
        flux.append(dissipation.flux_density(dissipation.flow_index(line[noon], values[noon])))
    assert (flux[1] / flux[0] - 1) / 1e-6 == pytest.approx(amplification, abs=0.05)


def test_double_regression_keeps_the_nights_above_the_first_line_by_hand():
    # Rises by 0.1 K a night, every other night 0.6 K too low. Around the third night the low ones
    # lie evenly, so the first line has the true slope and lies 0.24 K too low; the three high
    # nights are above it and lie on the true line, 10.2 K at the third night.
    true = 10 + 0.1 * np.arange(5)
    table, _ = run(nightly(true - [0, 0.6, 0, 0.6, 0]), method="double_regression", window_d=5)
    row = table.iloc[2]
    assert row["difference_K"] == pytest.approx(10.2)
    assert row["baseline_K"] == pytest.approx(10.2, abs=1e-12)
    # The nights at the ends have three and four nights in their windows.
    assert table["reason"].tolist() == [
        "3 accepted nights in the window, 5 needed",
        "4 accepted nights in the window, 5 needed",
        "accepted",
        "4 accepted nights in the window, 5 needed",
        "3 accepted nights in the window, 5 needed",
    ]
    assert table["accepted"].tolist() == [False, False, True, False, False]


def test_double_regression_needs_three_nights_above_the_line():
    # One high night among five: the line through all five has its level and four lie below it.
    table, line = run(nightly([9.0, 9, 10, 9, 9]), method="double_regression", window_d=5)
    assert table["reason"][2] == "1 nights of the window on or above the line, 3 needed"
    assert np.isnan(line).all()


def test_double_regression_of_nights_on_a_line_is_the_line():
    table, _ = run(nightly(10 - 0.05 * np.arange(12)), method="double_regression")
    got = table["baseline_K"][table["accepted"]]
    assert len(got) == 10  # all but the first and the last, which have four in their windows
    np.testing.assert_allclose(got, table["difference_K"][table["accepted"]], rtol=0, atol=1e-9)


@pytest.mark.parametrize("half", [3, 5])
def test_double_regression_against_numpy_and_scipy(half):
    generator = np.random.default_rng(2)
    night = np.sort(generator.choice(60, 45, replace=False))
    night -= night[0]
    values = 10 + generator.normal(0, 0.1, 45)
    values[[7, 20]] = NAN
    got, error, refused = double_regression(night, values, half, 5)
    known = 0
    for place, here in enumerate(night):
        near = (np.abs(night - here) <= half) & np.isfinite(values)
        if np.isnan(values[place]) or near.sum() < 5:
            assert np.isnan(got[place])
            continue
        slope, level = np.polyfit(night[near] - here, values[near], 1)
        above = near & (values >= level + slope * (night - here))
        if above.sum() < 3:
            assert refused[place].endswith("on or above the line, 3 needed")
            continue
        expected = stats.linregress(night[above] - here, values[above])
        assert got[place] == pytest.approx(expected.intercept, abs=1e-9)
        assert error[place] == pytest.approx(expected.intercept_stderr, abs=1e-9)
        known += 1
    assert known > 20


def test_deficit_regression_gives_the_value_at_no_deficit_by_hand():
    # Night flow lowers the difference by 2 K per kPa: 9.8, 9.4, 9.0, ... all on one line that
    # meets no deficit at 10 K, though no night comes nearer than 9.8.
    deficit = np.array([0.1, 0.3, 0.5, 0.2, 0.4, 0.6, 0.1])
    table, line = run(nightly(10 - 2 * deficit, deficit), method="deficit_regression")
    assert table["difference_K"].max() == pytest.approx(9.8)
    np.testing.assert_allclose(table["baseline_K"], 10.0, rtol=0, atol=1e-12)
    np.testing.assert_allclose(table["baseline_error_K"], 0.0, rtol=0, atol=1e-12)
    np.testing.assert_allclose(line, 10.0, rtol=0, atol=1e-12)


def test_deficit_regression_stays_low_by_the_curvature_of_the_flow_index():
    # A night index of 0.1 per kPa gives 10 / (1 + 0.1 D) K. Over deficits spread evenly from 0 to
    # 1 kPa the least-squares line of a parabola a D^2 passes a / 6 below it at D = 0, and half the
    # second derivative is 0.1 at D = 0 and 0.075 at D = 1: 0.0125 to 0.0167 K too low.
    deficit = np.linspace(0, 1, 101)[np.random.default_rng(1).permutation(101)]
    level = 10 / (1 + 0.1 * deficit)
    got, _, _ = deficit_regression(np.arange(101), level, deficit, 101, 5, 0.2)
    assert np.all((got > 10 - 0.0167) & (got < 10 - 0.0125))


def test_deficit_regression_against_scipy():
    generator = np.random.default_rng(4)
    night = np.arange(50)
    deficit = generator.uniform(0, 1, 50)
    values = 10 - 1.5 * deficit + generator.normal(0, 0.05, 50)
    values[11], deficit[30] = NAN, NAN
    got, error, refused = deficit_regression(night, values, deficit, 10, 5, 0.2)
    assert np.isnan(got[[11, 30]]).all()
    assert refused[30] == "no vapour pressure deficit"
    for place in (0, 5, 12, 29, 49):
        near = (np.abs(night - place) <= 10) & np.isfinite(values) & np.isfinite(deficit)
        expected = stats.linregress(deficit[near], values[near])
        assert got[place] == pytest.approx(expected.intercept, abs=1e-9)
        assert error[place] == pytest.approx(expected.intercept_stderr, abs=1e-9)


def test_a_regime_needs_nights_and_a_range_of_deficit():
    table, _ = run(nightly([10.0] * 4, [0.1, 0.4, 0.2, 0.5]), method="deficit_regression")
    assert set(table["reason"]) == {"4 accepted nights in the regime, 5 needed"}
    table, _ = run(nightly([10.0] * 6, [0.1, 0.2, 0.15] * 2), method="deficit_regression")
    assert set(table["reason"]) == {"deficit of the regime spans 0.1 kPa, 0.2 needed"}
    assert not table["accepted"].any()


def test_reference_dates_count_windows_wholly_at_rest():
    resting = np.zeros(5 * 48)
    resting[48:56] = 1  # 2 March 0:00 to 4:00
    resting[3 * 48 : 3 * 48 + 3] = 1  # 4 March 0:00 to 1:30: shorter than the mean of 2 h
    arrays = nightly([10.0] * 5, 0.9, at_rest=resting)
    values = arrays["heated_difference"].values.copy()
    values[..., 57:59] = 12.0  # warmer, but after the dates
    arrays["heated_difference"] = arrays["heated_difference"].copy(data=values)
    table, line = run(arrays, method="reference_dates")
    assert table["accepted"].tolist() == [False, True, False, False, False]
    assert table["difference_K"][1] == 10.0
    assert table["time"][1] <= np.datetime64("2031-03-02T03:00")
    assert table["reason"][2] == "not at rest by references.csv"
    assert np.all(line == 10.0)  # one night holds for 21 days around


def test_diameter_plateau_waits_until_refilling_has_ended_by_hand():
    # Half-hourly diameters from 0:30. Night 0 swells by 20 um/h until 2:00 and is flat from then
    # on. Night 1 swells by 20 um/h to its end. Night 2 is flat, 40 um below where it began; the
    # mean over the windows from 2:00 on is that far below. Night 3 has no diameter. Night 4 rests
    # until 3:00 and then swells by 30 um/h to its end: what rested early was not full.
    hours = np.arange(1, 49) / 2
    day = [
        20 * np.minimum(hours, 2.0),
        20 * hours,
        np.where(hours <= 0.5, 40.0, 0.0),
        np.full(48, NAN),
        30 * np.maximum(hours - 3.0, 0.0),
    ]
    arrays = nightly([10.0] * 5, 0.9, stem_diameter_change=np.concatenate(day) * UM)
    values = arrays["heated_difference"].values.copy()
    values[..., 0:4] = 9.5  # until 2:00 flow fills the stem
    arrays["heated_difference"] = arrays["heated_difference"].copy(data=values)
    table, _ = run(arrays, method="diameter_plateau")
    assert table["accepted"].tolist() == [True, False, False, False, False]
    assert table["swelling_um_h"][0] <= 5
    assert table["swelling_um_h"][4] == pytest.approx(0.0, abs=1e-9)
    assert table["below_highest_um"][4] > 50  # sunrise is after 6:00
    assert table["difference_K"][0] == 10.0
    assert table["swelling_um_h"][1] == pytest.approx(20.0)
    assert table["reason"][1] == "stem swelling by 20.0 um h-1, above 5"
    assert table["reason"][3] == "no stem diameter"
    # The first window of night 2 holds 40, 0, 0, 0 um: it shrinks, 30 um below its highest.
    assert table["below_highest_um"][2] == pytest.approx(30.0)
    assert table["reason"][2] == "stem 30.0 um below its highest, above 10"


def test_the_plateau_finds_zero_flow_where_the_nightly_maximum_would_too():
    arrays = nightly(np.linspace(10, 9, 8), 0.9, stem_diameter_change=np.zeros(8))
    one, _ = run(arrays, method="diameter_plateau")
    other, _ = run(arrays, method="nightly_maximum")
    np.testing.assert_array_equal(one["baseline_K"], other["baseline_K"])


def test_highest_around_passes_over_missing_nights():
    night, values = np.array([0, 1, 4, 5]), np.array([10.5, NAN, 10.0, 10.2])
    np.testing.assert_array_equal(highest_around(night, values, 1), [10.5, NAN, 10.2, 10.2])


def test_lines_through_two_equal_places_are_nan():
    line = lines_through(np.array([[0.2, 0.2, NAN]]), np.array([[10.0, 11.0, 9.0]]))
    assert line.count.tolist() == [2]
    assert np.isnan(line.level[0])
    assert np.isnan(line.error[0])


def test_scatter_is_the_error_of_one_night_whatever_the_drift():
    generator = np.random.default_rng(8)
    night = np.cumsum(generator.integers(1, 6, 20000))
    noise = generator.normal(0, 0.03, len(night))
    # The median of 20000 dependent departures is known to about 1 %.
    assert scatter(night, 10 + noise) == pytest.approx(0.03, rel=0.03)
    assert scatter(night, 10 - 1e-3 * night + noise) == pytest.approx(0.03, rel=0.03)
    assert np.isnan(scatter(np.arange(4), np.ones(4)))


def test_the_error_of_a_nightly_mean_is_that_of_its_records():
    # 4 records of 2 h, each with independent noise of 0.02 K: 0.01 K for a mean. The highest of
    # the windows of a night varies less than any one of them.
    generator = np.random.default_rng(9)
    arrays = nightly([10.0] * 300)
    values = 10 + generator.normal(0, 0.02, 300 * 48)
    arrays["heated_difference"] = arrays["heated_difference"].copy(data=values[None, None])
    table, _ = run(arrays, method="nightly_maximum")
    assert 0.004 < table["baseline_error_K"][0] < 0.010
    quiet, _ = run(arrays, method="nightly_maximum", averaging_h=6.0)
    # The night has one window of 12 records or two: 0.02 / sqrt(12) = 0.0058.
    assert quiet["baseline_error_K"][0] == pytest.approx(0.0058, rel=0.2)


@pytest.mark.parametrize(("nights", "accepted", "enough"), [
    (30, 3, True), (30, 2, False), (15, 2, True), (15, 1, False), (90, 9, True), (90, 8, False),
])  # fmt: skip
def test_a_method_is_admissible_from_three_nights_in_thirty(nights, accepted, enough):
    deficit = np.where(np.arange(nights) < accepted, 0.02, 0.9)
    table, _ = run(nightly([10.0] * nights, deficit))
    assert table["accepted"].sum() == accepted
    assert (table["admissible"] == enough).all()
    stricter, _ = run(nightly([10.0] * nights, deficit), fewest_a_month=30.0)
    assert not stricter["admissible"].any()


def season(seed=12, nights=63):
    """A day index of 0.3 from 8 to 18 h and a night index of 0.1 per kPa, a humid night in five."""
    generator = np.random.default_rng(seed)
    deficit = generator.uniform(0.1, 0.8, nights)
    deficit[::5] = 0.02
    hour = np.tile(np.arange(48) / 2, nights)
    by_day = (hour >= 8) & (hour < 18)
    index = np.where(by_day, 0.3, np.repeat(0.1 * deficit, 48))
    arrays = nightly(10 / (1 + 0.1 * deficit), deficit)
    arrays["heated_difference"] = arrays["heated_difference"].copy(
        data=10 / (1 + index)[None, None]
    )
    return arrays, index, deficit


def flux_by_day(line, arrays):
    heated = arrays["heated_difference"].values[0, 0]
    index = dissipation.flow_index(line, heated)
    by_day = heated < 10 / 1.29
    return dissipation.flux_density(np.maximum(index, 0))[by_day].sum()


@pytest.mark.parametrize("method", ["quiet_nights", "deficit_regression"])
def test_methods_that_allow_for_night_flow_recover_the_season(method):
    arrays, _, _ = season()
    _, line = run(arrays, method=method)
    assert flux_by_day(line, arrays) == pytest.approx(
        flux_by_day(np.full(len(line), 10.0), arrays), rel=0.03
    )


def test_the_nightly_maximum_falls_short_of_it_by_what_theory_says():
    # Every night the baseline is 10 / (1 + night index), and a straight line between the nights:
    # their windows begin at the same time after midnight, so midday lies half a day from either.
    arrays, _, deficit = season()
    _, line = run(arrays, method="nightly_maximum")
    level = 10 / (1 + 0.1 * deficit)
    heated = 10 / 1.3
    expected = 0.0
    for night in range(len(level)):
        for hour in np.arange(8, 18, 0.5):
            # Records end half an hour after `hour`; the middle of a window from 0:30 is at 1:15.
            share = (hour + 0.5 - 1.25) / 24
            later = level[min(night + 1, len(level) - 1)]
            base = level[night] + share * (later - level[night])
            expected += dissipation.flux_density(base / heated - 1)
    true = flux_by_day(np.full(len(line), 10.0), arrays)
    assert flux_by_day(line, arrays) / true == pytest.approx(expected / true, abs=1e-3)
    assert expected / true < 0.85


def everything(days=26):
    """Records of two probes with all that the methods may ask for, faults and holes."""
    generator = np.random.default_rng(3)
    time = stamps("2031-03-01", days)
    size = len(time)
    hour = np.arange(size) % 48 / 2
    flow = np.stack([0.3, 0.6])[:, None] * np.sin(np.pi * (hour - 7) / 11).clip(0)
    heated = record((10 / (1 + flow) + generator.normal(0, 0.01, flow.shape))[:, None], time)
    heated = heated.where(generator.random(heated.shape) > 0.05)
    day = np.arange(size) // 48
    installation = np.zeros((2, size), dtype=int)
    installation[1, 500:] = 1
    arrays = {
        "heated_difference": heated,
        **beside(heated, generator.uniform(0, 400, days)[day], installation=installation),
    }
    along = {"probe": heated["probe"].values, "time": time}

    def of_probes(values):
        values = np.broadcast_to(values, (2, size)).copy()
        return xr.DataArray(values, along, ("probe", "time"))

    def of_site(values):
        return xr.DataArray(values, {"time": time}, "time")

    diameter = np.cumsum(generator.normal(0, UM, (2, size)), axis=1)
    diameter[:, generator.random(size) < 0.05] = NAN
    arrays |= {
        "air_temperature": of_site(generator.normal(277, 4, days)[day]),
        "precipitation": of_site(1.0 * (generator.random(size) < 0.05)),
        "heater_voltage": of_probes(2 + 0.011 * (day % 7 == 3) * (hour > 3)),
        "visited": of_probes(1 * (generator.random((2, size)) < 0.005)),
        "at_rest": of_probes(1 * (day % 3 > 0)),
        "stem_diameter_change": of_probes(diameter),
    }
    return arrays


@pytest.mark.parametrize("method", METHODS)
def test_same_bytes_for_every_block_length(method):
    arrays, changed = everything(), {"method": method, "highest_deficit_kPa": 0.2}
    table = table_of(STAGE, arrays, **changed)
    assert 0 < table["accepted"].sum() < len(table)
    whole = evaluated(STAGE, arrays, table, **changed)
    for days in (1, 2.7, 9):
        other = table_of(STAGE, arrays, block_days=days, **changed)
        assert table.equals(other)
        parts = evaluated(STAGE, arrays, other, block_days=days, **changed)
        for name in whole:
            assert whole[name].tobytes() == parts[name].tobytes()


@pytest.mark.parametrize("method", METHODS)
def test_no_method_looks_across_an_installation(method):
    size = 20 * 48
    installation = np.repeat([0, 1], size // 2)[None]
    arrays = nightly(np.repeat([10.0, 6.0], 10), np.tile([0.02, 0.3], 10),
                     at_rest=np.ones(20), stem_diameter_change=np.zeros(20))  # fmt: skip
    arrays["installation"] = arrays["installation"].copy(data=installation)
    table, line = run(arrays, method=method)
    assert set(table["installation"][table["accepted"]]) == {0, 1}
    np.testing.assert_allclose(line, np.where(installation[0] == 0, 10.0, 6.0), rtol=0, atol=1e-9)
    error = table["baseline_error_K"][table["accepted"]]
    np.testing.assert_allclose(error, 0.0, rtol=0, atol=1e-9)


@pytest.mark.parametrize("method", METHODS)
def test_every_refused_night_has_a_reason_and_no_value(method):
    table = table_of(STAGE, everything(), method=method)
    assert ((table["reason"] == "accepted") == table["accepted"]).all()
    assert (table["reason"] != "").all()
    assert (table["baseline_K"].notna() == table["accepted"]).all()
    if method != "quiet_nights":
        assert (table["accepted_if_drier"] == table["accepted"]).all()
        assert (table["accepted_if_wetter"] == table["accepted"]).all()
