"""What a stem shows without heating, and its removal."""

import numpy as np
import pytest
import thermocouple_its90
import xarray as xr
from correction_records import beside, evaluated, fact, record, stamps, table_of

import sapflux.correction  # noqa: F401
from sapflux.correction.night_table import no_rows
from sapflux.physics import dissipation
from sapflux.stage import REGISTRY, bind

STAGE = REGISTRY["heat_dissipation", "natural_gradient"]
NO_NIGHTS = no_rows("gradient_K")


def call(heated, nights=NO_NIGHTS, method="pair_else_power_off", installation=0, **arrays):
    settings = STAGE.defaults() | {"method": method}
    available = {"heated_difference": heated, STAGE.table: nights, **arrays}
    available["installation"] = beside(heated, installation=installation)["installation"]
    return bind(STAGE.function, available, settings)


def flux(heated, zero):
    return dissipation.flux_density(dissipation.flow_index(zero, heated))


# Pairs


@pytest.mark.parametrize(
    ("gradient", "per_cent"),
    [(0.1, -9), (0.2, -17), (0.5, -40), (-0.1, 9), (-0.2, 18), (-0.5, 49)],
)
def test_a_gradient_by_day_costs_flux_and_is_removed_published(gradient, per_cent):
    # An index of 0.2 at 10 K without flow, none by night; calculated, to whole per cents.
    heated = record([10.0, 10.0 / 1.2 + gradient])
    natural = record([0.0, gradient])
    true = flux(10.0 / 1.2, 10.0)
    before = heated.values[0, 0]
    assert 100 * (flux(before[1], before[0]) / true - 1) == pytest.approx(per_cent, abs=0.5)
    made = call(heated, natural_difference=natural, paired=fact(1.0, heated))
    after = made["heated_difference"].values[0, 0]
    assert flux(after[1], after[0]) == pytest.approx(true, rel=1e-12)
    assert made["natural_gradient"].values[0, 0] == pytest.approx([0.0, gradient])
    assert made["steep_gradient"].values[0, 0].tolist() == [False, abs(gradient) > 0.2]


def test_a_pair_that_logs_volts():
    # thermocouple-its90: 0.2 K above 20 degC; and 10 K amiss in the stem are 2 % of it.
    def volts(upper, lower):
        return (thermocouple_its90.TypeT.emf(upper) - thermocouple_its90.TypeT.emf(lower)) * 1e-3

    heated = record([9.0, 9.0])
    emf = record([volts(20.2, 20.0), volts(19.8, 20.0)])
    made = call(heated, natural_emf=emf, paired=fact(1.0, heated))
    assert made["natural_gradient"].values[0, 0] == pytest.approx([0.2, -0.2], abs=1e-8)
    emf = record([volts(30.2, 30.0)] * 2)
    made = call(heated, natural_emf=emf, paired=fact(1.0, heated))
    assert made["natural_gradient"].values[0, 0] == pytest.approx([0.2 * 1.02] * 2, rel=2e-3)


def test_who_has_no_pair_passes_unchanged_and_a_missing_reading_is_flagged():
    heated = record(np.full((4, 1, 3), 9.0))
    heated[3, 0, 1] = np.nan
    natural = record(np.full((4, 1, 3), 0.5))
    natural[:, 0, 2] = np.nan
    in_cycles = fact([np.nan, np.nan, 1800.0, np.nan], heated)
    made = call(
        heated, natural_difference=natural, paired=fact([1, 0, 1, 1], heated), heating_on=in_cycles
    )
    found = made["heated_difference"].values[:, 0]
    np.testing.assert_array_equal(
        found, [[8.5, 8.5, np.nan], [9, 9, 9], [9, 9, 9], [8.5, np.nan, np.nan]]
    )
    missing = made["no_gradient"].values[:, 0]
    assert missing.tolist() == [
        [False, False, True],
        [False] * 3,
        [False] * 3,
        [False, False, True],
    ]
    gradient = made["natural_gradient"].values[:, 0]
    assert gradient[1].tolist() == [0.0] * 3
    assert np.isnan(gradient[3, 1])


