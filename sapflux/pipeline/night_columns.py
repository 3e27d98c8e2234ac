"""The tables of summarising stages as people read them: one row a night, with its verdict."""

NIGHTS = {
    "zero_flow_nights": (
        "probe", "point", "installation", "noon_before_utc", "time_utc", "difference_K",
        "mean_deficit_kPa", "variation", "records", "accepted", "reason", "baseline_K",
    ),
    "zero_offset_nights": (
        "probe", "point", "installation", "noon_before_utc", "time_utc", "velocity_cm_h",
        "mean_deficit_kPa", "records", "accepted", "reason", "offset_cm_h", "spread_cm_h",
        "nights", "usable", "verdict",
    ),
}  # fmt: skip


def night_tables(evidence):
    """The night tables of a run, as they are written.

    evidence : table of a summarising stage -> fitted DataFrame.
    """
    named = {"start": "noon_before_utc", "time": "time_utc"}
    return {
        name: evidence[name].rename(columns=named)[list(columns)]
        for name, columns in NIGHTS.items()
        if name in evidence
    }
