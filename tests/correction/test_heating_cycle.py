"""Intermittent heating: cycles made of two exponentials, whose steady state is known exactly."""

import numpy as np
import pytest
import xarray as xr
from correction_records import fact, record, stamps

import sapflux.correction  # noqa: F401
from sapflux.physics import dissipation
from sapflux.stage import REGISTRY, bind

STAGE = REGISTRY["heat_dissipation", "heating_cycle"]
PARTS = ((6.0, 120.0), (4.0, 900.0))  # K and s of the needle itself and of the wood around it


def call(heated, on_min, off_min, state=None, installation=0, state_given=None):
    arrays = {
        "heated_difference": heated,
        "installation": laid(installation, heated),
        "heating_on": fact(np.array(on_min) * 60.0, heated),
        "heating_off": fact(np.array(off_min) * 60.0, heated),
    }
    if state is not None:
        arrays["heater_state"] = laid(state, heated)
    if state_given is not None:
        arrays["heater_state_given"] = laid(state_given, heated)
    return bind(STAGE.function, arrays, STAGE.defaults())


def laid(values, like):
    shape = (like.sizes["probe"], like.sizes["time"])
    coords = {"probe": like["probe"].values, "time": like["time"].values}
    return xr.DataArray(np.broadcast_to(values, shape).copy(), coords, ("probe", "time"))


def curve(on, step_s, scale=1.0):
    """Difference at the end of each record, heater on or off in it, from a cold start."""
    values = np.zeros(len(on))
    for amplitude, lag in PARTS:
        now = 0.0
        for place, powered in enumerate(on):
            target = scale * amplitude * powered
            now = target + (now - target) * np.exp(-step_s / lag)
            values[place] += now
    return values


def steady(on_s, off_s):
    """Difference of both readings in the steady state (own derivation).

    With a = exp(-on/lag), b = exp(-off/lag) the end of heating is A (1 - a) / (1 - ab), and the
    end of the pause b times as much.
    """
    total = 0.0
    for amplitude, lag in PARTS:
        a, b = np.exp(-on_s / lag), np.exp(-off_s / lag)
        total += amplitude * (1.0 - a) * (1.0 - b) / (1.0 - a * b)
    return total


def cycles(days, step_min, on_min, off_min, shift_min=0):
    """(time, on) of records whose heater begins a cycle at each full hour, or later by a shift."""
    time = stamps("2031-06-01", days, step_min)
    begin = (np.arange(len(time)) * step_min - shift_min) % (on_min + off_min)
    return time, begin < on_min


@pytest.mark.parametrize(("on_min", "off_min"), [(10, 10), (15, 15), (30, 30), (10, 20)])
def test_a_cycle_gives_the_difference_of_its_readings_and_no_drift_of_the_stem(on_min, off_min):
    time, on = cycles(2, 5, on_min, off_min)
    hours = np.arange(1, len(time) + 1) / 12
    natural = 0.3 + 0.1 * hours  # a steady drift of 0.1 K an hour
    heated = record(curve(on, 300.0) + natural, time)
    made = call(heated, on_min, off_min)
    found = made["heated_difference"].values[0, 0]
    late = slice(12 * 12, -12)  # the wood has come to its steady state after some hours
    np.testing.assert_allclose(found[late], steady(on_min * 60.0, off_min * 60.0), atol=1e-8)
    # The first cycle has no pause before it.
    count = (on_min + off_min) // 5
    assert made["incomplete_cycle"].values[0, 0].nonzero()[0].tolist() == list(range(count))
    assert np.isnan(found[:count]).all() and np.isfinite(found[count:]).all()


def test_flux_of_intermittent_heating_published():
    # Js = 12.95 K' L dm-2 h-1 (Isarangkool Na Ayutthaya et al. 2010, from memory). Flow cools the
    # needle to 1 / 1.25: K' = 0.25, 3.2375 L dm-2 h-1, and 1 L dm-2 h-1 is 1 kg per 0.01 m2 and h.
    time, on = cycles(2, 5, 15, 15)
    rest, flow = (
        call(record(curve(on, 300.0, scale), time), 15, 15)["heated_difference"].values[0, 0, -20]
        for scale in (1.0, 0.8)
    )
    index = dissipation.flow_index(rest, flow)
    assert index == pytest.approx(0.25, rel=1e-9)
    factor = 12.95 / 0.01 / 3600.0
    found = dissipation.flux_density(index, factor, 1.0)
    assert found * 0.01 * 3600.0 == pytest.approx(3.2375, rel=1e-9)


def test_cycles_by_the_logged_state_of_the_heater_wherever_they_begin():
    # 50 min go into no hour, and these begin 10 min late.
    time, on = cycles(2, 5, 20, 30, shift_min=10)
    made = call(record(curve(on, 300.0), time), 20, 30, state=on.astype(float))
    found = made["heated_difference"].values[0, 0]
    np.testing.assert_allclose(found[300:-12], steady(1200.0, 1800.0), atol=1e-8)
    # Without the state there is no telling.
    lost = call(record(curve(on, 300.0), time), 20, 30)
    assert lost["incomplete_cycle"].all() and lost["heated_difference"].isnull().all()


