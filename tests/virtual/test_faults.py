"""Faults of a virtual copy: all kinds, where they say, as large as they say, and nowhere else."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from sapflux.schema import QUANTITIES
from sapflux.site.load import load_site
from sapflux.virtual.copy import grow_copy, write_copy
from sapflux.virtual.copy_files import downloads
from sapflux.virtual.copy_values import log_values
from sapflux.virtual.faults import KINDS, fault_table, spoiled_values
from sapflux.virtual.faults_draw import draw_faults
from sapflux.virtual.faults_kinds import HEATED, SIGNAL

SITE = load_site(Path(__file__).parents[2] / "configs" / "orvelin")
OF_VALUES = [kind.name for kind in KINDS.values() if kind.act is not None]


@pytest.fixture(scope="module")
def grown():
    """From late winter, so that there is frost; long enough for two downloads."""
    truth, plan = grow_copy(SITE, seed=3, first_day="2032-03-10", days=75, knowledge="exact")
    return truth, plan, {}


def every_of(truth, plan, log):
    return round(plan.logs[log].interval_min * 60) // truth.step_s


def clean(grown, log):
    truth, plan, kept = grown
    if log not in kept:
        channels = [row for row in plan.channels if row.log == log]
        kept[log] = log_values(truth, SITE, channels, every_of(truth, plan, log))
    return kept[log]


def spoiled(grown, fault):
    """(end, channels, clean values, values with one fault) of the log of a fault."""
    truth, plan, _ = grown
    every = every_of(truth, plan, fault.log)
    before = clean(grown, fault.log)
    after = spoiled_values(
        replace(truth, faults=(fault,)), SITE, plan, fault.log, every, before.copy()
    )
    channels = [row for row in plan.channels if row.log == fault.log]
    return truth.weather.end[every - 1 :: every], channels, before, after


def drawn(grown, kind, seeds=range(1, 6)):
    """One fault of a kind for each seed."""
    truth, plan, _ = grown
    found = []
    for seed in seeds:
        found += draw_faults(replace(truth, seed=seed), SITE, plan, "many", kinds=(kind,))
    return found


def inside(fault, end):
    return (end > fault.begin) & (end <= fault.end)


def test_many_has_every_kind_and_few_has_fewer(grown):
    truth, plan, _ = grown
    many = draw_faults(truth, SITE, plan, "many")
    assert {fault.kind for fault in many} == set(KINDS)
    few = [draw_faults(replace(truth, seed=s), SITE, plan, "few") for s in range(1, 11)]
    assert 0 < np.mean([len(faults) for faults in few]) < len(many) / 3
    assert draw_faults(truth, SITE, plan, "none") == ()
    with pytest.raises(ValueError, match="none, few, many"):
        draw_faults(truth, SITE, plan, "plenty")


def test_two_seasons_have_each_kind_twice_at_least():
    truth, _ = grow_copy(SITE, seed=1, days=300, faults="many")
    counts = {name: sum(f.kind == name for f in truth.faults) for name in KINDS}
    assert min(counts.values()) == 2
    assert counts["spike"] > 10 > counts["unit_change"]
    assert grow_copy(SITE, seed=1, days=300, faults="many")[0].faults == truth.faults


@pytest.mark.parametrize("name", KINDS)
def test_times_places_and_sizes_are_as_the_kind_states(grown, name):
    truth, plan, _ = grown
    kind = KINDS[name]
    low, high = kind.size
    found = drawn(grown, name, range(1, 21))
    assert len(found) >= 20
    first = truth.weather.end[0] - np.timedelta64(truth.step_s, "s")
    for fault in found:
        assert low * (1 - 1e-9) <= abs(fault.size) <= high * (1 + 1e-9)
        assert fault.unit == kind.unit
        assert first <= fault.begin < fault.end <= truth.weather.end[-1]
        assert set(fault.columns) <= {r.column for r in plan.channels if r.log == fault.log}
        if low < high:
            edges = low * (high / low) ** np.array([1 / 3, 2 / 3])
            assert fault.third == 1 + np.searchsorted(edges, abs(fault.size))
    if kind.choices is None and low < high:
        assert len({fault.third for fault in found}) > 1
    if kind.signed:
        assert {np.sign(fault.size) for fault in found} == {-1.0, 1.0}


@pytest.mark.parametrize("name", OF_VALUES)
def test_a_fault_changes_its_own_records_and_columns_alone(grown, name):
    for fault in drawn(grown, name):
        end, channels, before, after = spoiled(grown, fault)
        struck = np.isin([row.column for row in channels], fault.columns)
        assert struck.any()
        may = inside(fault, end)[:, None] & struck[None, :]
        changed = ~((before == after) | (np.isnan(before) & np.isnan(after)))
        assert not (changed & ~may).any()
        if name not in ("clogged_gauge", "humidity_ceiling", "stuck_value"):
            assert changed.any()
        assert not np.isnan(after[~np.isnan(before)]).any()


def test_faults_keep_out_of_each_others_way(grown):
    truth, plan, _ = grown
    faults = [f for f in draw_faults(truth, SITE, plan, "many") if KINDS[f.kind].act]
    both = [
        (a.kind, b.kind)
        for n, a in enumerate(faults)
        for b in faults[n + 1 :]
        if a.log == b.log
        and set(a.columns) & set(b.columns)
        and a.begin < b.end
        and b.begin < a.end
        and (a.name == a.log) == (b.name == b.log)
    ]
    assert both == []


def one(grown, kind, size, /, **more):
    """The first fault of a kind, at a size of our own."""
    return replace(drawn(grown, kind, (1,))[0], size=size, **more)


def of_columns(channels, values, quantities):
    return {
        row.column: values[:, n] for n, row in enumerate(channels) if row.quantity in quantities
    }


def test_a_power_loss_leaves_the_natural_gradient_of_at_most_a_fifth_of_a_kelvin(grown):
    truth = grown[0]
    begin = truth.weather.end[6 * 24 * 20]
    fault = one(grown, "heater_power_loss", 12.0, begin=begin, log="upper", name="upper",
                end=begin + np.timedelta64(15, "h"),
                columns=(*(f"dT_P{n:02}" for n in range(1, 11)), "heater_V"))  # fmt: skip
    end, channels, before, after = spoiled(grown, fault)
    dark = (end > begin + np.timedelta64(3, "h")) & (end <= begin + np.timedelta64(12, "h"))
    for column, values in of_columns(channels, after, HEATED).items():
        assert np.abs(values[dark]).max() < 0.2 * 0.041, column  # mV of 0.2 K
        assert values[dark].std() > 0.0
    back = end > begin + np.timedelta64(14, "h") + np.timedelta64(30, "m")
    np.testing.assert_allclose(after[back], before[back], rtol=0.01, atol=1e-3)
    (heater,) = of_columns(channels, after, ("heater_voltage",)).values()
    assert set(heater[dark]) == {0.0}


def test_a_wound_that_grows_takes_its_share_of_the_flow_index(grown):
    """At the end of a loss of 40 % the flow index zero / difference - 1 is 0.6 of its own."""
    truth = grown[0]
    begin, until = truth.weather.end[0], truth.weather.end[-1]
    fault = one(grown, "sensitivity_loss", 0.4, begin=begin, end=until, log="lower", name="P11",
                columns=("dT_P11",))  # fmt: skip
    _, channels, before, after = spoiled(grown, fault)
    at = [row.column for row in channels].index("dT_P11")
    zero = truth.zero_flow("P11")
    index = [zero / values[:, at] - 1.0 for values in (before, after)]
    days = np.arange(1, len(zero)) / (len(zero) - 1)
    np.testing.assert_allclose(index[1][1:], index[0][1:] * (1 - 0.4 * days), atol=1e-9)


def test_a_wound_that_grows_takes_its_share_of_the_log_ratio_of_rises(grown):
    truth = grown[0]
    fault = one(grown, "sensitivity_loss", 0.4, begin=truth.weather.end[0],
                end=truth.weather.end[-1], log="pulse_a", name="P16",
                columns=("P16_1_down", "P16_1_up"))  # fmt: skip
    _, _, before, after = spoiled(grown, fault)
    ratio = [np.log(values[-1, 0] / values[-1, 1]) for values in (before, after)]
    assert ratio[1] == pytest.approx(0.6 * ratio[0])
    assert after[-1, 0] * after[-1, 1] == pytest.approx(before[-1, 0] * before[-1, 1])


def test_a_dying_heater_gives_a_tenth_less_after_five_days_of_two_percent(grown):
    truth = grown[0]
    begin = truth.weather.end[0]
    fault = one(grown, "dying_probe", 2.0, begin=begin, end=begin + np.timedelta64(20, "D"),
                log="upper", name="P03", columns=("dT_P03",))  # fmt: skip
    _, channels, before, after = spoiled(grown, fault)
    at = [row.column for row in channels].index("dT_P03")
    night = 5 * 144  # ends at midnight, when the sun gives no gradient
    assert after[night, at] / before[night, at] == pytest.approx(0.9, abs=1e-3)


def test_lost_contact_raises_the_baseline_and_flattens_the_day(grown):
    truth = grown[0]
    fault = one(grown, "loss_of_contact", 0.2, begin=truth.weather.end[0],
                end=truth.weather.end[-1], log="lower", name="P12",
                columns=("dT_P12",))  # fmt: skip
    _, channels, before, after = spoiled(grown, fault)
    at = [row.column for row in channels].index("dT_P12")
    zero = truth.zero_flow("P12")
    fall = [zero[-1] - before[-1, at], 1.2 * zero[-1] - after[-1, at]]
    assert fall[1] == pytest.approx(0.4 * fall[0])  # 1 - 3 * 0.2 of it is left


def test_wires_and_programs_do_what_their_names_say(grown):
    """Each by hand on its records: reversed, exchanged, in another unit, ghosted, coarse."""
    for fault in drawn(grown, "polarity_reversal"):
        end, channels, before, after = spoiled(grown, fault)
        at = [row.column for row in channels].index(fault.name)
        np.testing.assert_array_equal(
            after[inside(fault, end), at], -before[inside(fault, end), at]
        )
    for fault in drawn(grown, "exchanged_columns"):
        end, channels, before, after = spoiled(grown, fault)
        a, b = ([row.column for row in channels].index(c) for c in fault.columns)
        np.testing.assert_array_equal(after[inside(fault, end), a], before[inside(fault, end), b])
        np.testing.assert_array_equal(after[inside(fault, end), b], before[inside(fault, end), a])
    for fault in drawn(grown, "multiplexer_ghost"):
        end, channels, before, after = spoiled(grown, replace(fault, size=1.0))
        at = [row.column for row in channels].index(fault.name)
        rows = inside(fault, end)
        np.testing.assert_allclose(after[rows, at], before[rows, at - 1])
    for fault in drawn(grown, "unit_change", range(1, 11)):
        end, channels, before, after = spoiled(grown, fault)
        at = [row.column for row in channels].index(fault.name)
        ratio = after[inside(fault, end), at] / before[inside(fault, end), at]
        wanted = fault.size if fault.size > 0 else -1.0 / fault.size
        np.testing.assert_allclose(ratio, wanted)
    fault = one(grown, "coarse_resolution", 50.0)
    end, channels, before, after = spoiled(grown, fault)
    at = [row.column for row in channels].index(fault.name)
    steps = np.diff(np.unique(np.round(after[inside(fault, end), at], 6)))
    before_steps = np.diff(np.unique(np.round(before[inside(fault, end), at], 6)))
    assert steps.min() > 10 * before_steps.min()


def test_a_pulse_of_half_the_energy_halves_both_rises_and_keeps_their_ratio(grown):
    fault = one(grown, "wrong_pulse_energy", -0.5)
    end, channels, before, after = spoiled(grown, fault)
    down, up = ([row.column for row in channels].index(c) for c in fault.columns)
    rows = inside(fault, end)
    for at in (down, up):
        np.testing.assert_allclose(after[rows, at], before[rows, at] / 2, atol=0.01)
    ratio = [values[rows, down] / values[rows, up] for values in (before, after)]
    assert np.median(ratio[1] / ratio[0]) == pytest.approx(1.0, abs=0.01)


def test_codes_are_codes_and_enter_an_average_by_their_share(grown):
    codes = {-6999.0, 6999.0, 7999.0, -99999.0, -9999.0}
    for fault in drawn(grown, "missing_code"):
        end, channels, _, after = spoiled(grown, fault)
        at = [row.column for row in channels].index(fault.name)
        assert set(after[inside(fault, end), at]) <= codes
        declared = SITE.layouts[SITE.logs[fault.log].layout].missing_numbers
        assert not set(after[inside(fault, end), at]) & set(declared)
    for fault in drawn(grown, "averaged_code"):
        end, channels, before, after = spoiled(grown, fault)
        at = [row.column for row in channels].index(fault.name)
        rows = inside(fault, end)
        code = before[rows, at] + (after[rows, at] - before[rows, at]) / fault.size
        assert min(abs(code[0] - c) for c in codes) < 1e-6


def test_lightning_strikes_all_channels_of_a_log_at_once(grown):
    fault = one(grown, "lightning", 10.0)
    end, channels, before, after = spoiled(grown, fault)
    rows = inside(fault, end)
    assert rows.sum() in (1, 2)
    signals = [n for n, row in enumerate(channels) if row.quantity in SIGNAL]
    assert len(signals) >= 3
    assert (np.abs(after - before)[np.ix_(rows, signals)] > 0).all()
    assert grown[0].weather.precipitation[np.isin(grown[0].weather.end, end[rows])].size


def test_an_open_input_leaves_the_physical_range_and_a_shorted_one_shows_nothing(grown):
    for fault in drawn(grown, "open_input"):
        end, channels, _, after = spoiled(grown, fault)
        at = [row.column for row in channels].index(fault.name)
        row = channels[at]
        per_unit = {"mV": 1e-3, "K": 1.0, "1": 1.0, "cm h-1": 0.01 / 3600.0}[row.unit]
        shown = after[inside(fault, end), at] * per_unit
        assert (shown > QUANTITIES[row.quantity].high).all()
    for fault in drawn(grown, "shorted_input"):
        end, channels, before, after = spoiled(grown, fault)
        at = [row.column for row in channels].index(fault.name)
        low, high = np.percentile(before[:, at], [5, 95])
        assert np.abs(after[inside(fault, end), at]).max() < 0.1 * (high - low)


def test_a_spike_is_as_many_daily_ranges_as_it_says(grown):
    for fault in drawn(grown, "spike"):
        end, channels, before, after = spoiled(grown, fault)
        at = [row.column for row in channels].index(fault.name)
        low, high = np.percentile(before[:, at], [5, 95])
        rows = inside(fault, end)
        assert rows.sum() in (1, 2)
        np.testing.assert_allclose((after - before)[rows, at], fault.size * (high - low))


def test_supply_sags_most_at_six_and_not_by_day(grown):
    """At 6 h, before the sun moves the gradient, a sag of 20 % leaves 80 % of the difference."""
    fault = one(grown, "supply_sag", 0.2)
    end, channels, before, after = spoiled(grown, fault)
    local = SITE.standard(end)
    hour = (local - local.astype("datetime64[D]")) / np.timedelta64(3600, "s")
    rows = inside(fault, end)
    for n, row in enumerate(channels):
        share = after[:, n] / before[:, n]
        if row.quantity in HEATED:
            np.testing.assert_allclose(share[rows & (hour == 6.0)], 0.8, atol=0.02)
            day = rows & (hour > 11.0)
            np.testing.assert_allclose(after[day, n], before[day, n], rtol=1e-12)
        if row.quantity == "heater_voltage":  # power goes with the square of the voltage
            np.testing.assert_allclose(share[rows & (hour == 6.0)], np.sqrt(0.8))


def test_a_wet_connector_dries_over_hours(grown):
    """200 uV at first: over its first hour the mean of 200 exp(-t / 3 h) is 170 uV."""
    first = next(f for f in drawn(grown, "wet_connector", range(1, 60)) if f.log == "upper")
    fault = replace(first, size=200.0, end=first.begin + np.timedelta64(1, "D"))
    end, channels, before, after = spoiled(grown, fault)
    at = [row.column for row in channels].index(fault.name)
    microvolts = (after - before)[inside(fault, end), at] * 1000.0
    assert microvolts[:6].mean() == pytest.approx(170.0, abs=8.0)
    assert np.abs(microvolts[-6:]).max() < 2.0


def test_an_earth_loop_follows_the_sun(grown):
    fault = one(grown, "earth_loop", 0.5)
    end, channels, before, after = spoiled(grown, fault)
    at = next(n for n, row in enumerate(channels) if row.column in fault.columns)
    unit = 1.0 if channels[at].unit == "K" else 0.0403  # mV K-1 of type T at 20 degC
    kelvin = (after - before)[inside(fault, end), at] / unit
    assert 0.2 < kelvin.max() <= 0.5005 and -1e-9 < kelvin.min() < 0.02


def test_frost_strikes_in_frost(grown):
    for fault in drawn(grown, "frost"):
        weather = grown[0].weather
        near = (weather.end > fault.begin) & (weather.end <= fault.begin + np.timedelta64(30, "m"))
        assert weather.air_temperature[near].min() < 273.15 - 0.5


def test_weather_sensors_fail_as_they_say(grown):
    weather = grown[0].weather
    half_hours = weather.relative_humidity.reshape(-1, 3).mean(axis=1) * 100.0
    fault = one(grown, "humidity_ceiling", 0.1)
    end, channels, _, after = spoiled(grown, fault)
    at = {row.quantity: n for n, row in enumerate(channels)}
    rows = inside(fault, end)
    shown = after[rows, at["relative_humidity"]]
    np.testing.assert_allclose(shown, np.minimum(half_hours[rows], 90.0))
    fault = one(grown, "radiation_offset", -7.0)
    _, _, before, after = spoiled(grown, fault)
    rows = inside(fault, end)
    gap = (after - before)[rows, at["shortwave_radiation"]]
    np.testing.assert_allclose(gap, -7.0)
    fault = one(grown, "clogged_gauge", 0.4)
    _, _, before, after = spoiled(grown, fault)
    rows, rain = inside(fault, end), at["precipitation"]
    assert after[rows, rain].sum() == pytest.approx(0.6 * before[rows, rain].sum())
    assert before[rows, rain].sum() > 0.0


def test_none_is_the_copy_without_faults_and_a_log_without_faults_is_untouched(tmp_path):
    whole = {}
    for name, more in (("default", {}), ("none", {"faults": "none"}), ("many", {"faults": "many"})):
        truth = write_copy(SITE, tmp_path / name, seed=5, days=12, **more)
        whole[name] = {
            p.relative_to(tmp_path / name): p.read_bytes()
            for p in sorted((tmp_path / name).rglob("*")) if p.is_file()
        }  # fmt: skip
    assert whole["default"] == whole["none"]
    touched = {fault.log for fault in truth.faults}
    for path, content in whole["none"].items():
        if path.parts[0] != "raw" or path.parts[1] not in touched:
            assert whole["many"][path] == content  # tables and site.toml do not tell of faults
    assert whole["many"] != whole["none"]


def test_same_seed_same_bytes_and_the_same_table(grown):
    made = []
    for _ in range(2):
        truth, plan = grow_copy(SITE, seed=4, days=35, faults="many")
        made.append((dict(downloads(truth, SITE, plan)), fault_table(truth)))
    assert made[0] == made[1]
    columns, rows = made[0][1]
    assert columns[:3] == ["kind", "log", "name"]
    assert len(rows) == len(truth.faults) and all(len(row) == len(columns) for row in rows)
