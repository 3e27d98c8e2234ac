"""Logs of temperature traces: every line accounted for, and one record a pulse."""

from datetime import datetime

import numpy as np
import pytest
from log_by_hand import counts, read
from traces_by_hand import TABLES, trace_rows, traces, velocity_at, write_site

from sapflux import quality
from sapflux.ingest.cube import answered_records, measured_cubes
from sapflux.ingest.logs import read_log
from sapflux.ingest.pulse_traces import pulse_readings
from sapflux.site.load import load_site

SECONDS = np.arange(-10.0, 121.0)
WINDOW = (60.0, 100.0)
X_OVER_K = 6e-3 / 2.5e-7  # s m-1: log ratio per velocity


def readings(down, up, seconds=SECONDS, pulse=8.0, window=WINDOW):
    return pulse_readings(down, up, seconds, pulse, window, 1800)


# One pulse after the other


@pytest.mark.parametrize("pulse", [0.0, 2.0, 8.0])
def test_the_line_source_gives_the_velocity_back(pulse):
    # Marshall (1958): the ratio of the rises is exp(V x / k) at all times, so it is so for their
    # means over the window and for a pulse of any length.
    cm_h = np.array([-40.0, -5.0, 0.0, 10.0, 40.0])
    found = readings(*traces(cm_h, SECONDS, pulse=pulse, level=0.0), pulse=pulse)
    expected = cm_h * 0.01 / 3600 * X_OVER_K
    log_of_means = np.log(found["rise_downstream"] / found["rise_upstream"])
    for name in (log_of_means, *(found[n] for n in ("mean_log_ratio", "early_log_ratio"))):
        np.testing.assert_allclose(name / X_OVER_K * 3.6e5, cm_h, atol=1e-9)
    np.testing.assert_allclose(found["late_log_ratio"], expected, atol=1e-9 * X_OVER_K / 3.6e5)
    np.testing.assert_allclose(found["decay_time"], 36.0, rtol=1e-6)


def test_rises_are_means_over_the_window_from_the_end_of_heating():
    # By hand: 291 K before heating; after it 1 K more a second downstream, 0.5 upstream; rows of
    # 68 to 108 s since the start are 60 to 100 s from the end of 8 s: mean 88 and 44.
    after = np.maximum(SECONDS, 0.0)
    found = readings(291.0 + after[None], 291.0 + 0.5 * after[None])
    assert found["rise_downstream"] == pytest.approx(88.0)
    assert found["rise_upstream"] == pytest.approx(44.0)
    for name in ("mean_log_ratio", "early_log_ratio", "late_log_ratio"):
        assert found[name] == pytest.approx(np.log(2.0))


def test_halves_of_the_window_share_its_middle_row_by_hand():
    # Downstream 1 K to 88 s and 3 K after; upstream 1 K. Early: 21 rows of 1. Late: the middle of
    # 1 and 20 of 3, mean 61/21.
    down = np.where(SECONDS[None] > 88, 3.0, 1.0) * (SECONDS[None] > 0)
    up = 1.0 * (SECONDS[None] > 0)
    found = readings(down, up)
    assert found["early_log_ratio"] == pytest.approx(0.0, abs=1e-12)
    assert found["late_log_ratio"] == pytest.approx(np.log(61 / 21))
    assert found["rise_downstream"] == pytest.approx((21 + 20 * 3) / 41)
    assert found["mean_log_ratio"] == pytest.approx(20 * np.log(3.0) / 41)


@pytest.mark.parametrize("drift", [-5e-4, 0.0, 2e-3])
def test_drift_before_the_pulse_is_taken_off(drift):
    # The drift of the rows themselves, and one that goes on from pulse to pulse.
    cm_h = np.array([0.0, 20.0, 40.0])
    still = readings(*traces(cm_h, SECONDS, level=0.0))
    jumping = readings(*traces(cm_h, SECONDS, drift=drift))
    onward = [
        one + drift * 1800.0 * np.arange(3)[:, None] for one in traces(cm_h, SECONDS, drift=drift)
    ]
    for found in (jumping, readings(*onward)):
        np.testing.assert_allclose(found["pre_pulse_drift"], drift, atol=1e-10)
        for name in ("rise_downstream", "rise_upstream", "mean_log_ratio", "decay_time"):
            np.testing.assert_allclose(found[name], still[name], rtol=1e-7, atol=1e-8)


