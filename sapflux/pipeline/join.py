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

    Means are weighted with the covered time, which for the equal records of one cube is their
    count. A step keeps every flag of its records, also where the rest of the step gives a value.

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
        self.flux = np.full(shape, np.nan)
        self.quality = np.full(shape, quality.FLAGS["no_record"].mask, dtype=np.int32)
        self.coverage = np.zeros(shape, dtype=np.float32)

    def add(self, probes, flux, bits, record_ends, interval_s):
        """Lay the core of one block of one cube: names of its probes, (probe, point, time).

        A step that two cubes share keeps the value of the first and the flags of both.
        """
        per_step = self.step_s // interval_s
        step = np.timedelta64(self.step_s, "s")
        start = self.ends[0] - step
        number = ((record_ends - np.timedelta64(1, "s") - start) // step).astype(np.int64)
        low, high = number[0], number[-1] + 1
        slot = (record_ends - (start + number * step)) // np.timedelta64(interval_s, "s") - 1
        shape = (*flux.shape[:2], high - low, per_step)
        values = np.full(shape, np.nan)
        flags = np.full(shape, quality.FLAGS["no_record"].mask, dtype=np.int32)
        values[:, :, number - low, slot] = flux
        flags[:, :, number - low, slot] = bits
        there = np.isfinite(values)
        count = there.sum(axis=-1)
        share = count / per_step
        enough = (count > 0) & (share >= self.least_coverage)
        with np.errstate(invalid="ignore", divide="ignore"):
            mean = np.where(there, values, 0.0).sum(axis=-1) / count
        joined = np.bitwise_or.reduce(flags, axis=-1) | quality.bits(
            partly_missing=(count > 0) & (count < per_step), incomplete_step=~enough
        )
        rows = [self.probes.index(str(name)) for name in probes]
        here = np.ix_(rows, range(flux.shape[1]), range(low, high))
        before = self.coverage[here] > 0
        take = (count > 0) | ~before
        both = before & (count > 0)
        self.flux[here] = np.where(take & ~both, np.where(enough, mean, np.nan), self.flux[here])
        self.quality[here] = np.where(take, joined, 0) | np.where(before, self.quality[here], 0)
        self.coverage[here] = np.where(take, share, 0) + np.where(before, self.coverage[here], 0)

    def dataset(self):
        """The joined cube."""
        origin = np.where(np.isfinite(self.flux), quality.ORIGINS["measured"], 0).astype(np.int8)
        return xr.Dataset(
            {
                "flux_density": (schema.RECORD, self.flux),
                "quality": (schema.RECORD, self.quality),
                "origin": (schema.RECORD, origin),
            },
            {
                "probe": np.array(self.probes, dtype=str),
                "point": np.arange(1, self.flux.shape[1] + 1),
                "time": self.ends.astype("datetime64[ns]"),
            },
            attrs={"interval_s": self.step_s},
        )
