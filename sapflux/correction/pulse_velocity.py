"""Heat pulse velocity of the heat ratio method."""

from typing import Literal

import numpy as np
import xarray as xr

from sapflux.physics import spacing
from sapflux.schema import RECORD
from sapflux.stage import stage

ZERO = ("zero_flow_log_ratio",)
READING = ("window_from", "window_to", "pulse_length")


@stage(
    chain="heat_ratio",
    makes="heat_pulse_velocity",
    flags=("no_wood_sample", "unusable_offset"),
    method_needs={
        "both_spacings": (*ZERO, *READING),
        "downstream_right": (*ZERO, *READING),
        "upstream_right": (*ZERO, *READING),
        "additive_offset": ZERO,
        "as_given": READING,
    },
)
def heat_pulse_velocity(
    log_heat_ratio,
    thermal_diffusivity,
    spacing_downstream,
    spacing_upstream,
    zero_flow_log_ratio=None,
    window_from=None,
    window_to=None,
    pulse_length=None,
    /,
    *,
    method: Literal[
        "both_spacings", "downstream_right", "upstream_right", "additive_offset", "as_given"
    ] = "both_spacings",
):
    """Heat pulse velocity behind the ratio of the temperature rises.

    The ratio at rest is taken off, and the rest times 2 k over the sum of the spacings is the
    velocity. What the ratio at rest tells is the difference of the squared spacings; the sum is an
    assumption, and with it the gain. One needle 0.3 mm out of 6 changes it by 2.5 %, whichever it
    is. The assumption that names this needle is exact, the other 5 % off, their mean 2.7 %, and
    the additive offset 2.5 %. Where the heater stands 0.3 mm askew between two right needles, the
    mean is 0.6 % high and the additive offset exact. Needles that both stand too far by as much
    show nothing at rest, and the velocity is in error by 5 % after any of these.

    Parameters
    ----------
    log_heat_ratio : (probe, point, time) [1]
        Log of downstream over upstream rise.
    thermal_diffusivity : (probe) [m2 s-1]
        Of fresh sapwood; may change with time, as all of these.
    spacing_downstream, spacing_upstream : (probe) [m]
        From the heater to the needles, as given.
    zero_flow_log_ratio : (probe, point, time) [1]
        The log of the ratio at rest.
    window_from, window_to : (probe) [s]
        The reading window, counted from the end of heating.
    pulse_length : (probe) [s]
        Length of the heating.
    method : text
        "downstream_right" takes the downstream spacing as given and the upstream one from the
        ratio at rest; "upstream_right" the other way round; "both_spacings" the mean of the two
        velocities. "additive_offset" takes the ratio at rest off and keeps the spacings as given:
        where they are wrong a gain of their true over their given sum stays (6 and 7 mm taken as
        6 and 6: 13 over 12). "as_given" takes no ratio at rest but that of the given spacings,
        which is none where they are equal. The default is that of the source.

    Returns
    -------
    heat_pulse_velocity : (probe, point, time) [m s-1]
        Positive upwards; apparent, as the wound has not been corrected for.
    no_wood_sample : (probe, point, time) [bool]
        Where the diffusivity is missing.
    unusable_offset : (probe, point, time) [bool]
        Where no spacing gives the ratio at rest, or the reading window is missing.

    Source: Burgess et al. (2001), Tree Physiology 21: eq. 1, and misaligned needles; the sizes of
    what is left are own calculation with the line source.
    """
    log_ratio = log_heat_ratio.transpose(*RECORD)
    down, up, diffusivity = spacing_downstream, spacing_upstream, thermal_diffusivity
    moment = None
    if window_from is not None:
        moment = xr.apply_ufunc(spacing.reading_time, window_from, window_to, pulse_length)
    zero = zero_flow_log_ratio
    if method == "as_given":
        zero = xr.apply_ufunc(spacing.zero_log_ratio, down, up, diffusivity, moment)
    place = (zero, diffusivity, moment)
    sums = []
    if method in ("both_spacings", "downstream_right"):
        sums.append(down + xr.apply_ufunc(spacing.upstream_spacing, down, *place))
    if method in ("both_spacings", "upstream_right"):
        sums.append(up + xr.apply_ufunc(spacing.downstream_spacing, up, *place))
    velocities = [
        xr.apply_ufunc(spacing.velocity, log_ratio, zero, diffusivity, both)
        for both in sums or [down + up]
    ]
    velocity = (sum(velocities) / len(velocities)).transpose(*RECORD)
    missing = diffusivity.isnull().broadcast_like(log_ratio).transpose(*RECORD)
    known = np.isfinite(log_ratio) & ~missing
    return {
        "heat_pulse_velocity": velocity,
        "no_wood_sample": missing,
        "unusable_offset": known & velocity.isnull(),
    }
