"""The tables of summarising stages as people read them: one row a night, with its verdict."""

import pandas as pd

NIGHTS = {
    "power_off_nights": (
        "probe", "point", "installation", "noon_before_utc", "time_utc", "gradient_K", "records",
        "accepted", "reason",
    ),
    "zero_flow_nights": (
        "probe", "point", "installation", "noon_before_utc", "time_utc", "difference_K",
        "mean_deficit_kPa", "variation", "records", "accepted", "reason", "baseline_K",
        "baseline_error_K", "admissible", "accepted_if_drier", "accepted_if_wetter",
        "noise_K", "lowest_temperature_degC", "power_change", "visited", "rained",
        "swelling_um_h", "below_highest_um",
    ),
    "diffusivity_nights": (
        "probe", "point", "installation", "noon_before_utc", "time_utc", "decay_cm2_s",
        "maximum_cm2_s", "mean_deficit_kPa", "records", "accepted", "reason", "diffusivity_cm2_s",
        "nights", "usable", "verdict",
    ),
    "zero_ratio_nights": (
        "probe", "point", "installation", "noon_before_utc", "time_utc", "velocity_cm_h",
        "misplacement_mm", "mean_deficit_kPa", "records", "accepted", "reason", "offset_cm_h",
        "spread_cm_h", "slope_cm_h_per_kPa", "slope_probability", "nights", "usable", "verdict",
    ),
    "ageing_controls": (
        "probe", "point", "installation", "reference_days", "oldest_age_d", "control_probe",
        "control_installation", "common_days", "age_difference_d", "ln_ratio", "pairs",
        "rate_per_year", "rate_error_per_year", "applied", "verdict",
    ),
}  # fmt: skip


# The same of the methods run beside a recipe's own, each row with its method.
NIGHTS_BESIDE = {f"{name}_beside": ("method", *columns) for name, columns in NIGHTS.items()}


def night_tables(evidence, beside=()):
    """The night tables of a run, as they are written.

    evidence : table of a summarising stage -> fitted DataFrame; beside : (method, table,
    DataFrame) of each method run beside the recipe's own. Tables without a row are left out.
    """
    tables = {
        name: _written(evidence[name], name)
        for name in NIGHTS
        if name in evidence and len(evidence[name])
    }
    parts = {}
    for method, name, rows in beside:
        if not len(rows):
            continue
        own = _written(rows, name)
        own.insert(0, "method", method)
        parts.setdefault(f"{name}_beside", []).append(own)
    return tables | {name: pd.concat(rows, ignore_index=True) for name, rows in parts.items()}


def _written(rows, name):
    named = {"start": "noon_before_utc", "time": "time_utc"}
    return rows.rename(columns=named)[list(NIGHTS[name])]
