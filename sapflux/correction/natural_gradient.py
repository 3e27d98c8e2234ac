"""The temperature difference that a stem shows without heating, and its removal."""

from typing import Literal

import numpy as np
import pandas as pd

from sapflux.constants import ZERO_CELSIUS
from sapflux.correction.baseline_line import baseline_line
from sapflux.correction.night_table import laid_on, lines_of, night_rows, no_rows
from sapflux.correction.nights import in_nights, installations_in, nights_of, reach_s
from sapflux.physics import thermocouple
from sapflux.schema import RECORD
from sapflux.stage import stage

HOUR_NS = 3_600_000_000_000
COLUMNS = ("gradient_K",)


def power_off_readings(
    heated_difference,
    installation,
    solar_elevation,
    solar_time,
    power_off=None,
    heating_on=None,
    /,
    *,
    settling_h,
    largest_K,
):
    """One row a probe, point, installation and night in which the heater was off on purpose.

    Columns as in the table of `natural_gradient`. A record counts if the heater has been off for
    `settling_h` before it and stays off through the next record. A mean beyond `largest_K` is
    not accepted.
    """
    heated = heated_difference.transpose(*RECORD)
    if power_off is None or not (power_off > 0).any():
        return no_rows(*COLUMNS)
    stamps = heated["time"].values.astype("datetime64[ns]").astype(np.int64)
    off = laid_on(heated, power_off) > 0
    if heating_on is not None:
        off = off & np.isnan(laid_on(heated, heating_on))
    last_on = np.maximum.accumulate(np.where(off, stamps[0], stamps), axis=-1)
    nights = nights_of(heated["time"].values, solar_elevation.values, solar_time.values)
    settled = off & (stamps - nights.step_ns - last_on >= settling_h * HOUR_NS)
    settled[:, :-1] &= off[:, 1:]
    settled[:, -1:] = False
    numbers = in_nights(np.where(off, laid_on(heated, installation), -1), nights, -1)
    settled = in_nights(settled, nights, False)
    values = in_nights(heated.values, nights, np.nan)
    parts = []
    for current in installations_in(numbers):
        here = numbers == current[..., None]
        seen = np.where((here & settled)[:, None], values, np.nan)
        there = np.isfinite(seen)
        records = there.sum(axis=-1)
        total = np.cumsum(np.where(there, seen, 0.0), axis=-1)[..., -1]
        mean = np.where(records > 0, total / np.maximum(records, 1), np.nan)
        middle = nights.begins + (nights.length - 1) * nights.step_ns // 2
        columns = {
            "time": middle.astype("datetime64[ns]"),
            "gradient_K": mean,
            "records": records,
            "accepted": np.abs(mean) <= largest_K,
            "measured": (np.isfinite(values) & here[:, None]).any(axis=-1),
        }
        rows = night_rows(heated, current, nights, columns)
        rows = rows[rows.pop("measured").to_numpy()]
        too_warm = f"beyond {largest_K:g} K: the heater was not off"
        unsettled = f"no record after {settling_h:g} h without power"
        refused = np.where(rows["records"] > 0, too_warm, unsettled)
        verdict = np.where(rows["accepted"], "accepted", refused).astype(object)
        parts.append(rows.assign(reason=verdict))
    return pd.concat(parts, ignore_index=True) if parts else no_rows(*COLUMNS)


