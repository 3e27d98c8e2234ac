"""The life of each installation: dates, records, flags, baseline, and why it ended."""

import numpy as np
import pandas as pd

from sapflux import quality
from sapflux.site.installations import episodes


class FlagCounts:
    """Records and flagged records of every installation, added up block by block."""

    def __init__(self):
        self.records, self.flagged, self.good = {}, {}, {}

    def add(self, cube, installation, bits, answered):
        """installation : (probe, time) int; bits : (probe, point, time) int32 flags;
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


def installation_table(site, counts, evidence):
    """One row an installation, in the order of `probes.csv`.

    evidence : name -> fitted table of a summarising stage, for the baseline figures.
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
                "records": records,
                "usable_fraction": counts.good.get(key, 0) / records if records else np.nan,
                **_baseline(evidence.get("zero_flow_nights"), key, "zero_flow", "difference_K"),
                **_baseline(evidence.get("zero_offset_nights"), key, "zero_offset",
                            "velocity_cm_h"),
                **{f"{name}_fraction": value
                   for name, value in zip(quality.NATIVE, share, strict=True)},
                "ended": "removed" if row.removed else ("no record" if not records else ""),
            })  # fmt: skip
    return pd.DataFrame(rows)


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
