"""What a period amounts to for a species or a stand: its total, or why there is none.

A part is a dict: total [mm], NaN where it may not be given; reason, in words; the weights of
`WEIGHTS`, sums of potential radiation [J m-2] as in `Days`; trees, the fewest behind a value.
`picked` are places of days in `Days`.
"""

import numpy as np

from sapflux.scaling.completeness import fair_weather_fault, measured_fault, percent

WEIGHTS = ("expected", "measured", "filled", "modelled", "light", "assumed")


def share_of(part, whole):
    """part / whole, NaN where there is no whole."""
    return part / whole if whole > 0 else np.nan


def _parts(days, stratum, picked):
    """Sums of the weights of the picked days; what was measured counts on valid days only."""
    valid = days.valid[stratum, picked]
    of_stratum = {
        "expected": days.expected[stratum, picked].sum(),
        "light": days.light[picked].sum(),
        "assumed": days.assumed[stratum, picked].sum(),
    }
    for name in ("measured", "filled", "modelled"):
        of_stratum[name] = getattr(days, name)[stratum, picked][valid].sum()
    trees = days.trees[stratum, picked][valid]
    return of_stratum | {"trees": int(trees[trees > 0].min()) if (trees > 0).any() else 0}


def plain_period(days, stratum, picked):
    """The part of a single day as it is, its shares those of the day, valid or not."""
    at = picked[0]
    return {
        "total": float(days.total[stratum, at]),
        "reason": days.reasons[stratum][at],
        "light": days.light[at],
        "trees": int(days.trees[stratum, at]),
        **{n: getattr(days, n)[stratum, at] for n in WEIGHTS if n != "light"},
    }


def sum_of(days, stratum, used, count):
    """The part of the `used` days among `count` days; nothing is made up for."""
    part = _parts(days, stratum, used)
    part["total"] = float(days.total[stratum, used].sum()) if len(used) else np.nan
    part["reason"] = "" if len(used) else f"none of {count} days may be totalled"
    return part


def _made_up(days, stratum, picked):
    """Sum of the valid days over their share of the expected flux; NaN where that is none.

    Dormant days are not scaled.
    """
    valid = days.valid[stratum, picked]
    total, expected = days.total[stratum, picked], days.expected[stratum, picked]
    if valid.all():
        return float(total.sum())
    if (expected[~valid] <= 0).any() or expected[valid].sum() <= 0:
        return np.nan
    leaf = expected > 0
    dormant = total[valid & ~leaf].sum()
    return float(dormant + total[valid & leaf].sum() * (expected.sum() / expected[valid].sum()))


def month_period(days, stratum, picked):
    """The part of a month, its refused days made up for where that may be done."""
    part = _parts(days, stratum, picked)
    measured = share_of(part["measured"], part["expected"])
    faults = [measured_fault(measured, days.rules.least_month)]
    return _finish(days, stratum, picked, part, faults, _made_up(days, stratum, picked))


def year_period(days, stratum, picked):
    """The part of a water year: the sum of its months, each made up for on its own."""
    part = _parts(days, stratum, picked)
    rules = days.rules
    faults = [measured_fault(share_of(part["measured"], part["expected"]), rules.least_water_year)]
    months = days.dates[picked].astype("datetime64[M]")
    total, poor = 0.0, []
    for month in np.unique(months):
        own = picked[months == month]
        weights = _parts(days, stratum, own)
        measured = share_of(weights["measured"], weights["expected"])
        if measured_fault(measured, rules.least_month_in_water_year):
            poor.append(f"{month} {percent(measured)}")
        total += _made_up(days, stratum, own)
    if poor:
        faults.append(
            f"months with too little measured, {percent(rules.least_month_in_water_year)} are "
            f"needed: {', '.join(poor)}"
        )
    return _finish(days, stratum, picked, part, faults, total)


def _finish(days, stratum, picked, part, faults, total):
    """The part with its total, or with why there is none."""
    valid = days.valid[stratum, picked]
    missing = int((~valid).sum())
    faults = [fault for fault in faults if fault]
    if not faults and missing:
        if np.isnan(total):
            faults = [f"{missing} of {len(picked)} days missing and no expected flux to weigh them"]
        else:
            leaf = days.expected[stratum, picked] > 0
            weather = fair_weather_fault(days.deficit[picked][leaf], valid[leaf], days.rules)
            faults = [weather] if weather else []
    if faults:
        return part | {"total": np.nan, "modelled": 0.0, "reason": "; ".join(faults)}
    reason = f"{missing} of {len(picked)} days made up for" if missing else ""
    # The rest of the expected flux was made up for: within days, and for refused days.
    modelled = max(part["expected"] - part["measured"] - part["filled"], 0.0)
    return part | {"total": total, "modelled": modelled, "reason": reason}


def stand_of(days, strata, parts):
    """The part of a stand from its species: sums, and weights by sapwood area per ground."""
    ground = days.ground[strata]
    whole = {
        name: float(sum(share * part[name] for share, part in zip(ground, parts, strict=True)))
        for name in WEIGHTS
    }
    whole["trees"] = sum(part["trees"] for part in parts)
    # NaN of any species makes the stand NaN.
    whole["total"] = float(sum(part["total"] for part in parts))
    refused = np.isnan(whole["total"])
    if refused:
        whole["modelled"] = 0.0
    reasons = {
        days.species[n]: part["reason"]
        for n, part in zip(strata, parts, strict=True)
        if part["reason"] and (np.isnan(part["total"]) or not refused)
    }
    whole["reason"] = _stand_reason(reasons, len(parts), refused)
    return whole


def _stand_reason(reasons, count, refused):
    """The reason of a stand of `count` species, from those of its species that have one.

    One reason is given whole, with the names of the species if it is not that of all; of several
    only the names are given, for together they would fill a page.
    """
    names, different = ", ".join(reasons), sorted(set(reasons.values()))
    if len(different) > 1:
        what = "refused for" if refused else "days made up for in"
        return f"{what} {names}: see their rows"
    reason = "".join(different)
    return reason if len(reasons) in (0, count) else f"{names}: {reason}"