def test_a_pair_that_was_never_logged_is_flagged_while_it_is_given():
    heated = record([9.0] * 4)
    paired = xr.DataArray(
        [[1.0, 1.0, 0.0, 0.0]], {"probe": heated["probe"], "time": heated["time"]},
        ("probe", "time"),
    )  # fmt: skip
    made = call(heated, paired=paired)
    assert made["no_gradient"].values[0, 0].tolist() == [True, True, False, False]
    assert made["heated_difference"].values[0, 0, 2:].tolist() == [9.0, 9.0]


@pytest.mark.parametrize("method", ["pair_else_power_off", "pair", "power_off"])
def test_nothing_to_subtract_leaves_the_signal_as_it_is(method):
    heated = record([9.0, np.nan, 8.0])
    made = call(heated, method=method)
    assert made["heated_difference"].equals(heated)
    assert made["natural_gradient"].values[0, 0].tolist()[::2] == [0.0, 0.0]
    assert not any(made[name].any() for name in STAGE.flags if name in made)


# Nights without power: at longitude 0 true solar midnight is within 10 min of 0 h UTC


def powered_off(like, spans):
    """(probe, time) 1 on records that (from, to) spans touch, for every probe."""
    ends = like["time"].values
    begins = ends - np.diff(ends[:2])
    off = np.zeros(len(ends))
    for first, last in spans:
        off[(ends > np.datetime64(first)) & (begins < np.datetime64(last))] = 1.0
    shape = (like.sizes["probe"], len(ends))
    coords = {"probe": like["probe"].values, "time": ends}
    return xr.DataArray(np.broadcast_to(off, shape).copy(), coords, ("probe", "time"))


SPANS = [("2031-09-03T18:00", "2031-09-04T07:00"), ("2031-09-13T18:00", "2031-09-14T07:00")]


def season(values=(0.4, -0.1), days=20):
    """Inputs of the stage: 9 K, in two nights without power the values, cold to start with."""
    time = stamps("2031-09-01", days)
    heated = record(np.full(len(time), 9.0), time)
    off = powered_off(heated, SPANS)
    for (first, last), value in zip(SPANS, values, strict=True):
        night = (time > np.datetime64(first)) & (time <= np.datetime64(last))
        heated.values[0, 0, night] = value
        settling = (time > np.datetime64(first)) & (time <= np.datetime64(first, "m") + 180)
        heated.values[0, 0, settling] = 4.0
    return {"heated_difference": heated, "power_off": off, **beside(heated)}


def test_the_gradient_of_nights_without_power_by_hand():
    arrays = season()
    table = table_of(STAGE, arrays)
    assert table["gradient_K"].tolist() == pytest.approx([0.4, -0.1], abs=1e-15)
    assert table["accepted"].all() and table["reason"].tolist() == ["accepted"] * 2
    assert table["start"].astype("datetime64[s]").dt.date.astype(str).tolist() == [
        "2031-09-03",
        "2031-09-13",
    ]
    made = evaluated(STAGE, arrays, table)
    gradient, time = made["natural_gradient"][0, 0], arrays["heated_difference"]["time"].values
    first, last = table["time"].to_numpy()
    assert gradient[time < first] == pytest.approx(0.4)
    assert gradient[time > last] == pytest.approx(-0.1)
    middle = np.argmin(np.abs(time - (first + (last - first) / 2)))
    # half-way 0.15; half a record is 0.5 / 480 records of the way
    assert gradient[middle] == pytest.approx(0.15, abs=0.5 / 480)
    assert made["heated_difference"][0, 0, 0] == pytest.approx(8.6)
    assert made["steep_gradient"][0, 0, 0] and not made["steep_gradient"][0, 0, -1]
    assert not made["no_gradient"].any()


def test_only_settled_records_count():
    time = stamps("2031-09-01", 4)
    heated = record(np.full(len(time), 9.0), time)
    off = powered_off(heated, [("2031-09-02T23:00", "2031-09-03T03:40")])
    # Off from 23:00, so settled from 2:00 on; the heater is back within the record to 4:00.
    values = {"02:30": 0.2, "03:00": 0.3, "03:30": 0.7, "04:00": 3.0}
    for stamp, value in values.items():
        heated.values[0, 0, time == np.datetime64(f"2031-09-03T{stamp}")] = value
    arrays = {"heated_difference": heated, "power_off": off, **beside(heated)}
    table = table_of(STAGE, arrays)
    # Those to 2:30, 3:00 and 3:30 have the heater off throughout: (0.2 + 0.3 + 0.7) / 3.
    assert table["records"].tolist() == [3]
    assert table["gradient_K"].tolist() == pytest.approx([0.4])
    late = table_of(STAGE, arrays, settling_h=6.0)
    assert late["accepted"].tolist() == [False]
    assert late["reason"].tolist() == ["no record after 6 h without power"]
    without = evaluated(STAGE, arrays, late)
    np.testing.assert_array_equal(without["heated_difference"], heated.values)


