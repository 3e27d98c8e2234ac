"""Tables of totals: days, stands, dormancy, trees."""

import numpy as np
import pytest
import xarray as xr
from stand_by_hand import CALENDAR, HOUR, MM_PER_H, at, deficit_of, hours, stand_of

from sapflux import quality
from sapflux.scaling.completeness import Completeness
from sapflux.scaling.days import Calendar, daily_deficit, day_grid, stand_days, water_year_begin
from sapflux.scaling.totals import (
    COLUMNS,
    TREE_COLUMNS,
    daily,
    monthly,
    season,
    tree_daily,
    water_year,
)

NAN = np.nan
ENDS = hours("2031-06-01", "2031-06-30")
TOTALS = [daily, monthly, season, water_year]


def random_stand(species=2, **given):
    rates = np.random.default_rng(11).random((species, len(ENDS)))
    return stand_of(ENDS, rates, **given)


def test_tables_have_exactly_the_agreed_columns():
    days = stand_days(random_stand(), [1e-3, 2e-3], CALENDAR)
    for table in (daily, monthly, water_year):
        assert tuple(table(days).columns) == COLUMNS
    assert tuple(season(days).columns) == (*COLUMNS, "days", "days_refused")


def test_one_kg_per_m2_is_one_mm():
    rates = np.full(len(ENDS), 1.0 / 24.0)
    frame = daily(stand_days(stand_of(ENDS, rates), [1e-3], CALENDAR))
    assert len(frame) == 2 * 30
    np.testing.assert_allclose(frame["transpiration_mm"], 1.0, rtol=1e-14)
    assert frame["lower_mm"].isna().all() and frame["upper_mm"].isna().all()


def test_the_record_that_ends_at_midnight_belongs_to_the_day_before():
    rates = np.zeros(len(ENDS))
    rates[23] = 5.0  # ends at 0 h of 2 June, fixed standard time
    rates[24] = 7.0  # the first of 2 June
    frame = daily(stand_days(stand_of(ENDS, rates), [1e-3], CALENDAR))
    assert ENDS[23] == np.datetime64("2031-06-01T23")  # in UTC
    np.testing.assert_allclose(frame["transpiration_mm"][:3], [5.0, 7.0, 0.0], rtol=1e-14)
    assert frame.iloc[0][["start", "end"]].tolist() == ["2031-06-01", "2031-06-02"]


def test_days_are_those_of_the_fixed_standard_time():
    for offset in (-9.0, 0.0, 5.5, 13.0):
        calendar = Calendar(1800, offset, 47.0, 15.0 * offset)
        begin = np.datetime64("2031-06-01T00:00") - np.timedelta64(round(offset * 60), "m")
        ends = begin + np.arange(1, 97) * np.timedelta64(30, "m")
        rates = np.repeat([1.0, 2.0], 48)
        frame = daily(stand_days(stand_of(ends, rates), [1e-3], calendar))
        np.testing.assert_allclose(frame["transpiration_mm"][:2], [24.0, 48.0], rtol=1e-12)


def test_shifting_clock_and_place_together_shifts_the_result():
    stand = random_stand()
    plain = daily(stand_days(stand, [1e-3, 1e-3], CALENDAR))["transpiration_mm"]
    moved = stand.assign_coords(time=stand["time"] + np.timedelta64(5, "h"))
    west = Calendar(3600, -4.0, 47.0, 8.0 - 75.0, "10-01")
    np.testing.assert_array_equal(
        daily(stand_days(moved, [1e-3, 1e-3], west))["transpiration_mm"], plain
    )


def test_a_record_over_midnight_belongs_to_the_day_it_ends_in():
    calendar = Calendar(3600, 5.5, 27.0, 85.0)
    ends = np.datetime64("2031-06-01T00") + np.arange(48) * HOUR
    grid = day_grid(ends, calendar)
    # 00 UTC is 05:30; records end at half past. The one that ends at 0:30 is the day's first.
    assert grid.slot[:2].tolist() == [5, 6]
    assert grid.day[[18, 19]].tolist() == [0, 1]
    assert grid.slot[[18, 19]].tolist() == [23, 0]
    assert grid.recorded.sum() == 48


