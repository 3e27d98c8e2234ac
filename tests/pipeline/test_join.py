"""The join: means weighted with the covered time, every flag kept."""

import numpy as np
import xarray as xr

from sapflux import quality
from sapflux.pipeline.join import Joined, common_grid

NAN = np.nan
FAILED = quality.FLAGS["heater_failure"].mask
NO_RECORD = quality.FLAGS["no_record"].mask


def cube(first_end, count, interval_s, probe="T01"):
    ends = np.datetime64(first_end, "s") + np.arange(count) * np.timedelta64(interval_s, "s")
    return xr.Dataset(
        coords={"probe": [probe], "point": [1], "time": ends.astype("datetime64[ns]")},
        attrs={"interval_s": interval_s},
    )


def joined(values, flags=None, first_end="2031-06-01T00:10", least=0.6):
    one = cube(first_end, len(values), 600)
    ends = one["time"].values.astype("datetime64[s]")
    result = Joined([one], common_grid([one], 1800), 1800, least)
    bits = np.zeros(len(values), np.int64) if flags is None else np.array(flags, np.int64)
    result.add(["T01"], np.array(values, float)[None, None], bits[None, None], ends, 600)
    return result.dataset()


def test_a_full_step_is_the_mean_of_its_records():
    assert joined([1, 2, 6])["flux_density"].values.ravel().tolist() == [3]


def test_a_step_with_too_few_records_is_absent_and_says_so():
    step = joined([1, NAN, NAN], [0, NO_RECORD, NO_RECORD])
    assert np.isnan(step["flux_density"]).all()
    assert quality.has(step["quality"].values, "incomplete_step").all()


def test_a_step_with_enough_records_keeps_the_flags_of_the_others():
    step = joined([1, 3, NAN], [0, 0, FAILED])
    assert step["flux_density"].values.ravel().tolist() == [2]
    bits = step["quality"].values
    assert quality.has(bits, "heater_failure").all()
    assert quality.has(bits, "partly_missing").all()
    assert not quality.has(bits, "incomplete_step").any()


def test_a_step_keeps_flags_that_a_float_could_not_hold():
    # 2**61 + 1 has more digits than a float64 has
    step = joined([1, 3, NAN], [0, 1 << 31, 1 << 61 | FAILED | 1])["quality"]
    assert step.dtype == np.int64
    own = quality.bits(partly_missing=np.array(True)) | 1 << 61 | 1 << 31 | FAILED | 1
    assert step.values.ravel().tolist() == [own]


def test_records_fall_into_the_step_that_ends_after_them():
    step = joined([1, 1, 4, 4, 4], first_end="2031-06-01T00:20")
    assert [str(t)[:16] for t in step["time"].values] == ["2031-06-01T00:30", "2031-06-01T01:00"]
    assert step["flux_density"].values.ravel().tolist() == [1, 4]


def test_two_clocks_share_one_grid():
    slow, fast = cube("2031-06-01T06:30", 4, 1800), cube("2031-06-01T00:10", 12, 600, "T02")
    ends = common_grid([slow, fast], 1800)
    assert (str(ends[0]), str(ends[-1])) == ("2031-06-01T00:30:00", "2031-06-01T08:00:00")
    result = Joined([slow, fast], ends, 1800, 0.75).dataset()
    assert list(result["probe"].values) == ["T01", "T02"]
    assert (result["origin"] == quality.ORIGINS["absent"]).all()


def test_a_probe_that_moved_to_a_slower_logger_stays_one_probe():
    fast, slow = cube("2031-06-01T00:10", 6, 600), cube("2031-06-01T01:30", 2, 1800)
    result = Joined([fast, slow], common_grid([fast, slow], 1800), 1800, 0.6)
    # The fast logger gives the first hour, the slow one the second; each is silent in the other's.
    for one, values in [(fast, [1, 1, 1, 2, 2, 2]), (slow, [3, 4])]:
        ends = one["time"].values.astype("datetime64[s]")
        flux = np.array(values, float)[None, None]
        bits = np.zeros(flux.shape, np.int64)
        result.add(["T01"], flux, bits, ends, int(one.attrs["interval_s"]))
    silent = np.full((1, 1, 2), NAN), np.full((1, 1, 2), NO_RECORD, np.int64)
    early = np.array(["2031-06-01T00:30", "2031-06-01T01:00"], "M8[s]")
    result.add(["T01"], *silent, early, 1800)
    assert result.dataset()["flux_density"].values.tolist() == [[[1, 2, 3, 4]]]


def test_steps_count_from_midnight_of_the_standard_time():
    one = cube("2031-06-01T00:30", 4, 3600)
    ends = common_grid([one], 3600, np.timedelta64(19800, "s"))  # utc+5.5
    assert [str(end)[11:16] for end in ends] == ["00:30", "01:30", "02:30", "03:30"]
