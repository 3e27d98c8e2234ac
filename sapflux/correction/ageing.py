"""Ageing of heat dissipation probes: sensitivity lost with age, by re-installed controls."""

from typing import Literal

import numpy as np
import pandas as pd
import xarray as xr
from scipy.stats import t as student

from sapflux.correction.control_pairs import independent, pairs_of
from sapflux.correction.night_table import laid_on
from sapflux.correction.nights import DAY_NS, SECOND_NS
from sapflux.physics.atmosphere import PA_PER_KPA
from sapflux.schema import RECORD
from sapflux.stage import stage

DAY_S = 86_400.0
YEAR_S = 365.25 * DAY_S
REACH_S = 25 * 3600.0  # a solar day, with an hour for the equation of time
DAYS = {
    "probe": object, "point": np.int64, "installation": np.int64, "start": "datetime64[ns]",
    "group": object, "age_d": np.float64, "index": np.float64, "records": np.int64,
}  # fmt: skip
CONTROLS = {
    "probe": object, "point": np.int64, "installation": np.int64, "reference_days": np.int64,
    "oldest_age_d": np.float64, "control_probe": object, "control_installation": np.float64,
    "common_days": np.int64, "age_difference_d": np.float64, "ln_ratio": np.float64,
    "pairs": np.int64, "rate_per_year": np.float64, "rate_error_per_year": np.float64,
    "applied": bool, "verdict": object,
}  # fmt: skip
# Days beyond the age of the oldest probe with a control that its rate still holds. Own judgement.
BEYOND_D = 30.0
NO_CONTROLS = "no re-installed controls: a fall of sensitivity cannot be told from drought"


