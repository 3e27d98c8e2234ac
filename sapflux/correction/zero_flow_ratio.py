"""Zero flow of heat ratio: the ratio of the rises that the needles show at rest."""

from typing import Literal

import numpy as np
import xarray as xr

from sapflux.correction.night_table import laid_on, lines_of, wanting
from sapflux.correction.nights import reach_s
from sapflux.correction.zero_ratio_nights import (
    fit_ratio,
    ratio_at_rest,
    reading_time,
    zero_ratio_candidates,
)
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.schema import RECORD
from sapflux.stage import stage


@stage(
    chain="heat_ratio",
    makes="zero_flow_log_ratio",
    flags="unusable_offset",
    table="zero_ratio_nights",
    summarise=zero_ratio_candidates,
    fit=fit_ratio,
    reach_s=reach_s,
    method_needs={
        "quiet_nights": ("vapour_pressure_deficit",),
        "reference_dates": ("at_rest",),
    },
    limits={
        "averaging_h": (0.25, 6.0),
        "least_records_share": (0.1, 1.0),
        "highest_deficit_kPa": (0.0, 1.0),
        "frost_below_degC": (-30.0, 10.0),
        "fewest_nights": (1, 100),
        "widest_spread_cm_h": (0.0, 10.0),
        "least_slope_probability": (0.0, 1.0),
        "smallest_rise_cm_h": (0.0, 10.0),
        "largest_offset_cm_h": (0.0, 10.0),
        "largest_misplacement_mm": (0.0, 5.0),
    },
)
def zero_flow_ratio(
    log_heat_ratio,
    zero_ratio_nights,
    thermal_diffusivity,
    spacing_downstream,
    spacing_upstream,
    window_from,
    window_to,
    pulse_length,
    installation,
    /,
    *,
    method: Literal["quiet_nights", "all_nights", "reference_dates"] = "quiet_nights",
    averaging_h=2.0,
    least_records_share=0.75,
    highest_deficit_kPa=0.1,
    frost_below_degC=-0.5,
    fewest_nights=5,
    widest_spread_cm_h=0.5,
    least_slope_probability=0.01,
    smallest_rise_cm_h=0.3,
    largest_offset_cm_h=5.0,
    largest_misplacement_mm=1.5,
):
    """Log of the ratio of the rises that the needles show at rest.

    One zero for a whole installation: the median over proven nights without flow, each the mean
    over the last `averaging_h` before sunrise. It is kept as the velocity that the needles, where
    they are said to stand, show at rest: so it holds for a diffusivity that changes in the season,
    as needles out of place do. Needles that are known to stand unequally far from the heater show
    a ratio at rest that is no error.

    Parameters
    ----------
    log_heat_ratio : (probe, point, time) [1]
        Log of downstream over upstream rise.
    zero_ratio_nights : table
        One row a probe, point, installation and night: `start` (UTC, true solar noon before it),
        `time` (UTC, middle of the mean), velocity_cm_h (that the needles show), mean_deficit_kPa,
        records, accepted, reason in words, misplacement_mm (of one needle, that shows as much);
        and of the installation offset_cm_h and spread_cm_h (median and interquartile range of the
        accepted nights), slope_cm_h_per_kPa against the deficit, slope_probability, nights,
        usable, verdict in words.
    thermal_diffusivity : (probe) [m2 s-1]
        Of fresh sapwood; may change with time, as all of these.
    spacing_downstream, spacing_upstream : (probe) [m]
        From the heater to the needles, as given.
    window_from, window_to : (probe) [s]
        The reading window, counted from the end of heating.
    pulse_length : (probe) [s]
        Length of the heating.
    installation : (probe, time) [1]
        Each has its own zero.
    method : text
        "quiet_nights" accepts a night by its vapour pressure deficit; "all_nights" accepts every
        one, and so assumes that no sap flows before dawn; "reference_dates" those for which
        somebody vouches, as of cut or dormant stems. Own judgement.
    averaging_h : float [h]
        Length of the mean. Common practice: at least 2 h.
    least_records_share : float [1]
        Share of the records of a mean that must be there. Own judgement.
    highest_deficit_kPa : float [kPa]
        Of "quiet_nights", highest mean vapour pressure deficit. Common practice.
    frost_below_degC : float [degC]
        A night with colder air after true solar midnight never counts: wood that freezes or thaws
        keeps its temperature. Own judgement.
    fewest_nights : int [1]
        Accepted nights that a zero needs. Common practice.
    widest_spread_cm_h : float [cm h-1]
        Highest interquartile range of the accepted nights. Own judgement.
    least_slope_probability : float [1]
        Below this, a rise with the deficit over the accepted nights is flow at night, not for
        "reference_dates". Common practice asks for no significant slope; the level is own
        judgement.
    smallest_rise_cm_h : float [cm h-1]
        A line that rises by less over the deficits of the accepted nights is let pass, however
        sure: many nights make the least flow significant, and half of it is what the median then
        errs by. Own judgement.
    largest_offset_cm_h : float [cm h-1]
        Beyond this the needles stand too far askew. Common practice.
    largest_misplacement_mm : float [mm]
        Likewise, as the way that one needle must have been moved. Own judgement.

    Returns
    -------
    zero_flow_log_ratio : (probe, point, time) [1]
        NaN where the installation has no usable zero.
    unusable_offset : (probe, point, time) [bool]
        Where that is so while a probe is installed.

    Source: Burgess et al. (2001), Tree Physiology 21 (readings at zero flow); the conditions are
    common practice.
    """
    log_ratio = log_heat_ratio.transpose(*RECORD)
    numbers = laid_on(log_ratio, installation)
    offset = np.full(log_ratio.shape, np.nan)
    usable = zero_ratio_nights["usable"].to_numpy(dtype=bool)
    values = zero_ratio_nights["offset_cm_h"].to_numpy(dtype=float)
    for place, here, own in lines_of(zero_ratio_nights, log_ratio, numbers):
        if usable[own.start]:
            offset[place][here] = values[own.start] * CM_PER_HOUR
    ratio = xr.apply_ufunc(
        ratio_at_rest,
        log_ratio.copy(data=offset),
        spacing_downstream,
        spacing_upstream,
        thermal_diffusivity,
        reading_time(window_from, window_to, pulse_length),
    ).transpose(*RECORD)
    return {
        "zero_flow_log_ratio": ratio,
        "unusable_offset": wanting(ratio.values, log_ratio, numbers),
    }