@stage(
    chain="heat_dissipation",
    makes=("heated_difference", "natural_gradient"),
    flags=("no_gradient", "steep_gradient"),
    table="power_off_nights",
    summarise=power_off_readings,
    reach_s=reach_s,
    method_needs={"pair": ("paired",), "power_off": ("power_off",)},
    limits={
        "assumed_stem_temperature_degC": (-20.0, 50.0),
        "settling_h": (0.5, 11.0),
        "largest_K": (0.1, 5.0),
        "farthest_d": (0.0, 3660.0),
        "steep_K": (0.0, 5.0),
    },
    unverified=("natural gradient that calls for a correction, 0.2 K (Köstner et al. 1998)",),
)
def natural_gradient(
    heated_difference,
    power_off_nights,
    installation,
    natural_difference=None,
    natural_emf=None,
    paired=None,
    heating_on=None,
    /,
    *,
    method: Literal["pair_else_power_off", "pair", "power_off"] = "pair_else_power_off",
    assumed_stem_temperature_degC=20.0,
    settling_h=3.0,
    largest_K=1.5,
    farthest_d=366.0,
    steep_K=0.2,
):
    """Heated minus reference needle, less the difference that the stem shows without heating.

    "pair" subtracts the reading of an unheated pair in the same stem, record by record, while
    `pairs.csv` gives it to the probe. "power_off" subtracts what the probe itself shows in nights
    in which its heater is off on purpose (`references.csv`): a straight line between the nights
    of one installation. It knows nothing of what the sun makes of the gradient by day.
    "pair_else_power_off" takes the pair where the probe has one, else the nights.

    A probe that has neither passes unchanged, and so does one that is heated in cycles, whose
    signal is a difference between heated and unheated already.

    Parameters
    ----------
    heated_difference : (probe, point, time) [K]
        Heated minus reference needle.
    power_off_nights : table
        One row a probe, point, installation and night with the heater off on purpose: `start`
        (UTC, true solar noon before it), `time` (UTC, middle of the dark hours after true solar
        midnight), gradient_K (mean of the settled records of those hours), records, accepted,
        reason in words.
    installation : (probe, time) [1]
        Nights of one installation say nothing of another.
    natural_difference : (probe, point, time) [K]
        Of the unheated pair, with the sign of the heated one: upper minus lower needle.
    natural_emf : (probe, point, time) [V]
        The same as a voltage of a type T pair.
    paired : (probe, time) [1]
        1 while an unheated pair is given to the probe.
    heating_on : (probe) [s]
        Set for probes heated in cycles.
    method : text
        Where the gradient is taken from, see above. Own judgement.
    assumed_stem_temperature_degC : float [degC]
        At which the voltage of the unheated pair is converted; 10 K amiss are 2 % of the
        gradient. Common practice.
    settling_h : float [h]
        So long after the heater went off the wood is still cooling. Common practice, as after the
        heater comes back.
    largest_K : float [K]
        A night without power whose mean lies beyond this, either way, is not accepted: no stem
        shows so much by itself before sunrise, so the heater was on. Own judgement, by gradients
        of up to 1.5 K in the sun.
    farthest_d : float [d]
        Before the first and after the last night with the heater off, its gradient is taken to
        hold up to this far. Own judgement: the seasons come round in a year.
    steep_K : float [K]
        Gradients beyond this, either way, are noted. Source: Köstner et al. (1998), value from
        memory.

    Returns
    -------
    heated_difference : (probe, point, time) [K]
        NaN where the gradient should be known and is not.
    natural_gradient : (probe, point, time) [K]
        What was subtracted: 0 where nothing is known of it, NaN where the difference is.
    no_gradient : (probe, point, time) [bool]
        Paired and without a reading, or further from a night than allowed.
    steep_gradient : (probe, point, time) [bool]
        Beyond `steep_K`; the value stands.

    Source: Do & Rocheteau (2002a), Tree Physiology 22; Köstner et al. (1998) (both from memory).
    """
    heated = heated_difference.transpose(*RECORD)
    gradient = np.zeros(heated.shape)
    with_nights = method != "pair" and power_off_nights["accepted"].any()
    with_pairs = method != "power_off" and paired is not None and (paired > 0).any()
    if not with_nights and not with_pairs:
        nothing = np.where(np.isnan(heated.values), np.nan, 0.0)
        return {"heated_difference": heated.copy(), "natural_gradient": heated.copy(data=nothing)}
    if with_nights:
        _lay_nights(gradient, power_off_nights, heated, installation, farthest_d)
    if with_pairs:
        reading = _reading(heated, natural_difference, natural_emf, assumed_stem_temperature_degC)
        has_pair = laid_on(heated, paired) > 0
        gradient = np.where(has_pair[:, None, :], reading, gradient)
    if heating_on is not None:
        in_cycles = np.isfinite(laid_on(heated, heating_on))
        gradient = np.where(in_cycles[:, None, :], 0.0, gradient)
    known = np.isfinite(heated.values)
    corrected = heated.values - gradient
    return {
        "heated_difference": heated.copy(data=corrected),
        "natural_gradient": heated.copy(data=np.where(known, gradient, np.nan)),
        "no_gradient": heated.copy(data=known & np.isnan(gradient)),
        "steep_gradient": heated.copy(data=known & (np.abs(gradient) > steep_K)),
    }


def _reading(heated, difference, emf, stem_temperature_degC):
    """(probe, point, time) reading of the unheated pairs [K], NaN without one."""
    reading = np.full(heated.shape, np.nan)
    if difference is not None:
        reading = difference.transpose(*RECORD).values
    if emf is not None:
        volts = emf.transpose(*RECORD).values
        kelvin = thermocouple.difference(volts, stem_temperature_degC + ZERO_CELSIUS)
        reading = np.where(np.isnan(reading), kelvin, reading)
    return reading


def _lay_nights(gradient, nights, heated, installation, farthest_d):
    """Write the line between the nights of each installation; NaN further out than allowed."""
    nights = nights[nights["accepted"].to_numpy(dtype=bool)]
    stamps = heated["time"].values.astype("datetime64[ns]").astype(np.int64)
    numbers = laid_on(heated, installation)
    knots = nights["time"].to_numpy().astype("datetime64[ns]").astype(np.int64)
    values = nights["gradient_K"].to_numpy(dtype=float)
    for place, here, own in lines_of(nights, heated, numbers):
        line = baseline_line(stamps[here], knots[own], values[own], farthest_d, np.inf)
        gradient[place][here] = line
