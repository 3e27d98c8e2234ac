"""Faults of a virtual copy: all kinds, where they say, as large as they say, and nowhere else."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from sapflux.schema import QUANTITIES
from sapflux.site.load import load_site
from sapflux.site.tables import Channel
from sapflux.virtual.copy import grow_copy, write_copy
from sapflux.virtual.copy_files import downloads
from sapflux.virtual.copy_values import log_values
from sapflux.virtual.faults import KINDS, Injected, fault_table, spoiled_values
from sapflux.virtual.faults_draw import draw_faults
from sapflux.virtual.faults_kinds import AFTER, BEFORE, HEATED, PULSE, RATIOS, RISES, SIGNAL

DEMO = load_site(Path(__file__).parents[2] / "configs" / "orvelin")


def pulse_channel(point, quantity, unit):
    return Channel(log="pulse_a", column=f"P17_{point}_{quantity}", kind="probe", id="P17",
                   point=point, quantity=quantity, unit=unit)  # fmt: skip


# The demo, with temperatures before and after the pulse and a bare ratio at probe P17.
CHANNELS = [row for row in DEMO.table("channels") if row.id != "P17"]
CHANNELS += [pulse_channel(1, name, "degC") for name in (*BEFORE, *AFTER)]
CHANNELS += [pulse_channel(2, "heat_ratio", "1")]
SITE = replace(DEMO, tables={**DEMO.tables, "channels": tuple(CHANNELS)})
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
    for fault in drawn(grown, name, range(1, 4)):
        end, channels, before, after = spoiled(grown, fault)
        struck = np.isin([row.column for row in channels], fault.columns)
        assert struck.any()
        may = inside(fault, end)[:, None] & struck[None, :]
        changed = ~((before == after) | (np.isnan(before) & np.isnan(after)))
        assert not (changed & ~may).any()
        if name not in ("clogged_gauge", "humidity_ceiling", "stuck_value"):
            assert changed.any()
        lost = np.isnan(after) & ~np.isnan(before)
        # Without a positive rise there is no ratio, and no logarithm of one.
        ratios = [row.quantity in ("heat_ratio", *RATIOS) for row in channels]
        assert not lost[:, ~np.array(ratios)].any()
        assert not lost.any() or name in ("misfire", "stuck_relay", "rise_not_positive",
                                          "wrong_pulse_energy", "pre_pulse_drift")  # fmt: skip


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
    seen = set()
    for fault in drawn(grown, "polarity_reversal", range(1, 21)):
        end, channels, before, after = spoiled(grown, fault)
        rows = inside(fault, end)
        at = {row.quantity: n for n, row in enumerate(channels) if row.column in fault.columns}
        for quantity, n in at.items():
            seen.add(quantity)
            was = before[rows, n]
            if quantity in (*RISES, *BEFORE, *AFTER):
                turned = {"downstream": "upstream", "upstream": "downstream"}
                kind, _, side = quantity.rpartition("_")
                expected = before[rows, at[f"{kind}_{turned[side]}"]]
            else:
                expected = 1.0 / was if quantity == "heat_ratio" else -was
            np.testing.assert_allclose(after[rows, n], expected, rtol=1e-12)
    assert seen >= {*RISES, *BEFORE, *AFTER, "heat_ratio", "heated_emf", "log_heat_ratio"}
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


# What logs keep of a pulse: probe, point, its log. P16 logs rises, P17 temperatures and a ratio.
POINTS = {"rises": ("P16", 1), "temperatures": ("P17", 1), "ratio": ("P17", 2),
          "velocity": ("P19", 1), "logarithm": ("P20", 1)}  # fmt: skip


def pulse_fault(grown, kind, size, probe, point):
    """A fault of the first 20 days at one point, with all columns that its log has of it."""
    truth, plan, _ = grown
    rows = [r for r in plan.channels if (r.id, r.point) == (probe, point)]
    columns = tuple(r.column for r in rows if r.quantity in (*PULSE, *BEFORE))
    begin = truth.weather.end[0] - np.timedelta64(truth.step_s, "s")
    return replace(drawn(grown, kind, (1,))[0], log=rows[0].log, name=probe, columns=columns,
                   size=size, begin=begin, end=begin + np.timedelta64(20, "D"))  # fmt: skip


def rises_of(values, channels, fault):
    """(down, up) [K] of a log that keeps rises, or temperatures before and after."""
    at = {row.quantity: n for n, row in enumerate(channels) if row.column in fault.columns}
    if RISES[0] in at:
        return [values[:, at[name]] for name in RISES]
    return [values[:, at[b]] - values[:, at[a]] for a, b in zip(BEFORE, AFTER, strict=True)]


def logs_of_ratio(grown, kind, size, where):
    """(before, after) logarithm of the ratio at a point, whatever its log keeps: records struck."""
    fault = pulse_fault(grown, kind, size, *POINTS[where])
    end, channels, *both = spoiled(grown, fault)
    rows, found = inside(fault, end), []
    at = [row.column for row in channels].index(fault.columns[0])
    for values in both:
        if where in ("rises", "temperatures"):
            down, up = rises_of(values, channels, fault)
            kept = (down > 0.0) & (up > 0.0)
            ratio = np.log(np.where(kept, down, np.nan) / np.where(kept, up, np.nan))
        else:
            # k 0.0025 cm2 s-1 and 6 mm stand in the program of P19: 15 cm h-1 for each unit
            ratio = {"ratio": np.log, "velocity": lambda v: v / 15.0, "logarithm": np.array}[where](
                values[:, at]
            )
        found.append(ratio[rows])
    return found


@pytest.mark.parametrize("where", ["rises", "temperatures"])
def test_a_pulse_of_half_the_energy_halves_both_rises(grown, where):
    fault = pulse_fault(grown, "wrong_pulse_energy", -0.5, *POINTS[where])
    end, channels, before, after = spoiled(grown, fault)
    rows = inside(fault, end)
    was, seen = (rises_of(values, channels, fault) for values in (before, after))
    for side in (0, 1):
        np.testing.assert_allclose(seen[side][rows], was[side][rows] / 2, atol=0.01)


@pytest.mark.parametrize("where", POINTS)
def test_a_pulse_of_half_the_energy_keeps_the_ratio_and_adds_noise(grown, where):
    before, after = logs_of_ratio(grown, "wrong_pulse_energy", -0.5, where)
    assert np.median(after - before) == pytest.approx(0.0, abs=2e-3)
    assert 2e-4 < np.std(after - before) < 0.02


@pytest.mark.parametrize("where", POINTS)
def test_an_upstream_rise_too_high_lowers_the_ratio_in_whatever_is_logged(grown, where):
    """ln(up + 0.06) - ln(up) of rises of 0.4 to 1.2 K is 0.05 to 0.14."""
    before, after = logs_of_ratio(grown, "saturated_rise", 0.06, where)
    assert 0.03 < np.median(before - after) < 0.2
    assert (before - after > 0.0).all()


@pytest.mark.parametrize("where", POINTS)
def test_a_pulse_that_does_not_come_leaves_noise_or_nothing(grown, where):
    """Of rises that are noise about zero, three of four pairs are not both positive."""
    fault = pulse_fault(grown, "misfire", 0.5, *POINTS[where])
    end, channels, before, after = spoiled(grown, fault)
    rows = inside(fault, end)
    at = [row.column for row in channels].index(fault.columns[-1])
    same = (before == after)[rows, at]
    assert same.mean() == pytest.approx(0.5, abs=0.06)
    if where in ("rises", "temperatures"):
        for rise in rises_of(after, channels, fault):
            assert np.abs(rise[rows][~same]).max() < 0.01
    else:
        assert np.isnan(after[rows, at][~same]).mean() == pytest.approx(0.75, abs=0.06)


def test_a_heater_that_stays_on_warms_the_wood_to_a_plateau(grown):
    """2 K h-1 that fades over two hours: 4 K in the end."""
    fault = pulse_fault(grown, "stuck_relay", 2.0, *POINTS["temperatures"])
    end, channels, before, after = spoiled(grown, fault)
    at = {row.quantity: n for n, row in enumerate(channels) if row.column in fault.columns}
    rows = np.flatnonzero(inside(fault, end))
    for name in BEFORE:
        warmer = (after - before)[rows, at[name]]
        assert warmer[1] == pytest.approx(4.0 * (1.0 - np.exp(-0.5)), rel=1e-9)
        assert warmer[-1] == pytest.approx(4.0, abs=1e-6)
    for rise in rises_of(after, channels, fault):
        assert np.abs(rise[rows][48:]).max() < 0.01


@pytest.mark.parametrize("where", POINTS)
def test_a_probe_drilled_anew_shows_another_share_or_an_offset(grown, where):
    """Half as much again; and 3 cm h-1, which are V x / k of the logarithm, whatever is logged."""
    before, after = logs_of_ratio(grown, "sensitivity_step", 0.5, where)
    np.testing.assert_allclose(after, 1.5 * before, atol=1e-9)
    (probe,) = grown[0].probes[POINTS[where][0]]
    before, after = logs_of_ratio(grown, "offset_step", 3.0, where)
    shift = 3.0 * 0.01 / 3600.0 * 6e-3 / probe.wood_diffusivity
    np.testing.assert_allclose(after - before, shift, rtol=1e-9)


def test_resin_a_new_hole_and_dampening_of_a_heated_needle(grown):
    """By hand at the last record: zero / difference - 1, and a baseline 1.1 times as high."""
    truth = grown[0]
    zero = truth.zero_flow("P11")
    found = {}
    for kind, size in (("resin_pocket", 0.1), ("sensitivity_step", -0.3), ("dampening", 0.4)):
        fault = one(grown, kind, size, begin=truth.weather.end[0], end=truth.weather.end[-1],
                    log="lower", name="P11", columns=("dT_P11",))  # fmt: skip
        _, channels, before, after = spoiled(grown, fault)
        at = [row.column for row in channels].index("dT_P11")
        found[kind] = before[1:, at], after[1:, at]
    before, after = found["resin_pocket"]
    np.testing.assert_allclose(1.1 * zero[1:] - after, 0.7 * (zero[1:] - before))
    before, after = found["sensitivity_step"]
    np.testing.assert_allclose(zero[1:] / after - 1.0, 0.7 * (zero[1:] / before - 1.0), atol=1e-9)
    before, after = (zero[-1] / values[-1] - 1.0 for values in found["dampening"])
    assert after == pytest.approx(0.6 * before)


def test_sun_on_a_stem_is_in_its_heated_and_its_unheated_pair():
    tree = next(row.tree for row in SITE.table("probes") if row.probe == "P11")
    own = next(row for row in SITE.table("probes") if row.probe == "P11")
    pair = own.model_copy(update={"probe": "N1", "method": "unheated_pair"})
    channel = Channel(log="lower", column="N1", kind="probe", id="N1", unit="K",
                      quantity="unheated_difference")  # fmt: skip
    channels = (*SITE.table("channels"), channel)
    probes = (*SITE.table("probes"), pair)
    site = replace(SITE, tables={**SITE.tables, "probes": probes, "channels": channels})
    truth, plan = grow_copy(site, seed=3, days=12)
    (place,) = [p for p in KINDS["sunlit_stem"].places(plan, truth) if p.name == tree]
    assert place.columns == ("dT_P11", "N1")
    end = truth.weather.end
    fault = Injected("sunlit_stem", "lower", tree, end[0], end[-1], 0.8, "K", 3, place.columns)
    rows = [row for row in plan.channels if row.log == "lower"]
    before = log_values(truth, site, rows, 1)
    truth = replace(truth, faults=(fault,))
    more = spoiled_values(truth, site, plan, "lower", 1, before.copy()) - before
    columns = [row.column for row in rows]
    heated, unheated = (more[1:, columns.index(name)] for name in place.columns)
    np.testing.assert_allclose(heated, unheated, atol=1e-12)
    assert 0.4 < heated.max() < 1.2 and heated.min() >= 0.0


def test_a_program_that_samples_once_is_noisier(grown):
    truth = grown[0]
    fault = one(grown, "single_samples", 5.0, begin=truth.weather.end[0],
                end=truth.weather.end[-1], log="upper", name="dT_P03",
                columns=("dT_P03",))  # fmt: skip
    _, channels, before, after = spoiled(grown, fault)
    at = [row.column for row in channels].index("dT_P03")
    spread = [
        np.median(np.abs(np.diff(values[:, at]) - np.median(np.diff(values[:, at]))))
        for values in (before, after)
    ]
    assert spread[1] / spread[0] == pytest.approx(5.0, rel=0.15)


def test_lightning_leaves_an_offset_after_its_surge(grown):
    for fault in drawn(grown, "lightning_offset"):
        end, channels, before, after = spoiled(grown, fault)
        at = [row.column for row in channels].index(fault.name)
        low, high = np.percentile(before[:, at], [5, 95])
        shift = (after - before)[inside(fault, end), at] / (high - low)
        np.testing.assert_allclose(shift[1:], fault.size, rtol=1e-6)
        assert abs(shift[0]) == pytest.approx(abs(fault.size) + 5.0)


def test_a_program_that_writes_logarithms_or_fahrenheit(grown):
    """By hand: ln of the ratio; 20 degC are 68 degF."""
    for fault in drawn(grown, "ratio_logarithm", range(1, 11)):
        end, channels, before, after = spoiled(grown, fault)
        at = [row.column for row in channels].index(fault.name)
        rows = inside(fault, end)
        change = np.log if channels[at].quantity == "heat_ratio" else np.exp
        np.testing.assert_allclose(after[rows, at], change(before[rows, at]), rtol=1e-12)
    for fault in drawn(grown, "temperature_scale"):
        end, channels, before, after = spoiled(grown, fault)
        at = [row.column for row in channels].index(fault.name)
        rows = inside(fault, end)
        assert channels[at].unit == "degC"
        np.testing.assert_allclose(after[rows, at], 1.8 * before[rows, at] + 32.0, atol=1e-9)


def test_a_short_of_a_temperature_shows_that_of_the_panel(grown):
    truth = grown[0]
    column = "P17_1_temperature_after_upstream"
    begin = truth.weather.end[0]
    fault = one(grown, "shorted_input", 240.0, log="pulse_a", name=column, columns=(column,),
                begin=begin, end=begin + np.timedelta64(10, "D"))  # fmt: skip
    end, channels, _, after = spoiled(grown, fault)
    at = [row.column for row in channels].index(column)
    air = truth.weather.air_temperature.reshape(-1, 3).mean(axis=1) - 273.15
    rows = inside(fault, end)
    assert np.abs(after[rows, at] - air[rows]).max() < 3.0
    assert np.corrcoef(after[rows, at], air[rows])[0, 1] > 0.9


def test_codes_are_codes_and_enter_an_average_by_their_share(grown):
    codes = {-6999.0, 6999.0, 7999.0, -99999.0, -9999.0, 0.0}
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
        per_unit = {"mV": 1e-3, "K": 1.0, "1": 1.0, "cm h-1": 0.01 / 3600.0, "degC": 1.0}[row.unit]
        shown = after[inside(fault, end), at] * per_unit + 273.15 * (row.unit == "degC")
        assert (shown > QUANTITIES[row.quantity].high).all()
    for fault in drawn(grown, "shorted_input"):
        end, channels, before, after = spoiled(grown, fault)
        at = [row.column for row in channels].index(fault.name)
        low, high = np.percentile(before[:, at], [5, 95])
        if channels[at].unit != "degC":
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
