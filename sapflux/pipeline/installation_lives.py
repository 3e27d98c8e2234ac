"""The life of each installation: dates, records, flags, baseline, and why it ended."""

import numpy as np
import pandas as pd

from sapflux import quality
from sapflux.ingest.cube import METHODS
from sapflux.site.installations import episodes, installation_numbers

# Records of so large a log ratio tell how it drifts within the reading window, and so many of them
# are needed. Source: own judgement.
LEAST_LOG_RATIO = 0.3
FEWEST_DRIFTS = 10


WHOLE = 1e12  # flux densities add up as whole parts of this: the same sum for every block length


class FlagCounts:
    """Records and flagged records of every installation, added up block by block."""

    def __init__(self):
        self.records, self.flagged, self.good, self.flux, self.change = {}, {}, {}, {}, {}

    def add(self, cube, installation, bits, answered):
        """installation : (probe, time) int; bits : (probe, point, time) int64 flags;
        answered : (probe, point, time) bool, records that a channel of the cube covers."""
        for row, name in enumerate(cube["probe"].values):
            for number in np.unique(installation[row][installation[row] >= 0]):
                key = (str(name), int(number))
                here = (installation[row] == number) & answered[row]
                own = bits[row][here]
                self.records[key] = self.records.get(key, 0) + own.size
                flagged = [int(quality.has(own, flag).sum()) for flag in quality.NATIVE]
                self.flagged[key] = self.flagged.get(key, 0) + np.array(flagged)
                self.good[key] = self.good.get(key, 0) + int((~quality.masked(own)).sum())

    def add_amplification(self, cube, installation, flux, amplification):
        """flux [kg m-2 s-1], amplification [1] : (probe, point, time), of records that have both.

        installation : as for `add`.
        """
        both = np.isfinite(flux) & np.isfinite(amplification)
        whole = np.rint(np.where(both, flux, 0.0) * WHOLE).astype(np.int64)
        change = np.rint(np.where(both, flux * amplification, 0.0) * WHOLE).astype(np.int64)
        for row, name in enumerate(cube["probe"].values):
            for number in np.unique(installation[row][installation[row] >= 0]):
                key, here = (str(name), int(number)), installation[row] == number
                for sums, values in ((self.flux, whole), (self.change, change)):
                    sums[key] = sums.get(key, 0) + int(values[row][:, here].sum())

    def amplification(self, key):
        """Relative change of an installation's whole flux per relative change of its baseline.

        The mean of the records' amplification weighted by their flux density, with its sign, so
        that noise about zero flow does not count twice; NaN without an upward flux.
        """
        flux = self.flux.get(key, 0)
        return self.change[key] / flux if flux > 0 else np.nan


def window_drifts(site, cubes):
    """(probe, installation) -> how the log ratio drifts within the reading window, from traces.

    The median, over the records with flow, of the log ratio of the first half of the window over
    that of the second. Without a wound it is 1; at a wound of 2 mm 0.943 and of 3 mm 0.911
    (60-100 s, diffusivity 0.0025 cm2 s-1). Drift of the temperature and steel needles move it too.

    Source: own calculation, exact solution of a strip in which no sap moves.
    """
    found = {}
    for (_, interval_s), cube in cubes.items():
        if "early_log_ratio" not in cube:
            continue
        probes = [str(name) for name in cube["probe"].values]
        ends = cube["time"].values.astype("datetime64[s]")
        numbers = installation_numbers(site, probes, ends, interval_s)
        early, late = cube["early_log_ratio"].values, cube["late_log_ratio"].values
        flows = np.abs(early + late) / 2.0 > LEAST_LOG_RATIO  # False where NaN
        flows &= (early * late > 0.0) & ~quality.masked(cube["quality"].values)
        for row, probe in enumerate(probes):
            for number in np.unique(numbers[row][numbers[row] >= 0]):
                own = flows[row] & (numbers[row] == number)
                if own.sum() >= FEWEST_DRIFTS:
                    ratio = early[row][own] / late[row][own]
                    found[probe, int(number)] = float(np.median(ratio))
    return found


def installation_table(site, counts, evidence, drifts=None):
    """One row an installation, in the order of `probes.csv`.

    Records of unheated pairs are not counted (NaN): they have no chain of their own.
    evidence : name -> fitted table of a summarising stage, for the baseline figures; drifts : as
    `window_drifts` gives them.
    """
    rows = []
    for probe in dict.fromkeys(row.probe for row in site.table("probes")):
        for number, row in enumerate(episodes(site, probe)):
            key = (probe, number)
            records = counts.records.get(key, 0)
            flagged = counts.flagged.get(key, np.zeros(len(quality.NATIVE), dtype=int))
            share = flagged / records if records else np.full(len(flagged), np.nan)
            rows.append({
                "probe": probe,
                "installation": number,
                "tree": row.tree,
                "method": row.method,
                "installed": row.installed.isoformat(" "),
                "removed": row.removed.isoformat(" ") if row.removed else "",
                "records": np.nan if row.method not in METHODS else records,
                "usable_fraction": counts.good.get(key, 0) / records if records else np.nan,
                **_baseline(evidence.get("zero_flow_nights"), key, "zero_flow", "difference_K"),
                **_zero_flow(evidence.get("zero_flow_nights"), key),
                "baseline_amplification": counts.amplification(key),
                **_baseline(evidence.get("zero_ratio_nights"), key, "zero_ratio",
                            "velocity_cm_h"),
                "window_drift": (drifts or {}).get(key, np.nan),
                **{f"{name}_fraction": value
                   for name, value in zip(quality.NATIVE, share, strict=True)},
                "ended": _ended(row, records),
            })  # fmt: skip
    return pd.DataFrame(rows)


def _ended(row, records):
    """Why an installation ended. Records of unheated pairs are not counted: they have no chain."""
    if row.removed:
        return "removed"
    return "no record" if row.method in METHODS and not records else ""


def _baseline(nights, key, name, column):
    """Nights looked at and accepted, and the median of the accepted."""
    if nights is None or not len(nights):
        return {f"{name}_nights": 0, f"{name}_nights_accepted": 0, f"{name}_{column}": np.nan}
    own = nights[(nights["probe"] == key[0]) & (nights["installation"] == key[1])]
    accepted = own[own["accepted"]]
    return {
        f"{name}_nights": len(own),
        f"{name}_nights_accepted": len(accepted),
        f"{name}_{column}": accepted[column].median() if len(accepted) else np.nan,
    }


def _zero_flow(nights, key):
    """Nights that a bias of humidity would add or take, and whether the method is admissible.

    It is admissible if it is at every point of the needle; NaN without any night.
    """
    if nights is None or not len(nights):
        return {
            "zero_flow_nights_added": 0, "zero_flow_nights_lost": 0, "zero_flow_admissible": np.nan
        }  # fmt: skip
    own = nights[(nights["probe"] == key[0]) & (nights["installation"] == key[1])]
    return {
        "zero_flow_nights_added": int((own["accepted_if_wetter"] & ~own["accepted"]).sum()),
        "zero_flow_nights_lost": int((own["accepted"] & ~own["accepted_if_drier"]).sum()),
        "zero_flow_admissible": int(own["admissible"].all()) if len(own) else np.nan,
    }
