"""Nights looked at for the zero flow of heat dissipation: candidates, evidence and verdict."""

import numpy as np
import pandas as pd

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
)
from sapflux.correction.nights import (
    in_nights,
    nights_of,
    record_noise,
    window_means,
    window_records,
    window_slopes,
    with_hours_before,
)
from sapflux.physics.atmosphere import PA_PER_KPA, saturation_vapour_pressure
from sapflux.schema import RECORD

UM_PER_M = 1e6
WHOLE = 1 - 1e-9  # a mean of ones may miss one by a rounding
FIGURES = (
    "difference_K",
    "mean_deficit_kPa",
    "variation",
    "noise_K",
    "lowest_temperature_degC",
    "power_change",
    "swelling_um_h",
    "below_highest_um",
)
MARKS = ("visited", "rained", "accepted_if_drier", "accepted_if_wetter")


def zero_flow_candidates(
    heated_difference,
    installation,
    solar_elevation,
    solar_time,
    vapour_pressure_deficit=None,
    air_temperature=None,
    stem_temperature=None,
    precipitation=None,
    heater_voltage=None,
    visited=None,
    at_rest=None,
    stem_diameter_change=None,
    /,
    *,
    method,
    averaging_h,
    least_records_share,
    highest_deficit_kPa,
    highest_variation,
    highest_swelling_um_h,
    farthest_below_um,
    humidity_bias,
    before_h,
    frost_below_degC,
    largest_power_change,
):
    """One row a probe, point, installation and night of the block: its candidate for zero flow.

    Columns as in the table of `zero_flow_difference`, without those that its `fit` adds. The
    candidate is the highest mean over `averaging_h` after true solar midnight and before sunrise
    of the windows that meet the conditions of the method, or of all, not accepted, where none
    does.
    """
    record = heated_difference.transpose(*RECORD)
    nights = nights_of(record["time"].values, solar_elevation.values, solar_time.values)
    size = window_records(nights, averaging_h)
    night_long = {
        "lowest_temperature_degC": _lowest_temperature(
            record, nights, before_h, air_temperature, stem_temperature
        ),
        "power_change": _power_change(record, nights, heater_voltage),
        "visited": _any(record, nights, 0.0, visited),
        "rained": _any(record, nights, before_h, precipitation),
    }
    bias = humidity_bias * _saturation_kPa(nights, size, least_records_share, air_temperature)
    conditions, windowed = True, {}
    if method == "reference_dates":
        conditions = _wholly(record, nights, size, at_rest)
    elif method == "diameter_plateau":
        windowed = _diameter(record, nights, size, least_records_share, stem_diameter_change)
        conditions = (windowed["swelling_um_h"] <= highest_swelling_um_h) & (
            windowed["below_highest_um"] <= farthest_below_um
        )

    def meets(look, shift):
        """(probe, point, night, window) that may give the candidate, were the air drier so."""
        possible = np.isfinite(look.mean) & conditions
        if method == "quiet_nights":
            possible &= look.mean_deficit + shift <= highest_deficit_kPa
            possible &= look.variation <= highest_variation
        return possible

    parts = []
    for look in looked_at(
        record,
        installation,
        nights,
        vapour_pressure_deficit,
        averaging_h=averaging_h,
        least_records_share=least_records_share,
    ):
        met = meets(look, 0.0)
        accepted = met.any(axis=-1)
        pool = np.where(accepted[..., None], met, np.isfinite(look.mean))
        window = np.argmax(np.where(pool, look.mean, -np.inf), axis=-1)
        more = night_long | {
            "accepted": accepted,
            "accepted_if_drier": meets(look, bias).any(axis=-1),
            "accepted_if_wetter": meets(look, -bias).any(axis=-1),
            "noise_K": record_noise(look.seen),
            "swelling_um_h": np.nan,
            "below_highest_um": np.nan,
        }
        more |= {name: chosen(values, window) for name, values in windowed.items()}
        rows = looked_rows(record, look, window, "difference_K", **more)
        barred = in_words(
            len(rows), _barring(rows, averaging_h, frost_below_degC, largest_power_change)
        )
        for name in ("accepted", "accepted_if_drier", "accepted_if_wetter"):
            rows[name] = rows[name].to_numpy(dtype=bool) & (barred == "")
        unmet = _unmet(
            method, rows, highest_deficit_kPa, highest_variation,
            highest_swelling_um_h, farthest_below_um,
        )  # fmt: skip
        told = [(barred != "", "{}", barred), (rows["accepted"].to_numpy(), "accepted")]
        rows["reason"] = in_words(len(rows), [*told, *unmet])
        parts.append(rows[[*KEYS, *FIGURES, *MARKS, *VERDICT]])
    return pd.concat(parts, ignore_index=True) if parts else no_candidates()


def no_candidates():
    """The table without rows."""
    return no_rows(*FIGURES, **dict.fromkeys(MARKS, bool))


