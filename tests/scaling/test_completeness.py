"""The rules of completeness, each with its full message."""

import numpy as np
import pytest
from stand_by_hand import CALENDAR, at, deficit_of, hours, stand_of

from sapflux.scaling.completeness import (
    Completeness,
    day_totals,
    fair_weather_fault,
    percent,
)
from sapflux.scaling.days import stand_days
from sapflux.scaling.totals import daily, monthly, season, water_year

RULES = Completeness()
NAN = np.nan
# A day of 24 hours: sun from 6 to 18 h, the same all day, so that shares can be counted.
SUN = np.where((np.arange(24) >= 6) & (np.arange(24) < 18), 1.0, 0.0)


def judge(missing, *, sun=SUN, recorded=None, rules=RULES, by_day=2.0, by_night=1.0):
    rate = np.where(sun > 0, by_day, by_night) / 3600.0
    rate[list(missing)] = NAN
    spanned = np.ones(24, dtype=bool) if recorded is None else recorded
    total, reasons = day_totals(rate[None], sun[None], spanned[None], 3600, rules)
    return total[0], reasons[0]


def test_a_whole_day_is_its_sum():
    total, reason = judge([])
    assert total == pytest.approx(12 * 2 + 12 * 1, rel=1e-14)
    assert reason == ""


def test_missing_parts_of_a_valid_day_are_made_up_for_by_day_and_by_night():
    # One of 12 daylight hours (91.7 % of the light is there) and three of 12 hours of night.
    total, reason = judge([12, 0, 1, 2])
    assert reason == ""
    assert total == pytest.approx(36.0, rel=1e-14)


def test_the_daylight_part_is_weighted_with_the_light_that_is_missing():
    # The hour that is missing has 2 of 22 parts of light; flux is the same at all hours of day.
    sun = SUN * 2.0
    sun[[6, 17]] = 1.0
    total, reason = judge([12], sun=sun)
    assert reason == ""
    assert total == pytest.approx(12 + 22 / (20 / 22), rel=1e-14)


@pytest.mark.parametrize(
    ("missing", "reason"),
    [
        ([8, 12], "83.3 % of the daylight is covered, 90 % are needed"),
        (
            [8, 9, 10],
            "75 % of the daylight is covered, 90 % are needed; "
            "a daylight gap of 3 h, at most 2 h are allowed",
        ),
        ([0, 1, 2, 3, 4], "79.1 % of the records are there, 80 % are needed"),
        (
            [0, 1, 2, 3, 4, 5, 18, 19, 20, 21, 22, 23],
            "50 % of the records are there, 80 % are needed; no record at night",
        ),
        (range(24), "no record has a value"),
    ],
)
def test_each_rule_of_a_day_says_why(missing, reason):
    total, said = judge(missing)
    assert np.isnan(total)
    assert said == reason


def test_a_gap_in_weak_light_is_refused_for_its_length_alone():
    sun = SUN.copy()
    sun[6:9] = 0.1
    total, reason = judge([6, 7, 8], sun=sun)
    assert np.isnan(total)
    assert reason == "a daylight gap of 3 h, at most 2 h are allowed"


def test_a_night_without_any_record_is_refused_alone():
    sun = np.where(np.arange(24) < 22, 1.0, 0.0)
    assert judge([22, 23], sun=sun)[1] == "no record at night"


def test_a_day_without_sun_goes_by_its_records():
    total, reason = judge([1, 2], sun=np.zeros(24))
    assert reason == ""
    assert total == pytest.approx(24.0, rel=1e-14)


def test_limits_are_met_by_what_equals_them():
    sun = np.where(np.arange(24) < 20, 1.0, 0.0)
    assert judge([3, 15], sun=sun)[1] == ""  # 18 of 20 are 90 %
    looser = Completeness(least_daylight=0.5)
    assert judge([8, 9], rules=looser)[1] == ""  # a gap of 2 h
    assert judge([8, 9, 10], rules=looser)[1] == "a daylight gap of 3 h, at most 2 h are allowed"


def test_rules_have_defaults_and_limits_by_the_same_names():
    assert Completeness.defaults().keys() == Completeness.limits().keys()
    for name, value in Completeness.defaults().items():
        low, high = Completeness.limits()[name]
        assert low <= value <= high
    assert Completeness.defaults()["longest_daylight_gap_h"] == 2.0


def test_a_share_never_looks_larger_than_it_is():
    assert [percent(s) for s in (0.7999, 0.8, 0.29, 1.0, 0.0)] == [
        "79.9 %", "80 %", "29 %", "100 %", "0 %",
    ]  # fmt: skip


def days_of_deficit(valid, refused):
    return (
        np.array([*valid, *refused], dtype=float),
        np.array([True] * len(valid) + [False] * len(refused)),
    )


def test_fair_weather_passes_where_days_are_alike():
    assert fair_weather_fault(*days_of_deficit([800] * 25, [700] * 5), RULES) == ""
    assert fair_weather_fault(np.full(3, NAN), np.full(3, True), RULES) == ""


