"""Frozen wood: records that neither method can read, for ice conducts and stores heat otherwise."""

import numpy as np

from sapflux.constants import ZERO_CELSIUS
from sapflux.stage import stage

HOUR_NS = 3600 * 1_000_000_000


def _reach_s(settings):
    # A second more, so that a record just at the edge is seen.
    return (settings["air_mean_h"] + settings["thaw_h"]) * 3600.0 + 1.0


@stage(
    chain=("heat_dissipation", "heat_ratio"),
    flags="frozen_wood",
    reach_s=_reach_s,
    limits={
        "frozen_below_degC": (-20.0, 5.0),
        "air_mean_h": (0.0, 24.0),
        "thaw_h": (0.0, 72.0),
    },
)
def screen_frost(
    installation,
    stem_temperature=None,
    air_temperature=None,
    /,
    *,
    frozen_below_degC=-0.5,
    air_mean_h=3.0,
    thaw_h=6.0,
):
    """Where the wood at the needles is frozen or still thawing.

    Ice conducts heat nearly four times as well as water, and melting takes heat without a rise of
    temperature: the signal then goes either way and says nothing of sap. The temperature is that
    of the stem where it is logged, else the mean of the air over some hours, which a stem follows
    late; without either nothing is flagged. Such records are left out; that no sap flows in frozen
    wood is not assumed.

    Parameters
    ----------
    installation : (probe, time) [1]
        Says which probes and records there are.
    stem_temperature : (probe, time) [K]
        At the reference needle; where it is missing the air stands in.
    air_temperature : (time) [K]
        Of the site.
    frozen_below_degC : float [degC]
        The wood is frozen below this: sap freezes a little below 0 degC. Common practice.
    air_mean_h : float [h]
        Length of the mean of the air temperature, up to the end of the record. Common practice.
    thaw_h : float [h]
        So long after the last frozen record the wood still thaws. Common practice.

    Returns
    -------
    frozen_wood : (probe, time) [bool]
        Frozen, or thawing.

    Source: common practice. Conductivities of ice and water at 0 degC, 2.2 and 0.6 W m-1 K-1:
    handbook values.
    """
    stamps = installation["time"].values.astype("datetime64[ns]").astype(np.int64)
    shape = (installation.sizes["probe"], installation.sizes["time"])
    celsius = np.full(shape, np.nan)
    if air_temperature is not None:
        air = np.asarray(air_temperature.values, dtype=float)
        celsius[:] = _mean_before(air, stamps, air_mean_h) - ZERO_CELSIUS
    if stem_temperature is not None:
        stem = stem_temperature.transpose("probe", "time").values - ZERO_CELSIUS
        celsius = np.where(np.isfinite(stem), stem, celsius)
    frozen = celsius < frozen_below_degC
    last = np.maximum.accumulate(np.where(frozen, stamps, np.iinfo(np.int64).min), axis=-1)
    thawing = (last > np.iinfo(np.int64).min) & (stamps - last <= thaw_h * HOUR_NS)
    flagged = installation.transpose("probe", "time").copy(data=frozen | thawing)
    return {"frozen_wood": flagged}


def _mean_before(kelvin, stamps, hours):
    """(time) mean of the values of the `hours` up to each record, of those that are there [K].

    Sums are of whole microkelvins, so that they do not depend on where a block begins.
    """
    there = np.isfinite(kelvin)
    micro = np.rint(np.where(there, kelvin, 0.0) * 1e6).astype(np.int64)
    total, count = (np.concatenate([[0], np.cumsum(one)]) for one in (micro, there))
    first = np.searchsorted(stamps, stamps - max(hours * HOUR_NS, 1), side="right")
    number = count[1:] - count[first]
    mean = np.full(len(kelvin), np.nan)
    np.divide(total[1:] - total[first], number * 1e6, out=mean, where=number > 0)
    return mean
