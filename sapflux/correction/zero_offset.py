"""Zero offset of heat ratio: the velocity that a probe shows at rest, and its removal."""

from typing import Literal

import numpy as np
import pandas as pd

from sapflux.correction.night_table import (
    laid_on,
    night_rows,
    no_rows,
    reasons,
    same_key,
    without_silent,
)
from sapflux.correction.nights import (
    in_nights,
    installations_in,
    last_window,
    nights_of,
    window_means,
    window_middle,
    window_records,
)
from sapflux.correction.order import stages_before
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.schema import RECORD
from sapflux.stage import stage

PA_PER_KPA = 1000.0
COLUMNS = ("velocity_cm_h", "mean_deficit_kPa")


def summarise_nights(
    heat_pulse_velocity,
    installation,
    solar_elevation,
    solar_time,
    vapour_pressure_deficit=None,
    /,
    *,
    method,
    averaging_h,
    least_records_share,
    highest_deficit_kPa,
):
    """One row a probe, point, installation and night of the block: its mean before sunrise.

    Columns as in the table of `zero_offset`, without those of the installation.
    """
    velocity = heat_pulse_velocity.transpose(*RECORD)
    nights = nights_of(velocity["time"].values, solar_elevation.values, solar_time.values)
    values = in_nights(velocity.values / CM_PER_HOUR, nights, np.nan)
    numbers = in_nights(laid_on(velocity, installation), nights, -1)
    if vapour_pressure_deficit is None:
        deficit = np.full(velocity.sizes["time"], np.nan)
    else:
        deficit = vapour_pressure_deficit.values / PA_PER_KPA
    records = window_records(nights, averaging_h)
    last = last_window(nights, records)
    air = window_means(in_nights(deficit, nights, np.nan), nights, records, least_records_share)
    mean_deficit = _at(air.mean, last)
    quiet = mean_deficit <= highest_deficit_kPa if method == "quiet_nights" else True
    parts = []
    for current in installations_in(numbers):
        own = np.where((numbers == current[..., None])[:, None], values, np.nan)
        signal = window_means(own, nights, records, least_records_share)
        mean = _at(signal.mean, last)
        found = np.isfinite(mean)
        columns = {
            "time": np.where(
                found, window_middle(nights, last, records), np.datetime64("NaT", "ns")
            ),
            "velocity_cm_h": mean,
            "mean_deficit_kPa": mean_deficit,
            "records": _at(signal.count, last),
            "accepted": found & quiet,
            "night_records": np.isfinite(own).sum(axis=-1),
            "long_enough": nights.length >= records,
        }
        rows = night_rows(velocity, current, nights, columns)
        rows["reason"] = reasons(rows, "velocity_cm_h", averaging_h, highest_deficit_kPa)
        parts.append(rows.drop(columns=["night_records", "long_enough"]))
    return pd.concat(parts, ignore_index=True) if parts else no_rows(*COLUMNS)


def fit_offsets(rows, /, *, fewest_nights, widest_spread_cm_h, largest_offset_cm_h):
    """The table of nights with the offset of their installation, the same in all its rows.

    offset_cm_h, spread_cm_h : median and interquartile range of the accepted nights; nights :
    their number; usable : whether the offset may be used; verdict : why, in words.
    """
    if not len(rows):
        rows = no_rows(*COLUMNS)
        return rows.assign(
            offset_cm_h=np.empty(0),
            spread_cm_h=np.empty(0),
            nights=np.empty(0, dtype=np.int64),
            usable=np.empty(0, dtype=bool),
            verdict=np.empty(0, dtype=object),
        )
    rows = without_silent(rows).reset_index(drop=True)
    velocity = rows["velocity_cm_h"].where(rows["accepted"]).to_numpy()
    size = len(rows)
    offset, spread = np.full(size, np.nan), np.full(size, np.nan)
    nights, verdict = np.zeros(size, dtype=np.int64), np.full(size, "", dtype=object)
    for *_, own in same_key(rows):
        accepted = velocity[own][np.isfinite(velocity[own])]
        nights[own] = len(accepted)
        if len(accepted):
            offset[own] = np.median(accepted)
            spread[own] = np.subtract(*np.percentile(accepted, [75, 25]))
        one = own.start
        if nights[one] < fewest_nights:
            verdict[own] = f"{nights[one]} accepted nights, {fewest_nights} needed"
        elif spread[one] > widest_spread_cm_h:
            verdict[own] = f"spread {spread[one]:.3g} cm h-1 above {widest_spread_cm_h:g}"
        elif abs(offset[one]) > largest_offset_cm_h:
            verdict[own] = f"offset {offset[one]:.3g} cm h-1 beyond {largest_offset_cm_h:g}"
        else:
            verdict[own] = "usable"
    return rows.assign(
        offset_cm_h=offset,
        spread_cm_h=spread,
        nights=nights,
        usable=verdict == "usable",
        verdict=verdict,
    )


