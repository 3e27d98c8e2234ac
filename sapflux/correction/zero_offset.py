"""Zero offset of heat ratio: the velocity that a probe shows at rest, and its removal."""

from typing import Literal

import numpy as np

from sapflux.correction.night_table import (
    candidates,
    chosen,
    laid_on,
    lines_of,
    no_rows,
    same_key,
    wanting,
    without_silent,
)
from sapflux.correction.nights import reach_s
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.schema import RECORD
from sapflux.stage import stage

COLUMNS = ("velocity_cm_h", "mean_deficit_kPa")


def zero_offset_candidates(
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

    def before_sunrise(mean, _variation, mean_deficit, last):
        window = np.broadcast_to(last, mean.shape[:-1])
        accepted = np.isfinite(chosen(mean, window))
        if method == "quiet_nights":
            accepted &= chosen(mean_deficit, window) <= highest_deficit_kPa
        return window, accepted

    return candidates(
        heat_pulse_velocity.transpose(*RECORD) / CM_PER_HOUR,
        installation,
        solar_elevation,
        solar_time,
        vapour_pressure_deficit,
        before_sunrise,
        COLUMNS,
        averaging_h=averaging_h,
        least_records_share=least_records_share,
        highest_deficit_kPa=highest_deficit_kPa,
    )


def fit_offset(rows, /, *, fewest_nights, widest_spread_cm_h, largest_offset_cm_h):
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
    summarise=zero_offset_candidates,
    fit=fit_offset,
    reach_s=reach_s,
    method_needs={"quiet_nights": ("vapour_pressure_deficit",)},
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
        one, and so assumes that no sap flows before dawn. Own judgement.
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
    usable = zero_offset_nights["usable"].to_numpy(dtype=bool)
    values = zero_offset_nights["offset_cm_h"].to_numpy(dtype=float)
    for place, here, own in lines_of(zero_offset_nights, velocity, numbers):
        if usable[own.start]:
            offset[place][here] = values[own.start] * CM_PER_HOUR
    return {
        "heat_pulse_velocity": velocity - offset,
        "unusable_offset": wanting(offset, velocity, numbers),
    }