def test_species_sum_to_the_stand():
    days = stand_days(random_stand(3), [1e-3, 2e-3, 0.5e-3], CALENDAR)
    for table in (daily, monthly, season):
        frame = table(days)
        parts = frame[frame["species"] != "all"].groupby("start")["transpiration_mm"].sum()
        whole = frame[frame["species"] == "all"].set_index("start")["transpiration_mm"]
        np.testing.assert_allclose(whole, parts.loc[whole.index], rtol=1e-12)


def test_days_sum_to_the_month():
    days = stand_days(random_stand(), [1e-3, 2e-3], CALENDAR)
    per_day = daily(days).groupby("species")["transpiration_mm"].sum()
    per_month = monthly(days).set_index("species")["transpiration_mm"]
    np.testing.assert_allclose(per_month, per_day.loc[per_month.index], rtol=1e-12)
    whole = season(days).set_index("species")["transpiration_mm"]
    np.testing.assert_allclose(whole, per_month.loc[whole.index], rtol=1e-12)


def test_nan_is_never_summed_as_zero():
    rates = np.full((2, len(ENDS)), 0.1)
    rates[0, at(ENDS, "2031-06-05T10", "2031-06-05T14")] = NAN
    days = stand_days(stand_of(ENDS, rates), [1e-3, 1e-3], CALENDAR)
    frame = daily(days).set_index(["species", "start"])
    fifth = frame.xs("2031-06-05", level="start")
    assert fifth.loc["pine", "valid"] == 0 and np.isnan(fifth.loc["pine", "transpiration_mm"])
    assert fifth.loc["oak", "transpiration_mm"] == pytest.approx(2.4, rel=1e-14)
    assert np.isnan(fifth.loc["all", "transpiration_mm"])
    assert fifth.loc["all", "reason"] == f"pine: {fifth.loc['pine', 'reason']}"
    rows = season(days).set_index("species")
    assert rows["days"].to_dict() == {"pine": 29, "oak": 30, "all": 29}
    # The stand's season is over the days that are valid for both species.
    assert rows.loc["all", "transpiration_mm"] == pytest.approx(29 * 2 * 2.4, rel=1e-12)


def test_days_that_the_record_spans_in_part_are_refused_at_both_ends():
    part = slice(7, -3)
    stand = random_stand().isel(time=part)
    frame = daily(stand_days(stand, [1e-3, 1e-3], CALENDAR)).set_index(["species", "start"])
    for name in ("pine", "oak", "all"):
        first, last = frame.loc[name, "2031-06-01"], frame.loc[name, "2031-06-30"]
        assert np.isnan(first["transpiration_mm"]) and np.isnan(last["transpiration_mm"])
        assert first["reason"] == "the record spans 17 of 24 h of this day"
        assert last["reason"] == "the record spans 21 of 24 h of this day"
    assert frame["valid"].sum() == 3 * 28


def test_several_stands_stand_apart():
    rates = np.array([[0.1], [0.2], [0.3]]) * np.ones(len(ENDS))
    stand = stand_of(
        ENDS, rates, stands=["north", "south", "north"], species=["pine", "pine", "oak"]
    )
    frame = monthly(stand_days(stand, [1e-3] * 3, CALENDAR))
    assert frame[["stand", "species"]].to_numpy().tolist() == [
        ["north", "pine"], ["north", "oak"], ["north", "all"], ["south", "pine"], ["south", "all"],
    ]  # fmt: skip
    np.testing.assert_allclose(
        frame["transpiration_mm"], np.array([0.1, 0.3, 0.4, 0.2, 0.2]) * 720, rtol=1e-12
    )


