"""Nights of the heat ratio method without flow: what the needles show, and whether it holds."""

import numpy as np
import pandas as pd
import xarray as xr
from scipy.special import stdtr

from sapflux.constants import ZERO_CELSIUS
from sapflux.correction.night_table import (
    KEYS,
    VERDICT,
    chosen,
    in_words,
    laid_on,
    looked_at,
    looked_rows,
    no_rows,
    same_key,
    without_silent,
)
from sapflux.correction.nights import (
    in_nights,
    last_window,
    nights_of,
    window_means,
    window_records,
)
from sapflux.physics import spacing
from sapflux.physics.heat_pulse import CM_PER_HOUR
from sapflux.schema import RECORD

COLUMNS = ("velocity_cm_h", "mean_deficit_kPa", "misplacement_mm")
OF_INSTALLATION = ("offset_cm_h", "spread_cm_h", "slope_cm_h_per_kPa", "slope_probability")


def zero_ratio_candidates(
    log_heat_ratio,
    thermal_diffusivity,
    spacing_downstream,
    spacing_upstream,
    window_from,
    window_to,
    pulse_length,
    installation,
    solar_elevation,
    solar_time,
    vapour_pressure_deficit=None,
    air_temperature=None,
    at_rest=None,
    /,
    *,
    method,
    averaging_h,
    least_records_share,
    highest_deficit_kPa,
    frost_below_degC,
):
    """One row a probe, point, installation and night of the block: its mean before sunrise.

    Columns as in the table of `zero_flow_ratio`, without those of the installation.
    """
    log_ratio = log_heat_ratio.transpose(*RECORD)
    moment = reading_time(window_from, window_to, pulse_length)
    geometry = (spacing_downstream, spacing_upstream, thermal_diffusivity, moment)
    expected = xr.apply_ufunc(spacing.zero_log_ratio, *geometry)
    both = spacing_downstream + spacing_upstream
    shown = xr.apply_ufunc(spacing.velocity, log_ratio, expected, thermal_diffusivity, both)
    record = shown.transpose(*RECORD) / CM_PER_HOUR
    nights = nights_of(record["time"].values, solar_elevation.values, solar_time.values)
    more = {
        "lowest_C": _lowest(air_temperature, nights),
        "rests": _rests(at_rest, record, nights, averaging_h),
    }
    parts = []
    for look in looked_at(
        record,
        installation,
        nights,
        vapour_pressure_deficit,
        averaging_h=averaging_h,
        least_records_share=least_records_share,
    ):
        window = np.broadcast_to(last_window(nights, look.size), look.mean.shape[:-1])
        rows = looked_rows(record, look, window, "velocity_cm_h", **more)
        causes = _causes(rows, method, averaging_h, highest_deficit_kPa, frost_below_degC)
        words = in_words(len(rows), causes)
        rows["reason"] = np.where(words == "", "accepted", words)
        rows["accepted"] = words == ""
        rows["misplacement_mm"] = _misplaced_mm(rows, record, geometry)
        parts.append(rows[[*KEYS, *COLUMNS, *VERDICT]])
    return pd.concat(parts, ignore_index=True) if parts else no_rows(*COLUMNS)


def _causes(rows, method, averaging_h, highest_deficit_kPa, frost_below_degC):
    """Why a night does not count, as causes for `in_words`."""
    deficit, lowest = rows["mean_deficit_kPa"].to_numpy(), rows["lowest_C"].to_numpy()
    causes = [
        (rows["night_records"].to_numpy() == 0, "no night record"),
        (~rows["long_enough"].to_numpy(), f"night after midnight shorter than {averaging_h:g} h"),
        (np.isnan(rows["velocity_cm_h"].to_numpy()), "too few records"),
        (lowest < frost_below_degC, f"frost: {{:.1f}} degC, below {frost_below_degC:g}", lowest),
    ]
    if method == "reference_dates":
        causes.append((~rows["rests"].to_numpy(), "not at rest by references.csv"))
    elif method == "quiet_nights":
        above = f"deficit {{:.3g}} kPa above {highest_deficit_kPa:g}"
        causes.append((np.isnan(deficit), "no vapour pressure deficit"))
        causes.append((deficit > highest_deficit_kPa, above, deficit))
    return causes


def reading_time(window_from, window_to, pulse_length):
    """The time of `spacing.reading_time` [s], of facts as they are laid on the records."""
    return xr.apply_ufunc(spacing.reading_time, window_from, window_to, pulse_length)


def _lowest(air_temperature, nights):
    """(night) lowest air temperature after true solar midnight [degC], NaN where none is known."""
    if air_temperature is None:
        return np.full(len(nights.start), np.nan)
    values = in_nights(air_temperature.values - ZERO_CELSIUS, nights, np.nan)
    lowest = np.where(np.isnan(values), np.inf, values).min(axis=-1, initial=np.inf)
    return np.where(np.isfinite(lowest), lowest, np.nan)


def _rests(at_rest, record, nights, averaging_h):
    """(probe, 1, night) bool: somebody vouches for rest in the whole window before sunrise."""
    if at_rest is None:
        return np.zeros((record.sizes["probe"], 1, len(nights.start)), dtype=bool)
    values = in_nights(laid_on(record, at_rest).astype(float), nights, np.nan)
    size = window_records(nights, averaging_h)
    means = window_means(values, nights, size, 1.0).mean
    window = np.broadcast_to(last_window(nights, size), means.shape[:-1])
    return (chosen(means, window) == 1.0)[:, None]


