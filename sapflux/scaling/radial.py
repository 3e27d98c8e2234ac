"""Sap flow of a whole stem from the points along one needle."""

from typing import Literal

import numpy as np

from sapflux import quality
from sapflux.scaling.annuli import point_weights
from sapflux.site.laying import as_rows, unchanged_spans
from sapflux.stage import stage


@stage(
    chain="scaling",
    makes=("probe_flow", "probe_filled_share"),
    flags=("incomplete_radius",),
    limits={"uncovered_mm": (0.0, 20.0)},
)
def probe_flow(
    flux_density,
    origin,
    xylem_radius,
    sapwood_depth,
    radial_from,
    radial_to,
    relative_profile=None,
    /,
    *,
    method: Literal["relative_profile", "annuli", "outer_value_inwards"] = "relative_profile",
    uncovered_mm=2.0,
):
    """Sap flow of the stem as one probe sees it: flux density integrated over the sapwood's rings.

    The sapwood is divided among the points of the needle, half-way between them. A point that
    begins beyond the sapwood counts for nothing and is not needed.

    Parameters
    ----------
    flux_density : (probe, point, time) [kg m-2 s-1]
        Mean along the part of each point in sapwood.
    origin : (probe, point, time) [1]
        How each value came to be.
    xylem_radius, sapwood_depth : (probe) [m]
        Radius under bark; depth of sapwood below cambium. A trailing time where they change.
    radial_from, radial_to : (probe, point) [m]
        Depths below cambium, NaN for points the needle does not have. Trailing time as above.
    relative_profile : (probe, relative_depth) [1]
        Relative flux density from cambium to heartwood; NaN for probes without. Trailing time as
        above.
    method : text
        "relative_profile": the shape of the profile carries each point's value over its rings; a
        probe without one must reach the heartwood, and then goes by "annuli". "annuli": each
        value holds for its rings, none beyond the deepest point. "outer_value_inwards": the
        deepest value holds down to the heartwood, which overestimates: +59 % in a worked example.
        The default assumes least about wood that no point reaches. Own judgement.
    uncovered_mm : float [mm]
        Sapwood beyond the deepest point that "annuli" leaves without flow; more than that and
        the probe is refused. Own judgement: the accuracy of a core.

    Returns
    -------
    probe_flow : (probe, time) [kg s-1]
        NaN where a point is missing.
    probe_filled_share : (probe, time) [1]
        Share of the weights that rests on filled values.
    incomplete_radius : (probe, time) [bool]
        Values there, but not of all points, or a part of the sapwood that none speaks for.

    Source: Hatton, Catchpole & Vertessy (1990), Tree Physiol. 6, annuli, from memory; the weights
    under a profile are an own derivation.
    """
    flux = flux_density.transpose("probe", "point", "time")
    weights = _weights(
        (xylem_radius, sapwood_depth, radial_from, radial_to, relative_profile),
        flux.sizes,
        method,
        uncovered_mm / 1000.0,
    )
    kinds = origin.transpose("probe", "point", "time").values
    filled = (kinds >= quality.ORIGINS["interpolated"]) & (kinds <= quality.ORIGINS["modelled"])
    flow, share = _integrated(flux.values, filled, weights)
    there = np.isfinite(flux.values).any(axis=1)
    like = flux.isel(point=0, drop=True)
    return {
        "probe_flow": like.copy(data=flow),
        "probe_filled_share": like.copy(data=share),
        "incomplete_radius": like.copy(data=there & np.isnan(flow)),
    }


def _integrated(flux, filled, weights):
    """Flow (probe, time) and its filled share; points are added in their order."""
    shape = (flux.shape[0], flux.shape[2])
    flow, area, on_filled = np.zeros(shape), np.zeros(shape), np.zeros(shape)
    for point in range(flux.shape[1]):
        weight = weights[:, point]
        counts = weight != 0  # also where it is unknown
        flow += np.where(counts, flux[:, point] * weight, 0.0)
        area += weight
        on_filled += np.where(filled[:, point], weight, 0.0)
    share = np.divide(on_filled, area, out=np.full(shape, np.nan), where=area > 0)
    return flow, np.where(np.isnan(flow), np.nan, share)


def _weights(facts, sizes, method, uncovered):
    """(probe, point, time) or (probe, point, 1), found once for each set of facts that occurs."""
    radius, depth, begin, end, profile = (as_rows(fact, sizes) for fact in facts)
    relative = facts[4]["relative_depth"].values if profile is not None else None
    given = [part for part in (radius, depth, begin, end, profile) if part is not None]
    length = max(part.shape[-1] for part in given)
    weights = np.empty((sizes["probe"], sizes["point"], length))
    known = {}
    for probe in range(sizes["probe"]):
        own = [part[probe] for part in given]
        for first, last in unchanged_spans(own, length):
            now = [part[:, min(first, part.shape[-1] - 1)] for part in own]
            key = b"".join(part.tobytes() for part in now)
            if key not in known:
                known[key] = point_weights(
                    now[0][0], now[1][0], now[2], now[3], relative,
                    now[4] if profile is not None else None, method=method, uncovered=uncovered,
                )  # fmt: skip
            weights[probe, :, first:last] = known[key][:, np.newaxis]
    return weights
