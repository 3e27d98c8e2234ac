"""Fast flow in heat ratio: where the ratio can tell no more, and a second estimate beside it."""

from typing import Literal

import numpy as np

from sapflux.correction.night_table import laid_on
from sapflux.physics import handover
from sapflux.physics.wound_strip import Strip
from sapflux.schema import RECORD
from sapflux.stage import stage

FLAGS = ("lower_bound", "heater_failure")
# Of a record of which the ratio tells a lower bound only, share that the second estimate must
# have: else the record would be filled with its own bound. Source: own judgement.
LEAST_SHARE = 0.5


@stage(
    chain="heat_ratio",
    makes="heat_pulse_velocity",
    flags=FLAGS,
    limits={
        "rise_noise_K": (1e-4, 1.0),
        "smallest_signal_to_noise": (1.0, 20.0),
        "time_noise_s": (0.05, 10.0),
        "tangential_to_axial_diffusivity": (0.3, 3.0),
    },
    follows={
        "wound_method": ("wound", "method"),
        "tangential_to_axial_diffusivity": ("wound", "tangential_to_axial_diffusivity"),
    },
)
def high_flow(
    heat_pulse_velocity,
    rise_downstream=None,
    rise_upstream=None,
    time_of_maximum_downstream=None,
    thermal_diffusivity=None,
    spacing_downstream=None,
    spacing_upstream=None,
    window_from=None,
    window_to=None,
    pulse_length=None,
    wound_width=None,
    /,
    *,
    wound_method: Literal["published", "strip"] = "published",
    rise_noise_K=0.01,
    smallest_signal_to_noise=3.0,
    time_noise_s=1.0,
    tangential_to_axial_diffusivity=1.0,
):
    """Heat pulse velocity of fast flow, by the ratio and the time of the maximum together.

    The faster the sap, the smaller the upstream rise. Once that is lost in its noise, the ratio
    tells no more than that the sap was at least so fast: the record is a lower bound, flagged and
    left out. Where the trace after the pulse gives the time of the largest downstream rise, this
    tells the velocity a second time, and the two are weighed by the inverse of their variances at
    every upward flow. The precision of the time is 0 up to the velocity of its latest maximum (19
    cm h-1 in a wound of 2 mm, 0 without one) and grows from there as that of the ratio falls: the
    one takes over from the other without a jump.

    The weights rest on the noisy rises themselves: with the default noises records at 80 to 90 cm
    h-1 in sound wood read 4 to 6 % low on the mean (own simulation).

    A record of which the ratio is already refused stays so: an upstream rise that is not positive,
    or a velocity beyond the limit of the wound correction. Probes that log no rises, but a ratio
    or a velocity, cannot be judged: they pass unchanged.

    Parameters
    ----------
    heat_pulse_velocity : (probe, point, time) [m s-1]
        Corrected for the wound, positive upwards.
    rise_downstream, rise_upstream : (probe, point, time) [K]
        Mean rises in the reading window. Of downward flow the downstream one is the smaller.
    time_of_maximum_downstream : (probe, point, time) [s]
        Since the start of heating; without it there is no second estimate.
    thermal_diffusivity : (probe) [m2 s-1]
        Of fresh sapwood; may change with time, as all of these.
    spacing_downstream, spacing_upstream : (probe) [m]
        From the heater to the needles.
    window_from, window_to : (probe) [s]
        The reading window, counted from the end of heating.
    pulse_length : (probe) [s]
        Length of the heating.
    wound_width : (probe) [m]
        Of the strip without sap flow; NaN or absent is sound wood.
    wound_method : text
        How the ratio was corrected for the wound; it follows the recipe's. The time of the maximum
        is corrected by the strip alone, and the two theories are not mixed: in a wound corrected by
        "published" there is no second estimate. The default is that of the wound.
    rise_noise_K : float [K]
        Standard deviation of a mean rise. That of the readings of a window is not independent;
        measure it from one pulse to the next on quiet nights. Own judgement.
    smallest_signal_to_noise : float [1]
        Smallest rise over its noise of which the ratio can be used: down to about 3 the log of the
        mean rises is nearly unbiased (own derivation).
    time_noise_s : float [s]
        Standard deviation of the time of maximum. A fit of a trace with a noise of 0.5 % leaves
        0.25 s; 0.1 mm of the width of a wound change it by 0.4 s, and 3 % of the diffusivity by 0.9
        s at 40 cm h-1 (own calculation). Own judgement.
    tangential_to_axial_diffusivity : float [1]
        Diffusivity across the stem over that along it, in the wound; it follows that of the
        recipe's wound, and none else is taken: 0.7 read as 1 makes 80 cm h-1 68 by the time.

    Returns
    -------
    heat_pulse_velocity : (probe, point, time) [m s-1]
        NaN where the record is a lower bound.
    lower_bound : (probe, point, time) [bool]
        The smaller rise is below its noise times the smallest ratio, and the time does not tell
        more than it.
    heater_failure : (probe, point, time) [bool]
        So is the larger: there was no pulse.

    Source: Cohen et al. (1981) and Kluitenberg and Ham (2004), Agricultural and Forest Meteorology
    126 (time of maximum; from memory), in a wound by the strip (own derivation); weights by the
    inverse of the variance as Forster (2020) hands over, from memory.
    """
    velocity = heat_pulse_velocity.transpose(*RECORD)
    if rise_downstream is None or rise_upstream is None:
        return {
            "heat_pulse_velocity": velocity.copy(),
            **{name: velocity.copy(data=np.zeros(velocity.shape, bool)) for name in FLAGS},
        }
    down, up = (rise.transpose(*RECORD).values for rise in (rise_downstream, rise_upstream))
    weak = np.minimum(down, up) < smallest_signal_to_noise * rise_noise_K
    cold = np.maximum(down, up) < smallest_signal_to_noise * rise_noise_K
    values = velocity.values.copy()
    facts = (thermal_diffusivity, spacing_downstream, spacing_upstream, pulse_length)
    facts = (*facts, window_from, window_to)
    if time_of_maximum_downstream is not None and all(fact is not None for fact in facts):
        time = time_of_maximum_downstream.transpose(*RECORD).values
        wood = [laid_on(velocity, fact)[:, None] for fact in facts]
        width = 0.0 if wound_width is None else np.nan_to_num(laid_on(velocity, wound_width))
        if wound_method == "published":
            width = np.where(width > 0.0, np.nan, width)
        width = np.broadcast_to(width, (velocity.sizes["probe"], velocity.sizes["time"]))[:, None]
        noise = rise_noise_K, time_noise_s
        across = tangential_to_axial_diffusivity
        both, share = _both(values, down, up, time, wood, width, noise, across)
        told = np.isfinite(both)
        values[told] = both[told]
        weak &= share < LEAST_SHARE
    values[weak | cold] = np.nan
    return {
        "heat_pulse_velocity": velocity.copy(data=values),
        "lower_bound": velocity.copy(data=weak & ~cold),
        "heater_failure": velocity.copy(data=cold),
    }