@pytest.mark.parametrize(
    ("valid", "refused", "reason"),
    [
        (
            [1000] * 24, [100] * 6,
            "6 days missing, and the mean deficit of the valid days is 1.000 kPa, of all days "
            "0.820 kPa: more than 10 % apart",
        ),
        ([NAN] * 24, [NAN], "1 day missing and no deficit to check for fair-weather bias"),
        (
            [1000] * 24, [900, NAN, NAN],
            "3 days missing, 2 of them without a deficit to check for fair-weather bias",
        ),
        (
            [NAN] * 24, [900],
            "1 day missing and no deficit on the valid days to check for fair-weather bias",
        ),
    ],
)  # fmt: skip
def test_fair_weather_says_why_not(valid, refused, reason):
    assert fair_weather_fault(*days_of_deficit(valid, refused), RULES) == reason


def test_fair_weather_tests_the_distribution_too():
    # 20 valid days near 1 kPa, 20 refused half at 0.1 and half at 1.9 kPa: the same mean, and a
    # largest distance between the distributions of 0.25, p 0.31. Under a stricter rule it fails.
    deficit, valid = days_of_deficit(np.linspace(990, 1010, 20), [100] * 10 + [1900] * 10)
    assert fair_weather_fault(deficit, valid, RULES) == ""
    strict = Completeness(least_deficit_probability=0.5)
    said = fair_weather_fault(deficit, valid, strict)
    assert said.startswith(
        "20 days missing, and the deficits of the valid days are not distributed as those of all "
        "days (p 0."
    )
    assert said.endswith(", at least 0.5 is needed)")


ENDS = hours("2031-06-01", "2031-06-30")


def june(refused_days, *, deficit=None, filled=0.0):
    rates = np.full(len(ENDS), 0.1)
    for day in refused_days:
        rates[at(ENDS, f"2031-06-{day:02d}", f"2031-06-{day:02d}T18")] = NAN
    wet = None if deficit is None else deficit_of(ENDS, deficit)
    days = stand_days(
        stand_of(ENDS, rates, filled=filled), [1e-3], CALENDAR, vapour_pressure_deficit=wet
    )
    return monthly(days).query("species == 'pine'").iloc[0], days


def test_a_whole_month_is_given():
    row, _ = june([])
    assert (row["start"], row["end"]) == ("2031-06-01", "2031-07-01")
    assert row["transpiration_mm"] == pytest.approx(72.0, rel=1e-12)
    assert (row["valid"], row["reason"]) == (1, "")
    assert row["measured_fraction"] == pytest.approx(1.0, rel=1e-12)


def test_refused_days_are_made_up_for_where_the_weather_was_alike():
    row, _ = june([3, 4, 5], deficit=np.full(30, 900.0))
    assert row["valid"] == 1
    assert row["reason"] == "3 of 30 days made up for"
    # Days of June differ in light by less than 2 %, the flux is the same every day.
    assert row["transpiration_mm"] == pytest.approx(72.0, rel=2e-3)
    assert row["modelled_fraction"] == pytest.approx(0.1, abs=2e-3)
    assert row["measured_fraction"] + row["modelled_fraction"] == pytest.approx(1.0, rel=1e-12)


def test_a_month_with_missing_days_and_no_deficit_is_refused():
    row, _ = june([3, 4, 5])
    assert np.isnan(row["transpiration_mm"])
    assert row["valid"] == 0
    assert row["reason"] == "3 days missing and no deficit to check for fair-weather bias"
    assert row["modelled_fraction"] == 0.0


def test_a_month_of_fair_weather_is_refused():
    wet = np.full(30, 1000.0)
    wet[:5] = 200.0
    row, _ = june([1, 2, 3, 4, 5], deficit=wet)
    assert np.isnan(row["transpiration_mm"])
    assert row["reason"] == (
        "5 days missing, and the mean deficit of the valid days is 1.000 kPa, of all days "
        "0.867 kPa: more than 10 % apart"
    )


def test_a_month_with_too_little_measured_is_empty():
    row, _ = june(range(1, 8), deficit=np.full(30, 900.0))
    assert np.isnan(row["transpiration_mm"])
    assert row["reason"] == (
        f"{percent(row['measured_fraction'])} of the expected flux is measured, 80 % are needed"
    )
    assert 0.76 < row["measured_fraction"] < 0.77


def test_filled_values_do_not_count_as_measured():
    row, _ = june([], filled=0.25)
    assert row["reason"] == "75 % of the expected flux is measured, 80 % are needed"
    assert row["filled_fraction"] == pytest.approx(0.25, rel=1e-12)