def test_a_heater_that_was_not_off_after_all_is_no_gradient():
    arrays = season((0.4, 8.8))
    table = table_of(STAGE, arrays)
    assert table["accepted"].tolist() == [True, False]
    assert table["reason"].tolist() == ["accepted", "beyond 1.5 K: the heater was not off"]
    made = evaluated(STAGE, arrays, table)
    assert made["natural_gradient"][0, 0, -1] == pytest.approx(0.4)


def test_nights_hold_no_further_than_allowed_and_in_their_installation():
    arrays = season(days=40)
    table = table_of(STAGE, arrays)
    made = evaluated(STAGE, arrays, table, farthest_d=10.0)
    time = arrays["heated_difference"]["time"].values
    beyond = time > table["time"].to_numpy()[-1] + np.timedelta64(10, "D")
    np.testing.assert_array_equal(made["no_gradient"][0, 0], beyond)
    assert np.isnan(made["heated_difference"][0, 0, beyond]).all()
    numbers = np.where(time <= np.datetime64("2031-09-10"), 0, 1)[None]
    arrays |= beside(arrays["heated_difference"], installation=numbers)
    made = evaluated(STAGE, arrays, table_of(STAGE, arrays))
    for number, value in enumerate((0.4, -0.1)):
        assert made["natural_gradient"][0, 0, numbers[0] == number] == pytest.approx(value)


def test_a_pair_goes_before_nights_and_each_method_takes_its_own():
    arrays = season()
    heated = arrays["heated_difference"]
    table = table_of(STAGE, arrays)
    pair = {"natural_difference": heated.copy(data=np.full(heated.shape, 0.05)),
            "paired": fact(1.0, heated)}  # fmt: skip
    for method, expected in [("pair_else_power_off", 0.05), ("pair", 0.05), ("power_off", 0.4)]:
        made = call(heated, table, method, **pair)
        assert made["natural_gradient"].values[0, 0, 0] == pytest.approx(expected), method
    assert call(heated, table, "pair")["natural_gradient"].values[0, 0, 0] == 0.0


def test_the_same_for_every_block_length():
    arrays = season(days=16)
    generator = np.random.default_rng(3)
    heated = arrays["heated_difference"]
    heated.values += generator.normal(0.0, 0.01, heated.shape)
    heated.values[generator.random(heated.shape) < 0.05] = np.nan
    whole = table_of(STAGE, arrays)
    made = evaluated(STAGE, arrays, whole)
    assert len(whole) == 2
    for days in (1, 2.5, 7):
        table = table_of(STAGE, arrays, block_days=days)
        assert table.equals(whole)
        parts = evaluated(STAGE, arrays, table, block_days=days)
        for name, values in made.items():
            np.testing.assert_array_equal(parts[name], values)


def test_records_without_power_on_purpose_are_no_flow():
    # The heater goes off within the record to 18:30 of hourly records: 5 K are left of 9.
    time = stamps("2031-09-01", 2, 60)
    heated = record(np.full(len(time), 9.0), time)
    off = powered_off(heated, [("2031-09-01T17:30", "2031-09-01T20:00")])
    heated.values[0, 0, 17:20] = [5.0, 0.3, 0.3]
    screen = REGISTRY["heat_dissipation", "screen_power_loss"].function
    missed = screen(heated)["heater_failure"].values[0, 0]
    assert missed.nonzero()[0].tolist() == [18, 19]
    found = screen(heated, None, None, off)
    assert found["heater_failure"].values[0, 0].nonzero()[0].tolist() == [17, 18, 19]
    assert found["heater_recovery"].values[0, 0].nonzero()[0].tolist() == [20, 21, 22]