def reference_days(
    flow_index,
    installation,
    installed_age,
    solar_time,
    probe_tree,
    probe_stratum=None,
    vapour_pressure_deficit=None,
    shortwave_radiation=None,
    heating_on=None,
    /,
    *,
    method,
    lowest_deficit_kPa,
    highest_deficit_kPa,
    least_radiation_W_m2,
    fewest_records,
):
    """One row a probe, point, installation and solar day of the block: its mean reference index.

    start : UTC of the true solar midnight before; group : tree or stratum of the probe, those
    heated in cycles (`heating_on` set) apart; age_d : mean age of the records [d]; index : mean
    flow index of the reference records; records : their number. Days with fewer than
    `fewest_records`, or without a positive index, have no row.
    """
    index = flow_index.transpose(*RECORD)
    groups = probe_tree if method == "same_tree" else probe_stratum
    if vapour_pressure_deficit is None or groups is None:
        return _empty(DAYS)
    deficit = vapour_pressure_deficit.values / PA_PER_KPA
    reference = (deficit >= lowest_deficit_kPa) & (deficit <= highest_deficit_kPa)
    if shortwave_radiation is not None:
        reference &= shortwave_radiation.values > least_radiation_W_m2
    stamps = index["time"].values.astype("datetime64[ns]").astype(np.int64)
    since = np.rint(solar_time.values * (3600 * SECOND_NS)).astype(np.int64)
    midnight = stamps - since
    number = np.rint((midnight - midnight[0]) / DAY_NS).astype(np.int64)
    first = np.flatnonzero(np.diff(number, prepend=-1))
    # The second at which a day starts is that of its first record, in every block that holds it.
    start = (midnight[first] // SECOND_NS * SECOND_NS).astype("datetime64[ns]")
    day = np.searchsorted(number[first], number)
    numbers = laid_on(index, installation)
    age = laid_on(index, installed_age) / DAY_S
    cycled = np.zeros(age.shape, bool)
    if heating_on is not None:
        cycled = np.isfinite(laid_on(index, heating_on))
    parts = []
    for place, probe in enumerate(index["probe"].values):
        for point, label in enumerate(index["point"].values):
            own = index.values[place, point]
            for current in np.unique(numbers[place][numbers[place] >= 0]):
                used = reference & np.isfinite(own) & (numbers[place] == current)
                count = np.bincount(day[used], minlength=len(first))
                size = np.maximum(count, 1)
                mean = np.bincount(day[used], own[used], len(first)) / size
                ages = np.bincount(day[used], age[place][used], len(first)) / size
                met = np.flatnonzero((count >= fewest_records) & (mean > 0.0))
                # The index of a heating cycle is another than that of heat that is never cut.
                heated = " in cycles" if (cycled[place] & (numbers[place] == current)).any() else ""
                columns = {
                    "probe": probe, "point": label, "installation": current, "start": start[met],
                    "group": f"{groups.values[place]}{heated}", "age_d": ages[met],
                    "index": mean[met], "records": count[met],
                }  # fmt: skip
                parts.append(pd.DataFrame(columns).astype(DAYS))
    parts = [part for part in parts if len(part)]
    return pd.concat(parts, ignore_index=True) if parts else _empty(DAYS)


def without_controls(
    probe, installation, installed_age, probe_tree, probe_stratum=None, /, *,
    method, least_age_difference_d,
):  # fmt: skip
    """The table where no probe has a control by its dates, else None.

    installation, installed_age : (probe, time), on one record a day.
    """
    groups = probe_tree if method == "same_tree" else probe_stratum
    numbers = installation.values
    age = np.where(numbers >= 0, installed_age.values / DAY_S, np.nan)
    for group in np.unique([] if groups is None else groups.values):
        own = age[groups.values == group]
        seen = own[:, np.isfinite(own).any(axis=0)]
        if seen.size and (np.nanmax(seen, 0) - np.nanmin(seen, 0)).max() >= least_age_difference_d:
            return None
    rows = [
        {"probe": str(name), "point": 1, "installation": number, "reference_days": 0,
         "oldest_age_d": np.nanmax(age[place][numbers[place] == number]), "control_probe": "",
         "common_days": 0, "pairs": 0, "applied": False, "verdict": _verdict([])}
        for place, name in enumerate(probe.values)
        for number in np.unique(numbers[place][numbers[place] >= 0])
    ]  # fmt: skip
    return pd.DataFrame(rows, columns=list(CONTROLS)).astype(CONTROLS)


def fit_rate(
    rows, /, *, least_age_difference_d, fewest_common_days, fewest_controls, least_confidence
):
    """The table of installations with their controls, and the rate of ageing that these give."""
    if not len(rows):
        return _empty(CONTROLS)
    pairs = independent(pairs_of(rows, least_age_difference_d, fewest_common_days))
    older = {pair.older: pair for pair in pairs}
    rate, error = _rate(pairs)
    sure = len(pairs) > 1 and rate > student.ppf((1 + least_confidence) / 2, len(pairs) - 1) * error
    applied = len(pairs) >= fewest_controls and sure
    verdict = _verdict(pairs, rate, error, applied, fewest_controls, least_confidence)
    table = []
    for key, own in rows.groupby(["probe", "point", "installation"], sort=True):
        pair = older.get(key)
        table.append({
            "probe": key[0],
            "point": key[1],
            "installation": key[2],
            "reference_days": len(own),
            "oldest_age_d": own["age_d"].max(),
            "control_probe": pair.younger[0] if pair else "",
            "control_installation": pair.younger[2] if pair else np.nan,
            "common_days": pair.days if pair else 0,
            "age_difference_d": pair.age_difference_d if pair else np.nan,
            "ln_ratio": pair.ln_ratio if pair else np.nan,
            "pairs": len(pairs),
            "rate_per_year": rate,
            "rate_error_per_year": error,
            "applied": applied,
            "verdict": verdict,
        })  # fmt: skip
    return pd.DataFrame(table).astype(CONTROLS)


def _rate(pairs):
    """(rate, standard error) [per year]: least squares through the origin of -ln ratio on age."""
    if not pairs:
        return np.nan, np.nan
    years = np.array([pair.age_difference_d for pair in pairs]) * DAY_S / YEAR_S
    loss = -np.array([pair.ln_ratio for pair in pairs])
    rate = (loss * years).sum() / (years**2).sum()
    if len(pairs) < 2:
        return rate, np.nan
    scatter = ((loss - rate * years) ** 2).sum() / (len(pairs) - 1)
    return rate, np.sqrt(scatter / (years**2).sum())


def _verdict(pairs, rate=None, error=None, applied=False, fewest_controls=0, confidence=0.0):
    if not pairs:
        return f"{NO_CONTROLS}; not corrected"
    number = f"{len(pairs)} control{'s' * (len(pairs) > 1)}"
    if len(pairs) < fewest_controls:
        return f"{number}, {fewest_controls} needed: not corrected"
    found = f"{rate:.3f} +- {error:.3f} per year from {number}"
    if not applied:
        return f"{found}, not beyond its error at a confidence of {confidence:.0%}: not corrected"
    return f"{found}: corrected"


def _empty(types):
    return pd.DataFrame({name: pd.Series(dtype=kind) for name, kind in types.items()})


@stage(
    chain="heat_dissipation",
    makes="flow_index",
    table="ageing_controls",
    summarise=reference_days,
    fit=fit_rate,
    reach_s=lambda _settings: REACH_S,
    settled=without_controls,
    method_needs={"same_stand_and_species": ("probe_stratum",)},
    limits={
        "lowest_deficit_kPa": (0.0, 5.0),
        "highest_deficit_kPa": (0.1, 10.0),
        "least_radiation_W_m2": (0.0, 1200.0),
        "fewest_records": (1, 100),
        "least_age_difference_d": (1.0, 3650.0),
        "fewest_common_days": (1, 366),
        "fewest_controls": (2, 100),
        "least_confidence": (0.5, 0.999),
    },
)
def ageing(
    flow_index,
    ageing_controls,
    installed_age,
    /,
    *,
    method: Literal["same_tree", "same_stand_and_species"] = "same_tree",
    lowest_deficit_kPa=0.8,
    highest_deficit_kPa=1.5,
    least_radiation_W_m2=500.0,
    fewest_records=3,
    least_age_difference_d=90.0,
    fewest_common_days=10,
    fewest_controls=3,
    least_confidence=0.95,
):
    """Flow index freed of the sensitivity that probes lose with age, where controls show how much.

    Wood reacts to a needle, and the same flow then cools it less. In one record that looks like
    drought; only a probe newly installed beside the old one tells them apart. Each older
    installation is compared with one of the same kind of heating, at least
    `least_age_difference_d` younger, on the days with reference weather that both have. The
    logarithm of the ratio of their indices is the rate of ageing times the difference in age, but
    for the places of the needles, whose effects are taken as random with mean zero. An installation
    counts in one pair only, so that pairs are independent; those of the largest difference in age
    are taken first. The rate is that of a least-squares line through the origin, its error from
    the scatter among pairs. One rate holds for all probes: index * exp(rate * age), with no age
    more than 30 days above that of the oldest probe that had a control.

    Without enough controls, or where the rate is not beyond its error, nothing is changed.

    Parameters
    ----------
    flow_index : (probe, point, time) [1]
        As measured.
    ageing_controls : table
        One row a probe, point and installation with reference days, or where dates rule out every
        control one a probe and installation, without looking for such days: reference_days,
        oldest_age_d, the control that it was compared with, if any (control_probe,
        control_installation, common_days, age_difference_d, ln_ratio: mean logarithm of the older
        index over the younger), and of all probes pairs, rate_per_year, rate_error_per_year,
        applied, verdict in words.
    installed_age : (probe, time) [s]
        Since the installation.
    method : text
        Where a control may sit: "same_tree", or "same_stand_and_species", whose trees must then
        differ at random. Own judgement.
    lowest_deficit_kPa : float [kPa]
        Least vapour pressure deficit of reference records. Common practice.
    highest_deficit_kPa : float [kPa]
        Highest vapour pressure deficit of reference records. Common practice.
    least_radiation_W_m2 : float [W m-2]
        Shortwave radiation of reference records must be above, where it is logged. Common practice.
    fewest_records : int [1]
        Reference records that a day needs. Own judgement.
    least_age_difference_d : float [d]
        Between an older probe and its control. Own judgement: at 0.1 to 0.3 a year the loss is
        then several per cent.
    fewest_common_days : int [d]
        Reference days that a pair needs in common. Own judgement.
    fewest_controls : int [1]
        Independent pairs that a rate needs. Own judgement.
    least_confidence : float [1]
        Confidence, by Student's t of the pairs, that the rate is not zero. A rate that just passes
        is likely too large: with few pairs it is by chance that it passed. Common practice.

    Returns
    -------
    flow_index : (probe, point, time) [1]
        As a new probe would have it.

    Source: Moore et al. (2010), Tree Physiology 30, and Wiedemann et al. (2016), Trees 30, for
    the loss of sensitivity (0.05 to 0.3 a year, from memory); the estimate is an own derivation.
    """
    if not len(ageing_controls) or not ageing_controls["applied"].to_numpy(dtype=bool)[0]:
        return {"flow_index": flow_index.copy()}
    rate = float(ageing_controls["rate_per_year"].to_numpy()[0])
    compared = ageing_controls[ageing_controls["control_probe"] != ""]
    oldest = (float(compared["oldest_age_d"].max()) + BEYOND_D) * DAY_S
    gain = xr.apply_ufunc(np.exp, rate * installed_age.clip(0.0, oldest) / YEAR_S)
    return {"flow_index": (flow_index * gain).transpose(*flow_index.dims)}