def test_expected_flux_weighs_days_by_light_not_by_count():
    # April 2031 at 47 N grows lighter: without its last six days, 80 % of the days carry less
    # than 80 % of the light; without its first six more.
    ends = hours("2031-04-01", "2031-04-30")
    found = {}
    for name, first, last in [
        ("last", "2031-04-25", "2031-05-01"),
        ("first", "2031-04-01", "2031-04-07"),
    ]:
        rates = np.where(at(ends, first, last), NAN, 0.1)
        days = stand_days(
            stand_of(ends, rates), [1e-3], CALENDAR,
            vapour_pressure_deficit=deficit_of(ends, np.full(30, 500.0)),
        )  # fmt: skip
        found[name] = monthly(days).iloc[0]
    assert found["last"]["valid"] == 0
    assert found["first"]["valid"] == 1


def test_a_month_that_the_record_does_not_span_counts_all_its_days():
    ends = hours("2031-06-10", "2031-06-30")
    row = monthly(stand_days(stand_of(ends, np.full(len(ends), 0.1)), [1e-3], CALENDAR)).iloc[0]
    assert (row["start"], row["end"], row["valid"]) == ("2031-06-01", "2031-07-01", 0)
    assert 0.69 < row["measured_fraction"] < 0.71
    assert row["reason"] == (
        f"{percent(row['measured_fraction'])} of the expected flux is measured, 80 % are needed"
    )


YEAR = hours("2030-10-01", "2031-09-30")


def year_of(rates, **given):
    days = stand_days(stand_of(YEAR, rates), [1e-3], CALENDAR, **given)
    return water_year(days).iloc[0], days


def test_a_whole_water_year_is_the_sum_of_its_months():
    generator = np.random.default_rng(5)
    row, days = year_of(generator.random(len(YEAR)))
    assert (row["start"], row["end"], row["valid"], row["reason"]) == (
        "2030-10-01", "2031-10-01", 1, "",
    )  # fmt: skip
    months = monthly(days).query("species == 'pine'")["transpiration_mm"]
    assert len(months) == 12
    assert row["transpiration_mm"] == pytest.approx(months.sum(), rel=1e-12)
    one_by_one = daily(days).query("species == 'pine'")["transpiration_mm"]
    assert row["transpiration_mm"] == pytest.approx(one_by_one.sum(), rel=1e-12)


def test_a_water_year_with_a_poor_month_is_empty():
    rates = np.where(at(YEAR, "2030-12-01", "2031-01-01"), NAN, 0.1)
    row, _ = year_of(rates, vapour_pressure_deficit=deficit_of(YEAR, np.full(365, 500.0)))
    assert np.isnan(row["transpiration_mm"])
    assert row["reason"] == "months with too little measured, 50 % are needed: 2030-12 0 %"


def test_a_water_year_with_too_little_measured_is_empty():
    rates = np.full(len(YEAR), 0.1)
    rates[at(YEAR, "2031-06-01", "2031-06-15")] = NAN
    rates[at(YEAR, "2031-07-01", "2031-07-15")] = NAN
    rates[at(YEAR, "2031-05-01", "2031-05-15")] = NAN
    rates[at(YEAR, "2031-08-01", "2031-08-15")] = NAN
    row, _ = year_of(rates, vapour_pressure_deficit=deficit_of(YEAR, np.full(365, 500.0)))
    assert row["reason"] == (
        f"{percent(row['measured_fraction'])} of the expected flux is measured, 80 % are needed"
    )
    assert row["measured_fraction"] < 0.8


def test_a_water_year_is_made_up_for_month_by_month():
    rates = np.where(at(YEAR, "2030-12-01", "2030-12-11"), NAN, 0.1)
    row, days = year_of(rates, vapour_pressure_deficit=deficit_of(YEAR, np.full(365, 500.0)))
    assert row["reason"] == "10 of 365 days made up for"
    # The 21 valid days of December over their share of its light; all other days as they are.
    light = days.light[(days.dates >= np.datetime64("2030-12-01"))
                       & (days.dates < np.datetime64("2031-01-01"))]  # fmt: skip
    expected = 2.4 * (334 + 21 * light.sum() / light[10:].sum())
    assert row["transpiration_mm"] == pytest.approx(expected, rel=1e-12)
    december = monthly(days).query("start == '2030-12-01' and species == 'pine'").iloc[0]
    share = percent(light[10:].sum() / light.sum())
    assert december["reason"] == f"{share} of the expected flux is measured, 80 % are needed"


def test_season_sums_only_days_that_may_be_totalled():
    _, days = june([3, 4, 5])
    row = season(days).iloc[0]
    assert row["transpiration_mm"] == pytest.approx(27 * 2.4, rel=1e-12)
    assert (row["days"], row["days_refused"], row["valid"]) == (27, 3, 1)
    assert (row["start"], row["end"], row["reason"]) == ("2031-06-01", "2031-07-01", "")


def test_a_season_without_a_valid_day_is_empty():
    _, days = june(range(1, 31))
    row = season(days).iloc[0]
    assert np.isnan(row["transpiration_mm"])
    assert row["reason"] == "none of 30 days may be totalled"
    assert (row["days"], row["days_refused"], row["valid"], row["trees"]) == (0, 30, 0, 0)