def _misplaced_mm(rows, record, geometry):
    """What the velocity of each row means in millimetres of one needle; NaN without a velocity."""
    places = {str(name): place for place, name in enumerate(record["probe"].values)}
    probe = rows["probe"].map(places).to_numpy(dtype=int)
    middle = np.searchsorted(record["time"].values, rows["time"].to_numpy())
    middle = np.minimum(middle, record.sizes["time"] - 1)
    down, up, diffusivity, moment = (laid_on(record, one)[probe, middle] for one in geometry)
    velocity = rows["velocity_cm_h"].to_numpy() * CM_PER_HOUR
    ratio = ratio_at_rest(velocity, down, up, diffusivity, moment)
    return spacing.misplacement(down, up, ratio, diffusivity, moment) * 1e3


def ratio_at_rest(offset, downstream, upstream, diffusivity, moment):
    """Log ratio at rest [1] of needles that, as given, show the velocity `offset` [m s-1]."""
    expected = spacing.zero_log_ratio(downstream, upstream, diffusivity, moment)
    return expected + offset * (downstream + upstream) / (2.0 * diffusivity)


def fit_ratio(
    rows,
    /,
    *,
    method,
    fewest_nights,
    widest_spread_cm_h,
    least_slope_probability,
    smallest_rise_cm_h,
    largest_offset_cm_h,
    largest_misplacement_mm,
):
    """The table of nights with the zero of their installation, the same in all its rows.

    Columns as in the table of `zero_flow_ratio`.
    """
    rows = without_silent(rows).reset_index(drop=True) if len(rows) else no_rows(*COLUMNS)
    accepted = rows["accepted"].to_numpy(dtype=bool)
    velocity, deficit, moved = (
        rows[name].where(accepted).to_numpy(dtype=float)
        for name in ("velocity_cm_h", "mean_deficit_kPa", "misplacement_mm")
    )
    found = {name: np.full(len(rows), np.nan) for name in OF_INSTALLATION}
    nights, verdict = np.zeros(len(rows), dtype=np.int64), np.full(len(rows), "", dtype=object)
    for *_, own in same_key(rows):
        there = np.isfinite(velocity[own])
        here, dryness = velocity[own][there], deficit[own][there]
        nights[own] = len(here)
        if len(here) < fewest_nights:
            verdict[own] = f"{len(here)} accepted nights, {fewest_nights} needed"
        if not len(here):
            continue
        offset, misplaced = np.median(here), np.median(moved[own][there])
        spread = np.subtract(*np.percentile(here, [75, 25]))
        slope, probability, rise = slope_of(dryness, here)
        if method == "reference_dates":
            rise = 0.0  # somebody vouches for rest, however dry the air
        for name, value in zip(OF_INSTALLATION, (offset, spread, slope, probability), strict=True):
            found[name][own] = value
        if len(here) < fewest_nights:
            continue
        if spread > widest_spread_cm_h:
            word = f"spread {spread:.3g} cm h-1 above {widest_spread_cm_h:g}"
        elif rise > smallest_rise_cm_h and probability < least_slope_probability:
            word = f"rises by {rise:.3g} cm h-1 with the deficit: flow at night"
        elif abs(offset) > largest_offset_cm_h:
            word = f"offset {offset:.3g} cm h-1 beyond {largest_offset_cm_h:g}"
        elif np.isnan(misplaced):
            word = "no place of one needle shows this, or no reading window is given"
        elif misplaced > largest_misplacement_mm:
            word = f"a needle {misplaced:.3g} mm out of place, beyond {largest_misplacement_mm:g}"
        else:
            word = "usable"
        verdict[own] = word
    return rows.assign(**found, nights=nights, usable=verdict == "usable", verdict=verdict)


def slope_of(deficit, value):
    """Straight line of nightly values against deficits: slope, its probability, its rise.

    probability : of so steep a line, up or down, where there is none (Student's t, n - 2); rise :
    of the line from the lowest to the highest deficit. NaN, NaN and 0 for fewer than 3 nights
    with a deficit, or one deficit only.

    Source: ordinary least squares.

    >>> slope, probability, rise = slope_of(np.array([0.0, 1, 2, 3]), np.array([0.0, 1, 1, 2]))
    >>> round(slope, 3), round(probability, 4), round(rise, 3)
    (0.6, 0.0513, 1.8)
    """
    known = np.isfinite(deficit) & np.isfinite(value)
    x, y = deficit[known], value[known]
    if len(x) < 3 or np.ptp(x) == 0.0:
        return np.nan, np.nan, 0.0
    x, y = x - x.mean(), y - y.mean()
    slope = float(x @ y / (x @ x))
    variance = float(np.sum((y - slope * x) ** 2)) / (len(x) - 2)
    error = np.sqrt(variance / (x @ x))
    probability = 2.0 * float(stdtr(len(x) - 2, -abs(slope) / error)) if error else 0.0
    return slope, probability, slope * float(np.ptp(x))
