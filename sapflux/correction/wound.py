"""Heat pulse velocity corrected for the wound that the needles left in the wood."""

from dataclasses import replace
from typing import Literal

import numpy as np
import xarray as xr

from sapflux.physics import heat_pulse, wound_strip
from sapflux.stage import stage

GEOMETRY = ("spacing_downstream", "spacing_upstream", "window_from", "window_to", "pulse_length")
READING = (*GEOMETRY[:4], "pulse")  # as `wound_strip.Strip` names them


@stage(
    chain="heat_ratio",
    makes="heat_pulse_velocity",
    flags=("beyond_wound_limit", "no_wound_width", "no_wood_sample"),
    method_needs={"strip": ("thermal_diffusivity", *GEOMETRY)},
    limits={
        "highest_velocity_cm_h": (5.0, 60.0),
        "tangential_to_axial_diffusivity": (0.3, 3.0),
    },
    unverified=("wound table of the published cubic (Burgess et al. 2001, table 1)",),
)
def wound(
    heat_pulse_velocity,
    wound_width,
    thermal_diffusivity=None,
    spacing_downstream=None,
    spacing_upstream=None,
    window_from=None,
    window_to=None,
    pulse_length=None,
    /,
    *,
    method: Literal["published", "strip"] = "published",
    highest_velocity_cm_h=40.0,
    tangential_to_axial_diffusivity=1.0,
    estimator: Literal["log_of_means", "mean_of_logs"] = "log_of_means",
):
    """Heat pulse velocity of the sap beside the wound.

    A strip of wood in which no sap moves slows the pulse down. The published cubic holds for
    needles 6 mm either side of the heater read 60 to 100 s after the pulse; the trade's validations
    were made with it. The strip is the exact solution for any width and way of reading. At 60 to
    100 s it corrects by 13 to 27 % less than the cubic does: the two are not to be mixed. Downward
    flow is corrected by its magnitude.

    Parameters
    ----------
    heat_pulse_velocity : (probe, point, time) [m s-1]
        Apparent, positive upwards, zero without flow, by the diffusivity and the mean of the
        spacings below.
    wound_width : (probe) [m]
        Of the wounded wood across the needles; may change with time. 0.1 mm changes the result
        by 2 to 4 %.
    thermal_diffusivity : (probe) [m2 s-1]
        Of fresh sapwood, along the stem; may change with time. For the strip, as all that follow.
    spacing_downstream, spacing_upstream : (probe) [m]
        From the heater to the needles.
    window_from, window_to : (probe) [s]
        Of the readings, since the end of heating.
    pulse_length : (probe) [s]
        Of the heating.
    method : text
        "published": the cubic of the published table, widths of 1.7 to 3.0 mm, linear in width
        between them, apparent velocities of 40 cm h-1 at most. "strip": exact for a strip without
        flow.
    highest_velocity_cm_h : float [cm h-1]
        Highest apparent velocity that is corrected; the cubic runs away beyond 40 and is not used
        there whatever this says. The strip ends sooner where its response has become half as steep
        as without flow (47 at 2.0 mm, 31 at 3.0 mm). Common practice.
    tangential_to_axial_diffusivity : float [1]
        Diffusivity across the stem over that along it, of the strip. 0.7 corrects by 9.5 % more.
        Own judgement: 1, as no measurement is at hand.
    estimator : text
        What the log ratio is made of, for the strip: "log_of_means", of the mean rises over the
        window, or "mean_of_logs", the mean of the log ratios of the window's samples. Common
        practice: loggers keep means.

    Returns
    -------
    heat_pulse_velocity : (probe, point, time) [m s-1]
        NaN where one of the flags is set.
    beyond_wound_limit : (probe, point, time) [bool]
        Apparent velocity beyond the highest, up or down.
    no_wound_width : (probe, point, time) [bool]
        No width, or for the cubic one outside the table or a probe that is read otherwise than
        the table's; for the strip also where the needles, the window or the pulse are not known.
    no_wood_sample : (probe, point, time) [bool]
        For the strip, where the diffusivity is missing.

    Source: Burgess et al. (2001), Tree Physiology 21, table 1; from memory. The strip: own
    derivation, see `sapflux.physics.wound_strip`.
    """
    if method == "published":
        layout = spacing_downstream, spacing_upstream, window_from, window_to
        corrected, highest = _published(heat_pulse_velocity, wound_width, layout)
        unknown, unsampled = highest.isnull(), None
    else:
        geometry = spacing_downstream, spacing_upstream, window_from, window_to, pulse_length
        reading = wound_strip.Strip(
            0.0, tangential_to_axial=tangential_to_axial_diffusivity, estimator=estimator
        )
        facts = wound_width, thermal_diffusivity, *geometry
        corrected, highest = _strip(heat_pulse_velocity, *facts, reading=reading)
        unknown = sum(fact.isnull() for fact in (wound_width, *geometry)) > 0
        unsampled = thermal_diffusivity.isnull()
    highest = np.minimum(highest, highest_velocity_cm_h * heat_pulse.CM_PER_HOUR)
    beyond = np.abs(heat_pulse_velocity) > highest * heat_pulse.ROUNDED_UP
    made = {
        "heat_pulse_velocity": corrected.where(~beyond),
        "beyond_wound_limit": beyond,
        "no_wound_width": unknown,
    }
    if unsampled is not None:
        made["no_wood_sample"] = unsampled
    return {
        name: array.broadcast_like(heat_pulse_velocity).transpose(*heat_pulse_velocity.dims)
        for name, array in made.items()
    }


def _published(velocity, width, layout):
    """Corrected velocity, and the highest apparent one [m s-1]; NaN for widths not in the table,
    and for probes read otherwise than the table's.
    """
    corrected = xr.apply_ufunc(heat_pulse.wound_velocity, velocity, width)
    # The cubic of no velocity tells whether the width is one that the table covers.
    covered = xr.apply_ufunc(heat_pulse.wound_velocity, xr.zeros_like(width), width)
    if all(fact is not None for fact in layout):
        covered = covered.where(heat_pulse.is_published_layout(*layout))
    return corrected.where(covered.notnull()), covered + heat_pulse.HIGHEST_WOUND_VELOCITY


def _strip(velocity, width, diffusivity, *geometry, reading):
    """Corrected velocity, and the highest apparent one [m s-1], NaN where a fact is missing.

    Probes read alike share their curves.
    """
    velocity, width, diffusivity = xr.broadcast(velocity, width, diffusivity)
    corrected, highest = xr.full_like(velocity, np.nan), xr.full_like(velocity, np.nan)
    geometry = xr.broadcast(*geometry)
    rows = np.stack([fact.values.ravel() for fact in geometry], axis=1)
    for row in np.unique(rows[~np.isnan(rows).any(axis=1)], axis=0):
        alike = sum(fact == value for fact, value in zip(geometry, row, strict=True)) == len(row)
        met = alike.broadcast_like(velocity).transpose(*velocity.dims).values
        own = replace(reading, **dict(zip(READING, row.tolist(), strict=True)))
        corrected.values[met], highest.values[met] = wound_strip.sap_velocity(
            velocity.values[met], width.values[met], diffusivity.values[met], own
        )
    return corrected, highest
