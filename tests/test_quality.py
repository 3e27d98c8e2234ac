"""Flags: one int64 word in memory, two int32 words in files."""

import numpy as np
import pytest
import xarray as xr
from flags_by_hand import flags_defined
from hypothesis import given
from hypothesis import strategies as st

from sapflux import quality
from sapflux.quality import Flag

LOWEST, HIGHEST = Flag("lowest", 31, False, "first fault"), Flag("highest", 61, True, "last fault")


@pytest.mark.parametrize(
    ("row", "message"),
    [
        (Flag("again", 4, True, ""), "flags 'excluded' and 'again' share bit 4"),
        (Flag("excluded", 40, True, ""), "flag 'excluded' has two rows"),
        (Flag("too_high", 62, True, ""), "flag 'too_high': bit 62 is not one of 0 to 61"),
        (Flag("too_low", -1, True, ""), "flag 'too_low': bit -1 is not one of 0 to 61"),
    ],
)
def test_rows_that_contradict_each_other_are_refused(row, message):
    with pytest.raises(ValueError, match=message):
        quality.by_name([*quality.ROWS, row])


def test_the_names_of_sets_of_flags_are_flags():
    assert quality.SCALED <= quality.FLAGS.keys()
    assert set(quality.NATIVE) | quality.SCALED == quality.FLAGS.keys()


def test_every_flag_is_set_told_and_masks_as_its_row_says():
    with flags_defined(LOWEST, HIGHEST):
        for name, row in quality.FLAGS.items():
            word = quality.bits(**{name: np.array([True, False])})
            assert word.dtype == np.int64
            assert word.tolist() == [2**row.bit, 0]
            assert quality.has(word, name).tolist() == [True, False]
            assert quality.masked(word).tolist() == [row.masks, False]
            others = quality.FLAGS.keys() - {name}
            assert not any(quality.has(word, other).any() for other in others)


@given(st.lists(st.integers(0, 2**62 - 1), min_size=1))
def test_words_of_a_file_join_to_the_word_they_were_split_from(values):
    word = np.array(values, np.int64)
    steps, faults = quality.split(word)
    assert steps.dtype == faults.dtype == np.int32
    assert (steps >= 0).all() and (faults >= 0).all()  # the sign is no flag
    joined = quality.joined(steps, faults)
    assert joined.dtype == np.int64
    assert joined.tolist() == values


def test_labelled_arrays_stay_labelled():
    word = xr.DataArray(np.array([1, 1 << 61 | 2]), dims="time")
    steps, faults = quality.split(word)
    assert steps.dims == faults.dims == ("time",)
    assert quality.joined(steps, faults).identical(word)
    assert quality.has(word, "conflicting").dims == quality.masked(word).dims == ("time",)


def test_the_attributes_name_each_flag_in_the_word_that_holds_it():
    with flags_defined(LOWEST, HIGHEST):
        of_steps, of_faults = quality.quality_attributes(), quality.faults_attributes()
    steps = [row for row in quality.ROWS if not row.is_fault]
    own = [row for row in quality.ROWS if row.is_fault]
    assert of_steps["flag_meanings"].split() == [row.name for row in steps]
    assert of_steps["flag_masks"].tolist() == [2**row.bit for row in steps]
    assert of_faults["flag_masks"].tolist() == [*(2 ** (r.bit - 31) for r in own), 1, 2**30]
    assert of_faults["flag_masks"].dtype == of_steps["flag_masks"].dtype == np.int32
    assert of_faults["flag_meanings"].split() == [*(r.name for r in own), "lowest", "highest"]
    told = "lowest: first fault (notes); highest: last fault (masks)"
    assert of_faults["comment"].endswith(told)


def test_a_fault_asked_of_the_first_word_of_a_file_is_refused():
    with flags_defined(LOWEST, HIGHEST):
        steps, _ = quality.split(quality.bits(highest=np.array([True]), excluded=True))
        assert quality.has(steps, "excluded").all()
        with pytest.raises(ValueError, match="int32 holds no faults"):
            quality.has(steps, "highest")
        with pytest.raises(ValueError, match="int32 holds no faults"):
            quality.masked(steps)