def test_trees_are_the_fewest_behind_a_value_and_add_up_in_the_stand():
    live = np.full((2, len(ENDS)), 5)
    live[0, 30] = 3
    live[1, 40] = 4
    stand = random_stand(live=live)
    days = stand_days(stand, [1e-3, 1e-3], CALENDAR)
    assert daily(days)["trees"].tolist() == (
        [5, 3, *([5] * 28), 5, 4, *([5] * 28), 10, 7, *([10] * 28)]
    )
    assert monthly(days)["trees"].tolist() == [3, 4, 7]


def test_fractions_of_the_stand_are_weighted_with_sapwood():
    filled = np.array([[0.1], [0.2]])
    stand = random_stand(filled=filled * np.ones(len(ENDS)))
    rows = monthly(stand_days(stand, [3e-3, 1e-3], CALENDAR)).set_index("species")
    np.testing.assert_allclose(
        rows.loc[["pine", "oak", "all"], "filled_fraction"],
        [0.1, 0.2, (3 * 0.1 + 1 * 0.2) / 4],
        rtol=1e-12,
    )
    np.testing.assert_allclose(
        rows["measured_fraction"] + rows["filled_fraction"] + rows["modelled_fraction"], 1.0,
        rtol=1e-12,
    )  # fmt: skip


AUTUMN = hours("2031-09-01", "2031-11-30")


def autumn(after=NAN):
    """A species that is in leaf until 17 October, and an evergreen."""
    dormant = at(AUTUMN, "2031-10-17", "2031-12-01")
    rates = np.array([np.where(dormant, after, 0.1), np.full(len(AUTUMN), 0.05)])
    leaf = np.array([~dormant, np.ones(len(AUTUMN))])
    stand = stand_of(AUTUMN, rates, leaf=leaf, species=["oak", "pine"])
    return stand_days(stand, [1e-3, 1e-3], CALENDAR)


def test_a_half_dormant_month_counts_zero_and_shows_it():
    days = autumn()
    rows = monthly(days).query("start == '2031-10-01'").set_index("species")
    oak = rows.loc["oak"]
    assert (oak["valid"], oak["reason"]) == (1, "")
    assert oak["transpiration_mm"] == pytest.approx(16 * 2.4, rel=1e-12)
    assert oak["measured_fraction"] == pytest.approx(1.0, rel=1e-12)
    # Days shorten: the second half of October has less than its 15/31 of the light.
    assert 0.42 < oak["assumed_zero_fraction"] < 15 / 31
    whole = rows.loc["all"]
    assert whole["transpiration_mm"] == pytest.approx(16 * 2.4 + 31 * 1.2, rel=1e-12)
    assert whole["assumed_zero_fraction"] == pytest.approx(oak["assumed_zero_fraction"] / 2)


def test_a_wholly_dormant_month_is_an_assumed_zero():
    row = monthly(autumn()).query("start == '2031-11-01' and species == 'oak'").iloc[0]
    assert row["transpiration_mm"] == 0.0
    assert (row["valid"], row["trees"], row["assumed_zero_fraction"]) == (1, 0, 1.0)
    assert np.isnan(row["measured_fraction"])


def test_what_was_measured_in_dormancy_counts():
    row = monthly(autumn(after=0.01)).query("start == '2031-11-01' and species == 'oak'").iloc[0]
    assert row["transpiration_mm"] == pytest.approx(30 * 0.24, rel=1e-12)
    assert row["assumed_zero_fraction"] == 0.0


def test_dormant_days_are_not_scaled_up_with_the_leafy_ones():
    stand_rates = np.where(at(AUTUMN, "2031-10-05", "2031-10-06"), NAN, 0.1)
    stand_rates[at(AUTUMN, "2031-10-17", "2031-12-01")] = 0.01  # measured in dormancy
    leaf = ~at(AUTUMN, "2031-10-17", "2031-12-01")
    stand = stand_of(AUTUMN, stand_rates, leaf=leaf, species=["oak"])
    days = stand_days(
        stand, [1e-3], CALENDAR,
        vapour_pressure_deficit=deficit_of(AUTUMN, np.full(91, 400.0)),
    )  # fmt: skip
    row = monthly(days).query("start == '2031-10-01' and species == 'oak'").iloc[0]
    light = days.expected[0][(days.dates >= np.datetime64("2031-10-01"))
                             & (days.dates < np.datetime64("2031-10-17"))]  # fmt: skip
    expected = 15 * 2.4 * light.sum() / (light.sum() - light[4]) + 15 * 0.24
    assert row["transpiration_mm"] == pytest.approx(expected, rel=1e-12)
    assert row["reason"] == "1 of 31 days made up for"