def test_few_rows_before_a_pulse_leave_little_noise_where_pulses_lie_around_it():
    # By hand: ten rows of 5 mK on either needle know the drift to 0.005 /
    # sqrt(2 * 82.5) = 3.9e-4 K s-1, 0.036 K at 92.5 s from their middle.
    generator = np.random.default_rng(11)
    down, up = (
        one + generator.normal(0.0, 0.005, one.shape)
        for one in traces(np.full(1500, 10.0), SECONDS)
    )
    together = readings(down, up)["rise_upstream"]
    alone = np.concatenate([
        readings(down[row : row + 1], up[row : row + 1])["rise_upstream"] for row in range(300)
    ])  # fmt: skip
    assert alone.std() == pytest.approx(0.036, rel=0.15)
    assert together[1:-1].std() < 0.006
    assert together.mean() == pytest.approx(
        readings(*traces([10.0], SECONDS))["rise_upstream"][0], abs=0.001
    )


def test_a_pulse_with_too_few_rows_has_no_rise():
    down, up = traces(np.full(5, 10.0), SECONDS)
    window = np.flatnonzero((SECONDS >= 68) & (SECONDS <= 108))
    down[1, window[:10]] = np.nan  # 31 of 41 are 0.756
    down[2, window[:11]] = np.nan  # 30 of 41 are 0.732
    up[3, SECONDS < -4] = np.nan  # 4 rows before heating
    down[4], up[4] = np.nan, np.nan
    found = readings(down, up)
    assert np.isfinite(found["rise_downstream"]).tolist() == [True, True, False, False, False]
    assert np.isfinite(found["rise_upstream"]).tolist() == [True, True, True, False, False]
    assert np.isfinite(found["pre_pulse_drift"]).tolist() == [True, True, False, False, False]


def test_samples_without_a_logarithm_make_no_mean_of_them():
    down, up = traces(np.full(2, 10.0), SECONDS, level=0.0)
    up[1, SECONDS > 90] = -0.01
    found = readings(down, up)
    assert np.isfinite(found["mean_log_ratio"]).tolist() == [True, False]
    assert np.isfinite(found["rise_upstream"]).all()


# From files


def cube_of(folder):
    site = load_site(folder)
    logs = {name: read_log(site, name) for name in site.logs}
    (cube,) = measured_cubes(site, logs).values()
    return site, logs, cube


def test_each_pulse_is_a_record_that_ends_with_its_interval(tmp_path):
    site, logs, cube = cube_of(write_site(tmp_path / "ridge", days=1))
    assert cube.attrs == {"method": "heat_ratio", "interval_s": 1800}
    ends = cube["time"].values
    assert str(ends[0])[:16] == "2031-05-31T23:30" and len(ends) == 48  # standard time is UTC + 1
    starts = site.standard(ends - np.timedelta64(1800, "s")).astype("M8[s]")
    log_ratio = np.log(cube["rise_downstream"] / cube["rise_upstream"]).values[0, 0]
    expected = velocity_at(starts) * 0.01 / 3600 * X_OVER_K
    np.testing.assert_allclose(log_ratio, expected, atol=1e-8)  # rows have nine decimals
    assert not cube["quality"].values.any()
    assert answered_records(site, logs, cube).all()
    assert not {"temperature_trace_downstream", "temperature_trace_upstream"} & set(cube)


def test_a_pulse_that_starts_later_is_found_there(tmp_path):
    change = ("site.toml", "trace_step_s = 1\n", "trace_step_s = 1\npulse_starts_s = 20\n")
    folder = write_site(tmp_path / "ridge", days=1, changes=[change])
    starts = np.datetime64("2031-06-01T00:00:20", "s") + np.arange(48) * np.timedelta64(1800, "s")
    rows = trace_rows(starts, SECONDS)
    (folder / "raw" / "H1.csv").write_text("\n".join(["time,down,up", *rows]) + "\n")
    _, _, cube = cube_of(folder)
    np.testing.assert_allclose(cube["decay_time"], 36.0, rtol=1e-5)
    assert cube.sizes["time"] == 48


def test_heating_between_two_rows_is_counted_to_the_part_of_a_second(tmp_path):
    change = ("site.toml", "trace_step_s = 1\n", "trace_step_s = 1\npulse_starts_s = 20.4\n")
    folder = write_site(tmp_path / "ridge", days=1, changes=[change])
    starts = np.datetime64("2031-06-01T00:00:20", "s") + np.arange(4) * np.timedelta64(1800, "s")
    down, up = (one - 273.15 for one in traces(velocity_at(starts), SECONDS - 0.4))
    lines = ["time,down,up"]
    for start, one, other in zip(starts, down, up, strict=True):
        for second, low, high in zip(SECONDS, one, other, strict=True):
            stamp = str(start + np.timedelta64(int(second), "s")).replace("T", " ")
            lines.append(f"{stamp},{low:.9f},{high:.9f}")
    (folder / "raw" / "H1.csv").write_text("\n".join(lines) + "\n")
    _, _, cube = cube_of(folder)
    np.testing.assert_allclose(cube["decay_time"], 36.0, rtol=1e-5)