def _both(velocity, down, up, time, wood, width, noise, across):
    """Velocity by both estimates and the share of the second, each (probe, point, time).

    wood : diffusivity, both spacings, pulse length, both ends of the window, of each record;
    noise : of a rise [K] and of the time [s]; across : diffusivity across over along the stem.
    """
    rise_noise, time_noise = noise
    given = np.broadcast_arrays(velocity, down, up, time, width, *wood)
    known = np.all(np.isfinite(given), axis=0) & (down > 0.0) & (up > 0.0)
    found, share = np.full(velocity.shape, np.nan), np.zeros(velocity.shape)
    first, down, up, time, width, diffusivity, *reading = (one[known] for one in given)
    # Each way of reading is looked at once: a site has few, its records are many.
    readings, number = np.unique(np.array(reading).T, axis=0, return_inverse=True)
    both = np.empty((2, len(first)))
    for place, (near, far, pulse, begin, end) in enumerate(readings.tolist()):
        own = number.reshape(-1) == place
        k = diffusivity[own]
        deviation = handover.velocity_deviation(down[own], up[own], rise_noise, k, near + far)
        strip = Strip(
            width=np.nan,
            diffusivity=np.nan,
            tangential_to_axial=across,
            spacing_downstream=near,
            spacing_upstream=far,
            window_from=begin,
            window_to=end,
            pulse=pulse,
        )
        second = (time[own], time_noise, width[own], k, strip)
        both[:, own] = handover.handed_over(first[own], deviation, *second)
    found[known], share[known] = both
    return found, share