def leaf_calendar(ends):
    """In leaf from 15 April to 17 October; the second species always."""
    day = ends - np.timedelta64(1, "s") + HOUR
    month = day.astype("datetime64[M]").astype(int) % 12 + 1
    number = (day.astype("datetime64[D]") - day.astype("datetime64[M]")).astype(int) + 1
    code = month * 100 + number
    return np.array([(code >= 415) & (code < 1017), np.ones(len(ends))])


def test_dormant_days_outside_the_record_are_zero_where_the_leafy_period_is_known():
    ends = hours("2031-04-01", "2031-10-20")
    leaf = leaf_calendar(ends)[0]
    stand = stand_of(ends, np.where(leaf, 0.1, NAN), species=["oak"])
    days = stand_days(stand, [1e-3], CALENDAR, in_leaf=lambda e: leaf_calendar(e)[:1])
    years = water_year(days).set_index("start")
    first = years.loc["2030-10-01"].iloc[0]
    assert first["valid"] == 0  # the sixteen leafy days of October 2030 are not in the record
    assert first["reason"] == "months with too little measured, 50 % are needed: 2030-10 0 %"
    october = monthly(days).query("start == '2031-10-01' and species == 'oak'").iloc[0]
    assert october["transpiration_mm"] == pytest.approx(16 * 2.4, rel=1e-12)
    april = monthly(days).query("start == '2031-04-01' and species == 'oak'").iloc[0]
    assert april["transpiration_mm"] == pytest.approx(16 * 2.4, rel=1e-12)
    # The leafy days of one year lie in one water year.
    starting_in_november = Calendar(3600, 1.0, 47.0, 8.0, "11-01")
    days = stand_days(stand, [1e-3], starting_in_november, in_leaf=lambda e: leaf_calendar(e)[:1])
    row = water_year(days).iloc[0]
    assert (row["start"], row["end"], row["valid"]) == ("2030-11-01", "2031-11-01", 1)
    assert row["transpiration_mm"] == pytest.approx(185 * 2.4, rel=1e-12)


def test_without_a_leafy_period_days_outside_the_record_are_expected_to_transpire():
    row = water_year(autumn()).query("start == '2031-10-01' and species == 'oak'").iloc[0]
    assert row["valid"] == 0
    assert row["measured_fraction"] < 0.2


@pytest.mark.parametrize(
    ("date", "start", "begin"),
    [
        ("2031-09-30", "10-01", "2030-10-01"),
        ("2031-10-01", "10-01", "2031-10-01"),
        ("2031-01-01", "01-01", "2031-01-01"),
        ("2031-12-31", "01-01", "2031-01-01"),
        ("2031-06-14", "06-15", "2030-06-15"),
    ],
)
def test_water_years_begin_on_their_day(date, start, begin):
    calendar = Calendar(3600, 0.0, 0.0, 0.0, start)
    assert str(water_year_begin(np.datetime64(date), calendar)) == begin


def test_a_record_over_two_water_years_gives_both():
    ends = hours("2031-09-20", "2031-10-10")
    frame = water_year(stand_days(stand_of(ends, np.ones(len(ends))), [1e-3], CALENDAR))
    assert frame[["species", "start", "end", "valid"]].to_numpy().tolist() == [
        ["pine", "2030-10-01", "2031-10-01", 0], ["pine", "2031-10-01", "2032-10-01", 0],
        ["all", "2030-10-01", "2031-10-01", 0], ["all", "2031-10-01", "2032-10-01", 0],
    ]  # fmt: skip


