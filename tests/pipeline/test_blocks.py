"""Blocks cover every record once, and every table row has one owner."""

import numpy as np
import pytest

from sapflux.pipeline.blocks import blocks, span

START = np.datetime64("2031-06-01T07:10", "s")
ENDS = START + np.arange(1000) * np.timedelta64(600, "s")


@pytest.mark.parametrize("days", [1, 2, 5, 100, None])
@pytest.mark.parametrize("reach_s", [0, 1, 86400 * 3])
def test_cores_tile_the_record(days, reach_s):
    cut = blocks(ENDS, 600, reach_s, days)
    owned = [index for block in cut for index in range(block.core_first, block.core_last)]
    assert owned == list(range(len(ENDS)))


def test_the_halo_reaches_at_least_as_far_as_asked():
    for block in blocks(ENDS, 600, 1000, days=1)[1:-1]:
        assert (block.core_first - block.first) * 600 >= 1000
        assert (block.last - block.core_last) * 600 >= 1000


def test_a_record_that_ends_at_midnight_closes_its_block():
    first = blocks(ENDS, 600, 0, days=1)[0]
    assert str(ENDS[first.core_last - 1]) == "2031-06-02T00:00:00"


@pytest.mark.parametrize("days", [1, 3, None])
def test_every_moment_is_owned_by_exactly_one_core(days):
    moments = ENDS[0] + np.arange(-5000, 70000, 7) * np.timedelta64(60, "s")
    owners = np.zeros(len(moments), dtype=int)
    for block in blocks(ENDS, 600, 0, days):
        first, last = span(ENDS, 600, block)
        owners += (moments >= first) & (moments < last)
    assert (owners == 1).all()


def test_no_record_makes_no_block():
    assert blocks(ENDS[:0], 600) == []
