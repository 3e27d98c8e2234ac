"""Thermal diffusivity in place, from what heat pulses show on nights without flow."""

import numpy as np
import xarray as xr

from sapflux.correction.night_table import (
    candidates,
    chosen,
    laid_on,
    lines_of,
    no_rows,
    same_key,
    without_silent,
)
from sapflux.correction.nights import DAY_NS
from sapflux.physics import pulse_maximum, pulse_trace
from sapflux.schema import RECORD
from sapflux.units import CM2_PER_S

OWN = ("night_cm2_s", "mean_deficit_kPa")
COLUMNS = ("decay_cm2_s", "maximum_cm2_s", "mean_deficit_kPa")
IN_SITU = ("in_situ", "in_situ_else_wood")


def diffusivity_candidates(
    installation,
    solar_elevation,
    solar_time,
    spacing_downstream,
    spacing_upstream,
    pulse_length=None,
    decay_time=None,
    time_of_maximum_downstream=None,
    time_of_maximum_upstream=None,
    vapour_pressure_deficit=None,
    /,
    *,
    method,
    source,
    averaging_h,
    least_records_share,
    highest_deficit_kPa,
    lowest_diffusivity_cm2_s,
    highest_diffusivity_cm2_s,
):
    """One row a probe, point, installation and night of the block: its mean before sunrise.

    Columns as in the table of `thermal_diffusivity`, without those that rest on several nights.
    No rows where `method` takes no diffusivity in place, or there are no traces.
    """
    traces = (decay_time, time_of_maximum_downstream, time_of_maximum_upstream, pulse_length)
    if method not in IN_SITU or any(one is None for one in traces):
        return no_rows(*COLUMNS)
    maxima = [
        xr.apply_ufunc(
            pulse_maximum.diffusivity_of_time_of_maximum, moment, pulse_length, distance
        ).transpose(*RECORD)
        for moment, distance in (
            (time_of_maximum_downstream, spacing_downstream),
            (time_of_maximum_upstream, spacing_upstream),
        )
    ]
    decay = xr.apply_ufunc(
        pulse_trace.diffusivity_of_decay, decay_time, spacing_downstream, spacing_upstream
    )
    found = {
        "decay_cm2_s": decay.transpose(*RECORD) / CM2_PER_S,
        "maximum_cm2_s": (maxima[0] + maxima[1]) / 2.0 / CM2_PER_S,
    }

    def before_sunrise(mean, _variation, mean_deficit, last):
        window = np.broadcast_to(last, mean.shape[:-1])
        quiet = chosen(mean_deficit, window) <= highest_deficit_kPa
        return window, np.isfinite(chosen(mean, window)) & quiet

    tables = {
        name: candidates(
            record,
            installation,
            solar_elevation,
            solar_time,
            vapour_pressure_deficit,
            before_sunrise,
            OWN,
            averaging_h=averaging_h,
            least_records_share=least_records_share,
            highest_deficit_kPa=highest_deficit_kPa,
        )
        for name, record in found.items()
    }
    # Both have the same rows: a night is looked at whatever its records hold.
    rows = tables["decay_cm2_s" if source == "decay" else "maximum_cm2_s"]
    value = rows["night_cm2_s"]
    for name, table in tables.items():
        rows = rows.assign(**{name: table["night_cm2_s"]})
    beyond = (value < lowest_diffusivity_cm2_s) | (value > highest_diffusivity_cm2_s)
    refused = rows["accepted"] & beyond
    bounds = f"outside {lowest_diffusivity_cm2_s:g} to {highest_diffusivity_cm2_s:g} cm2 s-1"
    rows.loc[refused, "reason"] = [f"{k:.3g} {bounds}" for k in value[refused]]
    rows["accepted"] &= ~refused
    types = no_rows(*COLUMNS)
    return rows[list(types.columns)] if len(rows) else types


def fit_diffusivity(rows, /, *, source, fewest_nights, smoothing_d):
    """The table of nights with the diffusivity of their installation, as it goes with the season.

    diffusivity_cm2_s : mean of the accepted nights up to half of `smoothing_d` before and after,
    NaN where not accepted; nights : accepted ones of the installation; usable, verdict : whether
    they are enough.
    """
    rows = without_silent(rows).reset_index(drop=True) if len(rows) else no_rows(*COLUMNS)
    column = "decay_cm2_s" if source == "decay" else "maximum_cm2_s"
    values = rows[column].where(rows["accepted"]).to_numpy(dtype=float)
    start = rows["start"].to_numpy().astype("datetime64[ns]").astype(np.int64)
    smooth = np.full(len(rows), np.nan)
    nights, verdict = np.zeros(len(rows), dtype=np.int64), np.full(len(rows), "", dtype=object)
    for *_, own in same_key(rows):
        there = np.flatnonzero(np.isfinite(values[own])) + own.start
        away = np.abs(start[there, None] - start[there]) / DAY_NS
        near = (away <= smoothing_d / 2.0).astype(float)
        smooth[there] = near @ values[there] / near.sum(axis=1) if len(there) else np.nan
        nights[own] = len(there)
        few = f"{len(there)} accepted nights, {fewest_nights} needed"
        verdict[own] = few if len(there) < fewest_nights else "usable"
    return rows.assign(
        diffusivity_cm2_s=smooth, nights=nights, usable=verdict == "usable", verdict=verdict
    )


def laid_diffusivity(nights, record, installation):
    """Diffusivity in place on the records [m2 s-1], DataArray (probe, time); NaN where unknown.

    Linear in time between the accepted nights of an installation, constant before the first and
    after the last; the mean over the points of a needle that have one.

    nights : as of `fit_diffusivity`; record : DataArray (probe, point, time) of the block.
    """
    record = record.transpose(*RECORD)
    nights = nights[nights["usable"].to_numpy(dtype=bool) & nights["accepted"].to_numpy(dtype=bool)]
    stamps = record["time"].values.astype("datetime64[ns]").astype(np.int64)
    knots = nights["time"].to_numpy().astype("datetime64[ns]").astype(np.int64)
    values = nights["diffusivity_cm2_s"].to_numpy(dtype=float) * CM2_PER_S
    found = np.full(record.shape, np.nan)
    for place, here, own in lines_of(nights, record, laid_on(record, installation)):
        first = knots[own.start]
        # Days since the first knot: nanoseconds of today have more digits than a float.
        days, known = (stamps[here] - first) / DAY_NS, (knots[own] - first) / DAY_NS
        found[place][here] = np.interp(days, known, values[own])
    there = np.isfinite(found)
    count = there.sum(axis=1)
    total = np.where(there, found, 0.0).sum(axis=1)
    mean = np.where(count > 0, total / np.maximum(count, 1), np.nan)
    return record.isel(point=0, drop=True).copy(data=mean)