def test_a_stand_with_the_same_reason_for_all_says_it_once():
    rates = np.full((2, len(ENDS)), NAN)
    frame = daily(stand_days(stand_of(ENDS, rates), [1e-3, 1e-3], CALENDAR))
    assert set(frame["reason"]) == {"no record has a value"}
    assert frame["transpiration_mm"].isna().all()
    assert set(frame["trees"]) == {0}


def stand_row(missing, deficit=None):
    """The stand's row of June with whole days missing, species by species."""
    rates = np.full((3, len(ENDS)), 0.1)
    for rate, days in zip(rates, missing, strict=True):
        for day in days:
            rate[at(ENDS, f"2031-06-{day:02d}", f"2031-06-{day:02d}T23")] = NAN
    wet = None if deficit is None else deficit_of(ENDS, np.full(30, deficit))
    days = stand_days(stand_of(ENDS, rates), [1e-3] * 3, CALENDAR, vapour_pressure_deficit=wet)
    return monthly(days).query("species == 'all'").iloc[0]


@pytest.mark.parametrize(
    ("missing", "reason"),
    [
        # pine, oak, beech; without a deficit no missing day is made up for
        (([4], [], []), "pine: 1 day missing and no deficit to check for fair-weather bias"),
        (([4], [9], []), "pine, oak: 1 day missing and no deficit to check for fair-weather bias"),
        (([4], [9], [4]), "1 day missing and no deficit to check for fair-weather bias"),
        (([4, 5], [], [9]), "refused for pine, beech: see their rows"),
        (([4, 5], [6], [9]), "refused for pine, oak, beech: see their rows"),
        (([], [], []), ""),
    ],
)
def test_a_refused_stand_gives_one_reason_whole_and_of_several_the_species(missing, reason):
    row = stand_row(missing)
    assert row["reason"] == reason
    assert row["valid"] == (reason == "")


@pytest.mark.parametrize(
    ("missing", "reason"),
    [
        (([4], [9], [4]), "1 of 30 days made up for"),
        (([], [9], []), "oak: 1 of 30 days made up for"),
        (([4, 5], [], [9]), "days made up for in pine, beech: see their rows"),
    ],
)
def test_a_valid_stand_says_shortly_that_days_were_made_up_for(missing, reason):
    row = stand_row(missing, deficit=900.0)
    assert (row["valid"], row["reason"]) == (1, reason)


def test_no_records_are_refused():
    with pytest.raises(ValueError, match=r"^no records to lay on days$"):
        day_grid(np.array([], dtype="datetime64[ns]"), CALENDAR)


def test_strata_that_do_not_match_are_refused():
    with pytest.raises(ValueError, match=r"and in_leaf differ: \(2, 1, 2\)$"):
        stand_days(random_stand(), [1e-3], CALENDAR)


def test_the_mean_deficit_of_a_day_needs_its_records():
    dates = np.arange(np.datetime64("2031-06-01"), np.datetime64("2031-06-04"))
    ends = hours("2031-06-01", "2031-06-03")
    values = np.repeat([100.0, 200.0, 300.0], 24)
    values[24:28] = NAN  # 20 of 24 are 83 %
    values[48:53] = NAN  # 19 of 24 are 79 %
    deficit = xr.DataArray(values, {"time": ends}, ("time",))
    found = daily_deficit(deficit, dates, CALENDAR, Completeness())
    np.testing.assert_array_equal(found, [100.0, 200.0, NAN])
    assert np.isnan(daily_deficit(None, dates, CALENDAR, Completeness())).all()