def test_a_cycle_without_a_reading_is_flagged_by_hand():
    # Half-hourly readings of hourly cycles: on, off, on, off, ...
    values = np.array([9.0, 2.0, 9.5, 1.0, 8.0, 3.0, 9.0, 1.0, 8.0, 2.0])
    values[4] = np.nan
    made = call(record(values), 30, 30)
    found = made["heated_difference"].values[0, 0]
    # 9.5 - (2 + 1) / 2 = 8; 9 - (3 + 1) / 2 = 7; 8 - (1 + 2) / 2 = 6.5.
    np.testing.assert_allclose(
        found, [np.nan, np.nan, 8.0, 8.0, np.nan, np.nan, 7.0, 7.0, 6.5, 6.5]
    )
    assert made["incomplete_cycle"].values[0, 0].nonzero()[0].tolist() == [0, 1, 5]


def test_a_missing_record_between_the_readings_stays_missing_alone():
    time, on = cycles(0.5, 5, 15, 15)
    values = curve(on, 300.0)
    values[20] = np.nan  # the third of the six records of a cycle begins at 18: heated from 18 on
    values[19] = np.nan
    made = call(record(values, time), 15, 15)
    # 18, 19, 20 are heated: 20 is the reading. Lost with it are all of 18 to 23.
    assert (
        made["incomplete_cycle"].values[0, 0, 18:24].tolist() == [True, False, False] + [True] * 3
    )
    values = curve(on, 300.0)
    values[19] = np.nan
    made = call(record(values, time), 15, 15)
    assert not made["incomplete_cycle"].values[0, 0, 6:].any()
    assert np.isnan(made["heated_difference"].values[0, 0]).nonzero()[0].tolist()[6:] == [19]


def test_heating_at_another_time_makes_no_cycle():
    state = np.array([1, 0, 1, 0, 1, 1, 0, 1, 0, 1, 0, 1, 0], float)  # two on at 4 and 5
    made = call(record(np.where(state > 0, 9.0, 1.0)), 30, 30, state=state)
    found = made["heated_difference"].values[0, 0]
    # Whole: off, on, off at 1-3, 6-8, 8-10, 10-12, each laid on its heating and the pause after.
    assert np.isfinite(found).nonzero()[0].tolist() == [2, 3, 7, 8, 9, 10, 11, 12]
    assert (found[[2, 3, 7, 8, 9, 10, 11, 12]] == 8.0).all()


def test_no_cycle_across_installations():
    values = np.tile([9.0, 1.0], 5)
    installation = np.array([0] * 4 + [1] * 6)
    made = call(record(values), 30, 30, installation=installation)
    assert made["incomplete_cycle"].values[0, 0].nonzero()[0].tolist() == [0, 1, 4, 5]


def test_a_needle_heated_without_a_break_is_untouched():
    heated = record(np.stack([np.tile([9.0, 1.0], 5)[None], np.full((1, 10), 8.0)]))
    made = call(heated, [30, np.nan], [30, np.nan])["heated_difference"].values
    assert made[1, 0].tolist() == [8.0] * 10
    assert made[0, 0, -1] == 8.0
    without = STAGE.function(heated, laid(0, heated))
    assert without["heated_difference"].equals(heated)


def test_the_same_for_every_block_length():
    time, on = cycles(3, 10, 30, 30)
    generator = np.random.default_rng(4)
    values = curve(on, 600.0) + generator.normal(0.0, 0.1, len(time))
    values[generator.random(len(time)) < 0.02] = np.nan
    heated = record(values, time)
    whole = call(heated, 30, 30)
    assert whole["incomplete_cycle"].any() and whole["heated_difference"].notnull().any()
    reach = int(np.ceil(STAGE.reach_s(STAGE.defaults()) / 600))
    for size in (1, 5, 36, 100):
        for first in range(0, len(time), size):
            begin = max(0, first - reach)
            part = call(heated.isel(time=slice(begin, first + size + reach)), 30, 30)
            core = slice(first - begin, first - begin + size)
            for name, array in part.items():
                assert array[..., core].equals(whole[name][..., first : first + size])


def test_pauses_are_no_outages():
    values = np.tile([9.0, 1.0], 20)
    heated = record(np.stack([values, values])[:, None])
    cycled = fact([1800.0, np.nan], heated)
    state = laid(np.tile([1.0, 0.0], 20), heated)
    screen = REGISTRY["heat_dissipation", "screen_power_loss"].function
    made = call(heated, [30, np.nan], [30, np.nan])["heated_difference"]
    found = screen(made, laid(np.tile([2.0, 0.0], 20), heated), state, None, cycled)
    assert not found["heater_failure"][0].any()
    assert found["heater_failure"][1].all()
    # Without power a cycle makes no difference, and that is seen.
    silent = made.copy()
    silent[0, 0, 20:22] = 0.1
    outage = screen(silent, None, state, None, cycled, margin_min=0.0)["heater_failure"]
    assert outage[0, 0].values.nonzero()[0].tolist() == [20, 21]


def test_where_a_logged_state_is_missing_the_clock_does_not_step_in():
    # Cycles that begin 5 min past the hour: by the clock their readings would be 5 min off.
    time, on = cycles(2, 5, 15, 15, shift_min=5)
    state = on.astype(float)
    state[300:400] = np.nan
    heated = record(curve(on, 300.0), time)
    made = call(heated, 15, 15, state=state, state_given=1)
    found = made["heated_difference"].values[0, 0]
    assert np.isnan(found[310:390]).all()
    assert made["incomplete_cycle"].values[0, 0, 310:390].all()
    np.testing.assert_allclose(found[410:-12], steady(900.0, 900.0), atol=1e-8)
    # without a channel of the state the clock is all there is
    assert np.isfinite(call(heated, 15, 15, state=state)["heated_difference"][0, 0, 310:390]).all()