def test_torn_and_missing_rows_cost_their_pulses_only(tmp_path):
    folder = write_site(tmp_path / "ridge", days=1)
    path = folder / "raw" / "H1.csv"
    lines = path.read_text().splitlines()
    names, rows = lines[0], lines[1:]
    torn = rows.copy()
    torn[131 * 3 + 90] = torn[131 * 3 + 90][:17]  # one torn row: the pulse stands
    del torn[131 * 6 + 80 : 131 * 6 + 100]  # 20 of 41 rows of the window: it falls
    for row in range(131 * 9 + 80, 131 * 9 + 100):  # and with them out of range
        torn[row] = torn[row].split(",")[0] + ",999,20"
    path.write_text("\n".join([names, *torn]) + "\n")
    _, logs, cube = cube_of(folder)
    assert counts(logs["H"]) == {"header": 1, "kept": 48 * 131 - 20 - 1, "rejected": 1}
    bits = cube["quality"].values[0, 0]
    assert np.flatnonzero(bits).tolist() == [6, 9]
    assert quality.has(bits, "no_record")[[6, 9]].all()
    assert quality.has(bits, "out_of_range").nonzero()[0].tolist() == [9]


def test_downloads_that_overlap_give_the_same_and_conflicts_are_told(tmp_path):
    folder = write_site(tmp_path / "ridge", days=1)
    path = folder / "raw" / "H1.csv"
    names, *rows = path.read_text().splitlines()
    _, _, whole = cube_of(folder)
    early, late = rows[: 131 * 30 + 60], rows[131 * 20 + 70 :]
    late = late.copy()
    for row in range(131 * 4 + 10, 131 * 4 + 40):  # pulse 25: 25 rows of its window differ
        time, _, up = late[row].split(",")
        late[row] = f"{time},21.5,{up}"
    path.write_text("\n".join([names, *early]) + "\n")
    (folder / "raw" / "H2.csv").write_text("\n".join([names, *late]) + "\n")
    _, logs, cube = cube_of(folder)
    overlap = 131 * 10 + 60 - 70
    assert counts(logs["H"], 0) == {"header": 1, "kept": len(early)}
    assert counts(logs["H"], 1) == {
        "header": 1, "kept": len(late) - overlap, "duplicate": overlap - 30, "conflicting": 30,
    }  # fmt: skip
    assert len(logs["H"].conflicts) == 30
    bits = cube["quality"].values[0, 0]
    hit = np.flatnonzero(bits)
    assert len(hit) == 1 and quality.has(bits, "conflicting")[hit[0]]
    for name in whole.data_vars:
        if name != "quality":
            kept = np.delete(cube[name].values[0, 0], hit)
            np.testing.assert_allclose(kept, np.delete(whole[name].values[0, 0], hit), rtol=1e-6,
                                       atol=1e-7)  # fmt: skip


def test_a_trace_beside_window_means_of_another_probe(tmp_path):
    tables = TABLES | {
        "channels": TABLES["channels"] + "W,vpd,probe,b2,1,log_heat_ratio,1,,\n",
        "probes": TABLES["probes"] + TABLES["probes"].splitlines()[1].replace("b1", "b2") + "\n",
    }
    tables["channels"] = tables["channels"].replace(
        "W,vpd,site,,1,vapour_pressure_deficit,kPa,,\n", ""
    )
    _, _, cube = cube_of(write_site(tmp_path / "ridge", days=1, tables=tables))
    assert cube["probe"].values.tolist() == ["b1", "b2"]
    assert np.isfinite(cube["decay_time"].values[0]).all()
    assert np.isnan(cube["decay_time"].values[1]).all()
    assert np.isfinite(cube["log_heat_ratio"].values[1]).all()
    assert not cube["quality"].values.any()


def test_rows_of_a_trace_stand_on_their_own_step_with_a_full_account():
    text = "TIMESTAMP,A,B\n" + "".join(
        f"2031-06-01 {minute // 60:02d}:{minute % 60:02d}:{second:02d},1,2\n"
        for minute in (600, 630)
        for second in range(30)
    )
    series = read(text, interval_min=30.0, trace_step_s=1.0)
    assert series.interval_s == 1 and len(series.end) == 60
    assert counts(series) == {"header": 1, "kept": 60}
    assert datetime.fromisoformat(str(series.end[30])) == datetime(2031, 6, 1, 10, 30)