def test_trees_by_day():
    flows = np.full((2, len(ENDS)), 0.5 / 3600.0)  # half a kilogram an hour
    flows[1, 30:54] = NAN
    coords = {
        "tree": ["N-1", "N-2"],
        "stand": ("tree", ["north", "north"]),
        "species": ("tree", ["pine", "oak"]),
        "time": ENDS,
    }
    dims = ("tree", "time")
    share = np.where(np.isfinite(flows), 0.25, NAN)
    trees = xr.Dataset({"tree_flow": (dims, flows), "tree_filled_share": (dims, share)}, coords)
    frame = tree_daily(trees, CALENDAR)
    assert tuple(frame.columns) == TREE_COLUMNS
    assert len(frame) == 60
    first = frame.iloc[0]
    assert first[["tree", "stand", "species", "start", "end"]].tolist() == [
        "N-1", "north", "pine", "2031-06-01", "2031-06-02",
    ]  # fmt: skip
    assert first["water_use_kg"] == pytest.approx(12.0, rel=1e-14)
    assert first["measured_fraction"] == pytest.approx(0.75, rel=1e-12)
    assert first["filled_fraction"] == pytest.approx(0.25, rel=1e-12)
    refused = frame[frame["valid"] == 0]
    assert refused["start"].tolist() == ["2031-06-02", "2031-06-03"]
    assert refused["water_use_kg"].isna().all()
    assert (refused["reason"] != "").all()
    assert tuple(tree_daily(trees.isel(tree=[]), CALENDAR).columns) == TREE_COLUMNS


def test_flux_times_time_is_the_total_to_the_last_digits():
    stand = random_stand(1)
    days = stand_days(stand, [1e-3], CALENDAR)
    by_hand = stand["stand_transpiration"].values.sum() * 3600.0
    assert monthly(days)["transpiration_mm"].iloc[0] == pytest.approx(by_hand, rel=1e-12)
    assert by_hand == pytest.approx(stand["stand_transpiration"].values.sum() / MM_PER_H, rel=1e-12)


@pytest.mark.parametrize("table", TOTALS, ids=lambda table: table.__name__)
def test_every_refused_row_says_why_and_is_empty(table):
    rates = np.random.default_rng(2).random((3, len(ENDS)))
    rates[np.random.default_rng(3).random(rates.shape) < 0.1] = NAN
    rates[2] = NAN
    frame = table(stand_days(stand_of(ENDS, rates), [1e-3] * 3, CALENDAR))
    refused = frame["valid"] == 0
    assert refused.any()
    assert (frame["transpiration_mm"].isna() == refused).all()
    assert (frame.loc[refused, "reason"] != "").all()


def few(frame, ends, first, last, live):
    """The stand with too few live trees from first to last."""
    where = at(ends, first, last)
    made = frame.copy(deep=True)
    made["live_trees"].values[:, where] = live
    made["stand_transpiration"].values[:, where] = np.nan
    bits = np.zeros(made["stand_transpiration"].shape, np.int64)
    bits[:, where] = quality.FLAGS["few_trees"].mask
    made["quality"] = (("stand_species", "time"), bits)
    return made


@pytest.mark.parametrize(
    ("first", "last", "live", "reason"),
    [
        ("2031-07-02T00", "2031-07-03T00", 2, "too few live trees: at most 2 at a time"),
        ("2031-07-02T00", "2031-07-03T00", 0, "no instrumented tree has a value"),
    ],
)
def test_a_day_refused_for_too_few_trees_says_so(first, last, live, reason):
    ends = hours("2031-07-01", "2031-07-03")
    stand = few(stand_of(ends, np.full(len(ends), 0.1)), ends, first, last, live)
    frame = daily(stand_days(stand, [1e-3], CALENDAR))
    own = frame.query("species == 'pine' and start == '2031-07-02'")
    assert own["valid"].tolist() == [0]
    assert own["reason"].tolist() == [reason]


def test_a_day_refused_in_part_for_too_few_trees_says_for_how_long():
    ends = hours("2031-07-01", "2031-07-03")
    stand = stand_of(ends, np.full(len(ends), 0.1))
    stand = few(stand, ends, "2031-07-02T08", "2031-07-02T16", 2)
    frame = daily(stand_days(stand, [1e-3], CALENDAR))
    (reason,) = frame.query("species == 'pine' and start == '2031-07-02'")["reason"]
    assert reason.endswith(
        "a daylight gap of 8 h, at most 2 h are allowed; 66.6 % of the records are there, 80 % "
        "are needed (too few live trees for 8 h)"
    )