@stage(
    chain="heat_ratio",
    makes="heat_pulse_velocity",
    flags="unusable_offset",
    table="zero_offset_nights",
    summarise=summarise_nights,
    fit=fit_offsets,
    # A night ends within a solar day of the noon before it; an hour for the equation of time.
    reach_s=lambda settings: 25 * 3600.0,
    method_needs={"quiet_nights": ("vapour_pressure_deficit",)},
    after=stages_before("heat_ratio", "zero_offset"),
    limits={
        "averaging_h": (0.25, 6.0),
        "least_records_share": (0.1, 1.0),
        "highest_deficit_kPa": (0.0, 1.0),
        "fewest_nights": (1, 100),
        "widest_spread_cm_h": (0.0, 10.0),
        "largest_offset_cm_h": (0.0, 10.0),
    },
)
def zero_offset(
    heat_pulse_velocity,
    zero_offset_nights,
    installation,
    /,
    *,
    method: Literal["quiet_nights", "all_nights"] = "quiet_nights",
    averaging_h=2.0,
    least_records_share=0.75,
    highest_deficit_kPa=0.1,
    fewest_nights=5,
    widest_spread_cm_h=0.5,
    largest_offset_cm_h=5.0,
):
    """Heat pulse velocity less what the probe shows at rest.

    One offset for a whole installation: the median of the means over the last `averaging_h`
    before sunrise of the accepted nights. Needles that stand askew read a velocity at zero flow;
    subtracting it leaves their gain uncorrected (6 mm and 7 mm: the gain stays 13 of 12), so it
    is a fall-back for small offsets only. Negative velocities stay.

    Parameters
    ----------
    heat_pulse_velocity : (probe, point, time) [m s-1]
        Before any wound correction.
    zero_offset_nights : table
        One row a probe, point, installation and night: `start` (UTC, true solar noon before it),
        `time` (UTC, middle of the mean), velocity_cm_h, mean_deficit_kPa, records, accepted,
        reason in words; and of the installation offset_cm_h, spread_cm_h, nights, usable,
        verdict in words.
    installation : (probe, time) [1]
        Each has its own offset.
    method : text
        "quiet_nights" accepts a night by its vapour pressure deficit; "all_nights" accepts every
        one, and so assumes that no sap flows before dawn.
    averaging_h : float [h]
        Length of the mean. Common practice: at least 2 h.
    least_records_share : float [1]
        Share of the records of a mean that must be there. Own judgement.
    highest_deficit_kPa : float [kPa]
        Of "quiet_nights", highest mean vapour pressure deficit. Common practice.
    fewest_nights : int [1]
        Accepted nights that an offset needs. Common practice.
    widest_spread_cm_h : float [cm h-1]
        Highest interquartile range of the accepted nights. Own judgement.
    largest_offset_cm_h : float [cm h-1]
        Beyond this the probe stands too far askew for an offset. Common practice.

    Returns
    -------
    heat_pulse_velocity : (probe, point, time) [m s-1]
        NaN where the installation has no usable offset.
    unusable_offset : (probe, point, time) [bool]
        Where that is so while a probe is installed.

    Source: Burgess et al. (2001), Tree Physiology 21 (zero-flow readings); the additive form and
    its conditions are common practice.
    """
    velocity = heat_pulse_velocity.transpose(*RECORD)
    numbers = laid_on(velocity, installation)
    offset = np.full(velocity.shape, np.nan)
    rows = {str(name): row for row, name in enumerate(velocity["probe"].values)}
    columns = {int(number): column for column, number in enumerate(velocity["point"].values)}
    usable = zero_offset_nights["usable"].to_numpy(dtype=bool)
    values = zero_offset_nights["offset_cm_h"].to_numpy(dtype=float)
    for probe, point, number, own in same_key(zero_offset_nights):
        if usable[own.start] and probe in rows and point in columns:
            row, column = rows[probe], columns[point]
            offset[row, column, numbers[row] == number] = values[own.start] * CM_PER_HOUR
    known = (numbers >= 0)[:, None, :] | np.isfinite(velocity.values)
    return {
        "heat_pulse_velocity": velocity - offset,
        "unusable_offset": velocity.copy(data=np.isnan(offset) & known),
    }


def _at(values, window):
    """(..., night) of (..., night, window): the window numbered for each night."""
    place = np.broadcast_to(window, values.shape[:-1])[..., None]
    return np.take_along_axis(values, np.minimum(place, values.shape[-1] - 1), axis=-1)[..., 0]