def _barring(rows, averaging_h, frost_below_degC, largest_power_change):
    """What bars a night whatever the method, as causes for `in_words`."""
    lowest, power = (rows[name].to_numpy() for name in ("lowest_temperature_degC", "power_change"))
    return [
        (rows["night_records"].to_numpy() == 0, "no night record"),
        (~rows["long_enough"].to_numpy(), f"night after midnight shorter than {averaging_h:g} h"),
        (np.isnan(rows["difference_K"].to_numpy()), "too few records"),
        (rows["visited"].to_numpy(), "the logger was visited"),
        (lowest < frost_below_degC, f"frost: {{:.1f}} degC, below {frost_below_degC:g}", lowest),
        (
            power > largest_power_change,
            f"heater power changed by {{:.1%}}, above {largest_power_change:.1%}",
            power,
        ),
    ]


def _unmet(method, rows, highest_deficit_kPa, highest_variation, highest_swelling, farthest_below):
    """What a method wants and the candidate does not have, as causes for `in_words`."""
    deficit, variation, swelling, below = (
        rows[name].to_numpy()
        for name in ("mean_deficit_kPa", "variation", "swelling_um_h", "below_highest_um")
    )
    if method == "reference_dates":
        return [(True, "not at rest by references.csv")]
    if method == "diameter_plateau":
        return [
            (np.isnan(swelling), "no stem diameter"),
            (
                swelling > highest_swelling,
                f"stem swelling by {{:.1f}} um h-1, above {highest_swelling:g}",
                swelling,
            ),
            (True, f"stem {{:.1f}} um below its highest, above {farthest_below:g}", below),
        ]
    return [
        (np.isnan(deficit), "no vapour pressure deficit"),
        (
            deficit > highest_deficit_kPa,
            f"deficit {{:.3g}} kPa above {highest_deficit_kPa:g}",
            deficit,
        ),
        (True, f"variation {{:.3g}} above {highest_variation:g}", variation),
    ]


def _on_nights(record, nights, values):
    """(probe, night, slot) float of a series of the probes, or of the site; NaN outside."""
    return in_nights(np.asarray(laid_on(record, values), dtype=float), nights, np.nan)


def _lowest_temperature(record, nights, before_h, air, stem):
    """(probe, 1, night) lowest temperature [degC] of the stem where known, else of the air."""
    lowest = np.full((record.sizes["probe"], len(nights.start)), np.nan)
    longer = with_hours_before(nights, before_h)
    for series in (air, stem):
        if series is not None:
            values = _on_nights(record, longer, series)
            least = np.where(np.isnan(values), np.inf, values).min(axis=-1, initial=np.inf)
            lowest = np.where(np.isfinite(least), least - ZERO_CELSIUS, lowest)
    return lowest[:, None]


def _power_change(record, nights, voltage):
    """(probe, 1, night) highest over lowest heater power of the night, less one.

    Records under half the night's highest voltage are of a heater that is off, as it is within
    every heating cycle; outages are left to the screen.
    """
    if voltage is None:
        return np.full((record.sizes["probe"], 1, len(nights.start)), np.nan)
    volts = _on_nights(record, nights, voltage)
    volts = np.where(np.isnan(volts), 0.0, volts)
    highest = volts.max(axis=-1, initial=0.0)
    on = (volts > 0) & (volts >= highest[..., None] / 2)
    lowest = np.where(on, volts, np.inf).min(axis=-1, initial=np.inf)
    change = (highest / lowest) ** 2 - 1
    return np.where(highest > 0, change, np.nan)[:, None]


def _any(record, nights, before_h, values):
    """(probe, 1, night) bool: whether a record of the night, or so long before, is above zero."""
    if values is None:
        return np.zeros((record.sizes["probe"], 1, len(nights.start)), dtype=bool)
    laid = _on_nights(record, with_hours_before(nights, before_h), values)
    return (laid > 0).any(axis=-1)[:, None]


def _saturation_kPa(nights, size, least_records_share, air):
    """(night, window) mean saturation vapour pressure; 0 where no temperature tells."""
    if air is None:
        return 0.0
    pressure = in_nights(saturation_vapour_pressure(air.values), nights, np.nan)
    mean = window_means(pressure, nights, size, least_records_share).mean
    return np.where(np.isnan(mean), 0.0, mean / PA_PER_KPA)


def _wholly(record, nights, size, at_rest):
    """(probe, 1, night, window) bool: all records of the window are at rest."""
    if at_rest is None:
        return False
    resting = window_means(_on_nights(record, nights, at_rest), nights, size, 1.0)
    return resting.mean[:, None] >= WHOLE


def _diameter(record, nights, size, least_records_share, diameter):
    """(probe, 1, night, window) how fast the stem swells and how far it is below its highest.

    The highest is that of the night, from true solar midnight to sunrise: a stem that rests early
    and swells later has not refilled.
    """
    if diameter is None:
        values = in_nights(np.full((1, record.sizes["time"]), np.nan), nights, np.nan)
    else:
        values = _on_nights(record, nights, diameter) * UM_PER_M
    highest = np.where(np.isnan(values), -np.inf, values)
    highest = highest.max(axis=-1, keepdims=True, initial=-np.inf)
    slope = window_slopes(values, nights, size, least_records_share)
    below = window_means(highest - values, nights, size, least_records_share).mean
    return {"swelling_um_h": slope[:, None], "below_highest_um": below[:, None]}
