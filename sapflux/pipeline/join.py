"""The join: probes of every method and interval on the site's common step."""

import numpy as np
import xarray as xr

from sapflux import quality, schema
from sapflux.ingest.series import grid
from sapflux.pipeline.blocks import NO_OFFSET


def common_grid(cubes, step_s, offset=NO_OFFSET):
    """Ends of the common steps that cover all cubes, datetime64[s] UTC.

    Steps count from midnight of the fixed standard time, which is UTC plus `offset`.
    """
    step = np.timedelta64(step_s, "s")
    firsts, lasts = [], []
    for cube in cubes:
        if cube.sizes["time"]:
            ends = cube["time"].values.astype("datetime64[s]")
            firsts.append(ends[0] - np.timedelta64(int(cube.attrs["interval_s"]), "s"))
            lasts.append(ends[-1])
    if not firsts:
        return np.empty(0, dtype="datetime64[s]")
    midnight = (min(firsts) + offset).astype("datetime64[D]").astype("datetime64[s]") - offset
    first = midnight + ((min(firsts) - midnight) // step + 1) * step
    last = midnight + -(-(max(lasts) - midnight) // step) * step
    return grid(first, last, step_s)


class Joined:
    """Flux density, quality and origin of all probes on the common step, filled block by block.

    Means are weighted with the covered time. A step keeps every flag of its records, also where
    the rest of the step gives a value.

    least_coverage : share of the records of a step that must have a value; with less the step is
        NaN and flagged. Source: hourly completeness of 75 %, common practice.
    """

    def __init__(self, cubes, ends, step_s, least_coverage):
        # A probe that moved to a logger of another interval lies in two cubes, and is one probe.
        probes = list(dict.fromkeys(str(n) for cube in cubes for n in cube["probe"].values))
        points = max((cube.sizes["point"] for cube in cubes), default=1)
        shape = (len(probes), points, len(ends))
        self.probes, self.ends, self.step_s = probes, ends, step_s
        self.least_coverage = least_coverage
        self.total = np.zeros(shape)  # flux density times the covered time
        self.covered = np.zeros(shape, dtype=np.int32)  # s
        self.answered = np.zeros(shape, dtype=bool)
        self.quality = np.zeros(shape, dtype=np.int64)

    def add(self, probes, flux, bits, record_ends, interval_s, answered=None):
        """Lay the core of one block of one cube: names of its probes, (probe, point, time).

        answered : (probe, point, time) bool, records that a channel of this cube covers; None: all.
        What a cube says of other records is no flag of the probe.
        """
        step = np.timedelta64(self.step_s, "s")
        start = self.ends[0] - step
        number = ((record_ends - np.timedelta64(1, "s") - start) // step).astype(np.int64)
        low, high = number[0], number[-1] + 1
        slot = (record_ends - (start + number * step)) // np.timedelta64(interval_s, "s") - 1

        def laid(values, absent):
            shape = (*flux.shape[:2], high - low, self.step_s // interval_s)
            grid_of_steps = np.full(shape, absent, dtype=values.dtype)
            grid_of_steps[:, :, number - low, slot] = values
            return grid_of_steps

        if answered is None:
            answered = np.ones(flux.shape, dtype=bool)
        values = laid(np.where(answered, flux, np.nan), np.nan)
        there = np.isfinite(values)
        rows = [self.probes.index(str(name)) for name in probes]
        here = np.ix_(rows, range(flux.shape[1]), range(low, high))
        self.total[here] += np.where(there, values, 0.0).sum(axis=-1) * interval_s
        self.covered[here] += there.sum(axis=-1, dtype=np.int32) * interval_s
        self.answered[here] |= laid(answered, False).any(axis=-1)
        flags = laid(np.where(answered, bits, np.int64(0)), 0)
        self.quality[here] |= np.bitwise_or.reduce(flags, axis=-1)

    def add_block(self, chain, block, working, answered):
        """Lay the core of a block after all stages of its chain; returns its flags.

        answered : (probe, point, time) bool of the whole cube, as for `add`.
        """
        core = {"time": block.core}
        flux = working.variables["flux_density"].isel(core).transpose(*schema.RECORD)
        bits = working.quality[schema.RECORD].isel(core).transpose(*schema.RECORD)
        here = slice(block.core_first, block.core_last)
        self.add(
            chain.cube["probe"].values,
            flux.values,
            bits.values,
            chain.ends[here],
            chain.interval_s,
            answered[..., here],
        )
        return bits

    def dataset(self):
        """The joined cube."""
        enough = (self.covered > 0) & (self.covered >= self.least_coverage * self.step_s)
        with np.errstate(invalid="ignore", divide="ignore"):
            mean = np.where(enough, self.total / self.covered, np.nan)
        bits = self.quality | quality.bits(
            no_record=~self.answered,
            partly_missing=(self.covered > 0) & (self.covered < self.step_s),
            incomplete_step=~enough,
        )
        origin = np.where(enough, quality.ORIGINS["measured"], 0).astype(np.int8)
        return xr.Dataset(
            {
                "flux_density": (schema.RECORD, mean),
                "quality": (schema.RECORD, bits),
                "origin": (schema.RECORD, origin),
            },
            {
                "probe": np.array(self.probes, dtype=str),
                "point": np.arange(1, mean.shape[1] + 1),
                "time": self.ends.astype("datetime64[ns]"),
            },
            attrs={"interval_s": self.step_s},
        )
