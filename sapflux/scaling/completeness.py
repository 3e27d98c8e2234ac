"""When a day, a month or a water year may be totalled, and the words for why it may not."""

from dataclasses import dataclass, fields

import numpy as np
from scipy.stats import ks_2samp

from sapflux.physics.atmosphere import PA_PER_KPA

ROUNDING = 1e-9  # a share that meets its limit on paper may miss it by rounding


@dataclass(frozen=True)
class Completeness:
    """How much of a period must be there.

    least_daylight : share of a day's potential radiation whose records must be there.
    longest_daylight_gap_h : longest daylight gap [h].
    least_records : share of all records of a day.
    least_month, least_water_year : share of the expected flux that must be measured; days are
        weighted with their potential radiation while in leaf.
    least_month_in_water_year : the same for each month of a water year.
    largest_deficit_difference : of the mean vapour pressure deficit of the valid days from that
        of all days, relative, where refused days are to be made up for.
    least_deficit_probability : of the Kolmogorov-Smirnov test between them.

    Source: common practice.
    """

    least_daylight: float = 0.9
    longest_daylight_gap_h: float = 2.0
    least_records: float = 0.8
    least_month: float = 0.8
    least_water_year: float = 0.8
    least_month_in_water_year: float = 0.5
    largest_deficit_difference: float = 0.1
    least_deficit_probability: float = 0.05

    @classmethod
    def defaults(cls):
        """name -> default of each rule."""
        return {field.name: field.default for field in fields(cls)}

    @classmethod
    def limits(cls):
        """name -> (lowest, highest) allowed."""
        ranges = dict.fromkeys(cls.defaults(), (0.0, 1.0))
        return ranges | {"longest_daylight_gap_h": (0.0, 24.0)}


def percent(share):
    """A share in words, cut so that it never looks larger than it is.

    >>> percent(0.79999)
    '79.9 %'
    """
    # 0.29 * 1000 is a little less than 290.
    return f"{np.floor(share * 1000.0 + 1e-6) / 10.0:g} %"


def day_totals(rate, sunlight, recorded, interval_s, rules):
    """Totals of days, and the reasons of those that may not be totalled.

    rate : (day, record) per second, NaN where absent; sunlight : (day, record) potential
    radiation of each record, any unit; recorded : (day, record) whether the record of the site
    spans it; interval_s : length of a record [s].

    A record is daylight where the sun is up above the atmosphere. What is missing of a day that
    may be totalled is made up for: the daylight part is divided by the share of potential
    radiation that its records cover, the night part by the share of its time. A day without any
    record at night is refused.

    Returns (total (day), NaN where refused; reasons, list of str, "" where valid).
    """
    there = np.isfinite(rate)
    value = np.where(there, rate, 0.0)
    day = sunlight > 0
    light = sunlight.sum(axis=1)
    covered = _share((sunlight * there).sum(axis=1), light)
    night, night_there = (~day).sum(axis=1), (~day & there).sum(axis=1)
    records = there.mean(axis=1)
    gap_h = _longest_run(day & ~there) * interval_s / 3600.0
    faults = {
        "light": covered < rules.least_daylight - ROUNDING,
        "gap": gap_h > rules.longest_daylight_gap_h + ROUNDING,
        "records": records < rules.least_records - ROUNDING,
        "night": (night > 0) & (night_there == 0),
        "edge": ~recorded.all(axis=1) & (records < 1.0),
    }
    refused = np.logical_or.reduce(list(faults.values()))
    with np.errstate(invalid="ignore", divide="ignore"):
        by_day = np.where(covered > 0, (value * day).sum(axis=1) / covered, 0.0)
        by_night = (value * ~day).sum(axis=1) / _share(night_there, night)
    total = np.where(refused, np.nan, (by_day + by_night) * interval_s)
    reasons = [""] * len(total)
    for at in np.flatnonzero(refused):
        own = {name for name, where in faults.items() if where[at]}
        hours = recorded[at].sum() * interval_s / 3600.0
        reasons[at] = _day_reason(own, covered[at], gap_h[at], records[at], hours, rules)
    return total, reasons


def _day_reason(faults, covered, gap_h, records, recorded_h, rules):
    if "edge" in faults:
        return f"the record spans {recorded_h:g} of 24 h of this day"
    if records == 0:
        return "no record has a value"
    words = []
    if "light" in faults:
        words.append(
            f"{percent(covered)} of the daylight is covered, "
            f"{percent(rules.least_daylight)} are needed"
        )
    if "gap" in faults:
        words.append(
            f"a daylight gap of {gap_h:g} h, at most {rules.longest_daylight_gap_h:g} h are allowed"
        )
    if "records" in faults:
        words.append(
            f"{percent(records)} of the records are there, "
            f"{percent(rules.least_records)} are needed"
        )
    if "night" in faults:
        words.append("no record at night")
    return "; ".join(words)


def _share(part, whole):
    """part / whole, 1 where there is no whole."""
    return np.divide(part, whole, out=np.ones(len(whole)), where=whole > 0)


def _longest_run(where):
    """Longest run of True along the last axis of (day, record)."""
    run = longest = np.zeros(len(where), dtype=int)
    for column in where.T:
        run = np.where(column, run + 1, 0)
        longest = np.maximum(longest, run)
    return longest


def fair_weather_fault(deficit, valid, rules):
    """Why the valid days may not stand for the refused ones; "" where they may.

    deficit : (day) mean vapour pressure deficit [Pa], NaN where not given; valid : (day) bool.
    Data go missing in storms, so the days that are left may be drier than the month was.

    Source: two-sample test of Kolmogorov & Smirnov; the use is common practice.
    """
    missing = int((~valid).sum())
    if not missing:
        return ""
    some = f"{missing} day{'s' * (missing > 1)} missing"
    given = np.isfinite(deficit)
    if not given.any():
        return f"{some} and no deficit to check for fair-weather bias"
    blind = int((~valid & ~given).sum())
    if blind:
        return f"{some}, {blind} of them without a deficit to check for fair-weather bias"
    chosen, every = deficit[valid & given], deficit[given]
    if not len(chosen):
        return f"{some} and no deficit on the valid days to check for fair-weather bias"
    mean, mean_of_all = chosen.mean(), every.mean()
    if abs(mean - mean_of_all) > rules.largest_deficit_difference * abs(mean_of_all) + ROUNDING:
        return (
            f"{some}, and the mean deficit of the valid days is {mean / PA_PER_KPA:.3f} kPa, "
            f"of all days {mean_of_all / PA_PER_KPA:.3f} kPa: more than "
            f"{percent(rules.largest_deficit_difference)} apart"
        )
    probability = ks_2samp(chosen, every).pvalue
    if probability < rules.least_deficit_probability:
        return (
            f"{some}, and the deficits of the valid days are not distributed as those of all days "
            f"(p {probability:.3f}, at least {rules.least_deficit_probability:g} is needed)"
        )
    return ""


def measured_fault(measured, least):
    """Why too little of the expected flux is measured; "" where it is enough. NaN is enough."""
    if measured < least - ROUNDING:
        return f"{percent(measured)} of the expected flux is measured, {percent(least)} are needed"
    return ""
