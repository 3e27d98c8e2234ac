"""Zero flow of heat dissipation: the temperature difference that the needle would show at rest."""

from typing import Literal

import numpy as np

from sapflux.correction.baseline_line import baseline_line
from sapflux.correction.night_table import laid_on, lines_of, wanting
from sapflux.correction.nights import reach_s
from sapflux.correction.zero_flow_methods import fit_baseline
from sapflux.correction.zero_flow_nights import zero_flow_candidates
from sapflux.schema import RECORD
from sapflux.stage import stage


@stage(
    chain="heat_dissipation",
    makes="zero_flow_difference",
    flags="no_baseline",
    table="zero_flow_nights",
    summarise=zero_flow_candidates,
    fit=fit_baseline,
    reach_s=reach_s,
    method_needs={
        "quiet_nights": ("vapour_pressure_deficit",),
        "deficit_regression": ("vapour_pressure_deficit",),
        "reference_dates": ("at_rest",),
        "diameter_plateau": ("stem_diameter_change",),
    },
    limits={
        "averaging_h": (0.25, 6.0),
        "least_records_share": (0.1, 1.0),
        "highest_deficit_kPa": (0.0, 1.0),
        "highest_variation": (0.0, 0.1),
        "window_d": (1, 31),
        "regime_d": (3, 93),
        "fewest_nights": (3, 31),
        "least_deficit_range_kPa": (0.0, 3.0),
        "highest_swelling_um_h": (0.0, 100.0),
        "farthest_below_um": (0.0, 1000.0),
        "humidity_bias": (0.0, 0.2),
        "before_h": (0.0, 11.0),
        "frost_below_degC": (-30.0, 10.0),
        "largest_power_change": (0.0, 1.0),
        "wet_noise_ratio": (1.0, 1000.0),
        "fewest_a_month": (0.0, 30.0),
        "farthest_d": (0.0, 366.0),
        "widest_d": (0.0, 366.0),
    },
    unverified=(
        "conditions of quiet nights (Oishi et al. 2008)",
        "rule of the double regression (Lu et al. 2004)",
    ),
)
def zero_flow_difference(
    heated_difference,
    zero_flow_nights,
    installation,
    /,
    *,
    method: Literal[
        "quiet_nights",
        "nightly_maximum",
        "moving_window",
        "double_regression",
        "deficit_regression",
        "reference_dates",
        "diameter_plateau",
    ] = "quiet_nights",
    averaging_h=2.0,
    least_records_share=0.75,
    highest_deficit_kPa=0.05,
    highest_variation=0.005,
    window_d=7,
    regime_d=21,
    fewest_nights=5,
    least_deficit_range_kPa=0.2,
    highest_swelling_um_h=5.0,
    farthest_below_um=10.0,
    humidity_bias=0.02,
    before_h=6.0,
    frost_below_degC=-0.5,
    largest_power_change=0.01,
    wet_noise_ratio=5.0,
    fewest_a_month=3.0,
    farthest_d=21.0,
    widest_d=42.0,
):
    """Temperature difference that the heated needle would show without sap flow.

    Each night gives a candidate: the highest mean over `averaging_h` between true solar midnight
    and sunrise, of the windows that meet the conditions of the method. The baseline is linear in
    time between the accepted nights of one installation.

    quiet_nights : a candidate counts only if the air was near saturation and the difference had
        come to rest; flow is allowed on the other nights. The published rule wants a 2 h mean
        deficit below 0.05 kPa and a standard deviation of the 4 highest differences below 0.5 %
        of their mean. Here the deviation and the value are those of all records of the window:
        the highest few of many noisy records lie above the true difference, the more so the
        noisier the probe, and are close to one another by selection; the mean over 2 h has little
        of that bias.
    nightly_maximum : every night counts, so flow is taken to stop every night: at a true night
        index of 0.05 it gives 75 % of the flux density of a day index of 0.3.
    moving_window : the highest candidate of the nights around.
    double_regression : a line through the candidates of the nights around against the day; those
        on or above it are kept; the line through these, at the night. Flow must stop on about
        every other night.
    deficit_regression : a line through the candidates of the nights around against the deficit of
        their windows; its value at no deficit. Flow at night must hang on the deficit in the same
        way on all of them, so wet and dry soil must not share a regime.
    reference_dates : windows that lie wholly within dates of references.csv at which no sap flows
        (kind dormant or cut). The dates must hold a night after midnight.
    diameter_plateau : windows in which the stem has stopped swelling and is at its highest between
        midnight and sunrise, so that refilling has ended.

    Whatever the method, a night never counts if somebody was at the logger, after frost, if the
    heater power changed, or if the connector got wet: rain, with more noise than the probe shows
    as a rule. Rain alone does not bar a night: the humid ones are the best. What is not logged
    bars nothing.

    Parameters
    ----------
    heated_difference : (probe, point, time) [K]
        Heated minus reference needle, screened.
    zero_flow_nights : table
        One row a probe, point, installation and night: `start` (UTC, true solar noon before it),
        `time` (UTC, middle of the candidate), difference_K, mean_deficit_kPa, variation (standard
        deviation over mean), records (in the candidate), accepted, reason in words. Of the night:
        noise_K (standard deviation from record to record), lowest_temperature_degC (of the stem
        where logged, else of the air), power_change (highest over lowest heater power, less one),
        visited, rained. Of the candidate, by "diameter_plateau": swelling_um_h, below_highest_um.
        accepted_if_drier, accepted_if_wetter : the verdict were the relative humidity lower or
        higher by `humidity_bias`; it asks for the air temperature, without which it is the
        verdict itself. baseline_K : the value that the baseline takes at `time`. baseline_error_K
        : its standard error; of the line's value by the two regressions, else how far an accepted
        night lies from the line between its neighbours (from 5 accepted nights on).
        admissible : whether the installation has nights enough.
        Read for it where the site has them: vapour_pressure_deficit [Pa], air_temperature,
        stem_temperature [K], precipitation [kg m-2], heater_voltage [V], stem_diameter_change
        [m], visited (visits.csv) and at_rest (references.csv).
    installation : (probe, time) [1]
        The baseline never reaches across it.
    method : text
        Which nights count, see above. The default is the one that allows for flow at night
        without asking for more than the weather. Own judgement.
    averaging_h : float [h]
        Length of the mean. Source: Oishi et al. (2008).
    least_records_share : float [1]
        Share of the records of a mean that must be there. Own judgement.
    highest_deficit_kPa : float [kPa]
        Of "quiet_nights", highest mean vapour pressure deficit. Source: Oishi et al. (2008).
    highest_variation : float [1]
        Of "quiet_nights", highest standard deviation over mean. Source: Oishi et al. (2008).
    window_d : int [d]
        Of "moving_window" and "double_regression", nights up to half of it (rounded down) before
        and after are looked at. Own judgement among the 3 to 15 days in use; 7 to 11 for the
        double regression (Lu et al. 2004).
    regime_d : int [d]
        Of "deficit_regression", the same. Own judgement: long enough for dry and humid nights,
        short enough for the soil to stay alike.
    fewest_nights : int [1]
        Of the two regressions, candidates that a line needs. Own judgement.
    least_deficit_range_kPa : float [kPa]
        Of "deficit_regression", least range of the deficit within a regime. Own judgement.
    highest_swelling_um_h : float [um h-1]
        Of "diameter_plateau", fastest swelling within the window: above growth at night, below
        refilling. Own judgement.
    farthest_below_um : float [um]
        Of "diameter_plateau", farthest mean distance from the highest diameter between midnight
        and sunrise. Own judgement.
    humidity_bias : float [1]
        Bias of the relative humidity for accepted_if_drier and accepted_if_wetter. Common
        practice: the accuracy that makers state.
    before_h : float [h]
        Frost and rain so long before midnight still count. Common practice.
    frost_below_degC : float [degC]
        A night with a temperature below this does not count. Common practice.
    largest_power_change : float [1]
        Largest relative change of heater power within a night. Common practice: 1 % of power is
        1 % of the difference, and 7 % of the flux density at an index of 0.2.
    wet_noise_ratio : float [1]
        After rain, noise above so many times the median of the probe's nights means a wet
        connector. Common practice.
    fewest_a_month : float [1]
        Accepted nights that each 30 nights with records must have on average for the method to be
        admissible. It is used all the same. Common practice.
    farthest_d : float [d]
        Before the first and after the last accepted night, and either side of a span that is not
        bridged, the baseline is held constant up to this far. Own judgement.
    widest_d : float [d]
        Accepted nights further apart than this are not bridged. Own judgement.

    Returns
    -------
    zero_flow_difference : (probe, point, time) [K]
        NaN where no accepted night is near enough.
    no_baseline : (probe, point, time) [bool]
        Where it is NaN while a probe is installed.

    Source: Granier (1987), Tree Physiology 3 (nightly maximum); Lu, Urban & Zhao (2004), Acta
    Bot. Sin. 46 (double regression, from memory); Oishi, Oren & Stoy (2008), Agric. For.
    Meteorol. 148 (conditions of quiet nights, from memory); the others are common practice.
    """
    heated = heated_difference.transpose(*RECORD)
    numbers = laid_on(heated, installation)
    stamps = heated["time"].values.astype("datetime64[ns]").astype(np.int64)
    baseline = np.full(heated.shape, np.nan)
    nights = zero_flow_nights[np.isfinite(zero_flow_nights["baseline_K"].to_numpy(dtype=float))]
    knots = nights["time"].to_numpy().astype("datetime64[ns]").astype(np.int64)
    values = nights["baseline_K"].to_numpy(dtype=float)
    for place, here, own in lines_of(nights, heated, numbers):
        line = baseline_line(stamps[here], knots[own], values[own], farthest_d, widest_d)
        baseline[place][here] = line
    return {
        "zero_flow_difference": heated.copy(data=baseline),
        "no_baseline": wanting(baseline, heated, numbers),
    }
