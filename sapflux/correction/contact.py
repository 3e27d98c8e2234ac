"""Heat dissipation needles past which sap flows unevenly, or past a part of which none does."""

from typing import Literal

import numpy as np
import xarray as xr

from sapflux.physics import dissipation
from sapflux.physics.needle import even_cooling
from sapflux.schema import RECORD
from sapflux.site.laying import as_rows, unchanged_spans
from sapflux.stage import stage


@stage(
    chain="heat_dissipation",
    makes="heated_difference",
    flags=("no_contact", "contact_undefined"),
    limits={"least_fraction": (0.05, 1.0)},
    follows={"calibration": ("flux_density", "method")},
)
def sapwood_contact(
    heated_difference,
    zero_flow_difference,
    contact_fraction=None,
    radial_from=None,
    radial_to=None,
    sapwood_depth=None,
    relative_profile=None,
    calibration_factor=None,
    calibration_exponent=None,
    /,
    *,
    method: Literal["radial_profile", "even_flux"] = "radial_profile",
    calibration: Literal["species_else_general", "species", "general"] = "species_else_general",
    least_fraction=0.5,
):
    """Temperature difference of a needle wholly in sapwood and cooled evenly by the mean flow.

    A needle shows the mean temperature along its length, in which slow and dead wood counts for
    more than it carries. By "radial_profile" the difference is found that the mean flux density
    along the part in sapwood, J, would make: of the mean over the needle of
    zero-flow difference / (1 + K(J s)) = difference, with s the relative profile, of mean 1 along
    the part in sapwood and 0 beyond. Left alone, flux that falls along the needle from 12 to
    7 cm h-1 reads 0.6 % low, from 15 to 3 cm h-1 4 %, half a Gaussian of half the needle from
    20 cm h-1 8 %. Where the probe's tree has no profile or no depth of sapwood, or the profile is
    negative along the needle, flow counts as even along the part in sapwood, as by "even_flux":
    difference less the share of the part without flow, over the share in sapwood.

    Parameters
    ----------
    heated_difference, zero_flow_difference : (probe, point, time) [K]
        Measured, and without flow.
    contact_fraction : (probe, point) [1]
        Share of the needle in conducting sapwood. Where it is not given (NaN), the needle counts
        as wholly in sapwood. One that was measured goes before geometry: the profile along the
        needle is laid over that share of it.
    radial_from, radial_to, sapwood_depth : (probe, point) and (probe) [m]
        Where the needle begins and ends, and where sapwood ends, below cambium.
    relative_profile : (probe, relative_depth) [1]
        Relative flux density from cambium to heartwood; NaN for probes without. Facts may change
        with time.
    calibration_factor, calibration_exponent : (probe) [kg m-2 s-1] and [1]
        Of the species' own calibration. Of either calibration only the exponent enters.
    method : text
        "radial_profile" or "even_flux", see above. Own judgement: the same shape then carries the
        flux density over the stem.
    calibration : text
        Which calibration's exponent counts; it follows `method` of the recipe's flux_density,
        and none else is taken.
    least_fraction : float [1]
        Least share of the needle in sapwood that is corrected for: with less, the error of the
        correction explodes. Common practice.

    Returns
    -------
    heated_difference : (probe, point, time) [K]
        NaN where either flag is set.
    no_contact : (probe, point, time) [bool]
        Too little of the needle in sapwood.
    contact_undefined : (probe, point, time) [bool]
        As cold as the part without flow alone would leave the needle, or colder.

    Source: Clearwater et al. (1999), Tree Physiology 19; for uneven flow own derivation, to 1e-9
    of J at flow indices from 0.01 to 10.
    """
    heated = heated_difference.transpose(*RECORD)
    zero = zero_flow_difference.transpose(*RECORD)
    fraction = _fraction(contact_fraction, heated)
    no_contact = fraction < least_fraction
    # A needle evenly cooled is left as it is, also where there is no baseline.
    result = heated.values.copy()
    partial = (fraction < 1.0) & ~no_contact
    if partial.any():
        usable = np.where(partial, fraction, 1.0)
        even = dissipation.sapwood_contact(heated.values, zero.values, usable)
        result = np.where(partial, even, result)
    shape_facts = (radial_from, radial_to, sapwood_depth, relative_profile)
    if method == "radial_profile" and all(fact is not None for fact in shape_facts):
        exponent = _exponent(calibration, calibration_factor, calibration_exponent, heated)
        _undo_shapes(result, heated.values, zero.values, (fraction, *shape_facts, exponent))
    both = np.isfinite(heated.values) & np.isfinite(zero.values)
    undefined = ~no_contact & both & np.isnan(result)
    return {
        "heated_difference": heated.copy(data=np.where(no_contact, np.nan, result)),
        "no_contact": heated.copy(data=np.broadcast_to(no_contact, heated.shape).copy()),
        "contact_undefined": heated.copy(data=undefined),
    }


def _fraction(contact_fraction, heated):
    """(probe, point, time or 1) share in sapwood, 1 where it is not given."""
    if contact_fraction is None:
        return np.ones((*heated.shape[:2], 1))
    laid = contact_fraction.fillna(1.0)
    last = ("time",) if "time" in laid.dims else ()
    like = heated if last else heated.isel(time=0, drop=True)
    laid = laid.broadcast_like(like).transpose("probe", "point", *last)
    return laid.values if last else laid.values[..., np.newaxis]


def _exponent(calibration, factor, exponent, heated):
    """(probe) exponent of the calibration in use, with time where it changes."""
    general = xr.DataArray(
        np.full(heated.sizes["probe"], dissipation.GENERAL_EXPONENT),
        {"probe": heated["probe"].values},
        ("probe",),
    )
    if calibration == "general" or factor is None or exponent is None:
        return general
    return exponent.where(factor.notnull(), dissipation.GENERAL_EXPONENT).fillna(
        dissipation.GENERAL_EXPONENT
    )


def _undo_shapes(result, heated, zero, facts):
    """Put the difference of even cooling where a needle's shape is known, needle by needle."""
    fraction, begin, end, depth, profile, exponent = facts
    sizes = {"probe": len(result)}
    depths = tuple(profile["relative_depth"].values.tolist())
    laid = [as_rows(fact, sizes) for fact in (begin, end, depth, profile, exponent)]
    for probe in range(len(result)):
        own = [part[probe] for part in (fraction, *laid)]
        for first, last in unchanged_spans(own, result.shape[2]):
            share, start, stop, deep, shape, power = (
                part[:, min(first, part.shape[-1] - 1)] for part in own
            )
            shape = tuple(shape.tolist())
            for point in range(result.shape[1]):
                cooling = even_cooling(
                    float(share[point]), float(start[point]), float(stop[point]), float(deep[0]),
                    float(power[0]), depths, shape,
                )  # fmt: skip
                if cooling is not None:
                    here = (probe, point, slice(first, last))
                    with np.errstate(divide="ignore", invalid="ignore"):
                        ratio = heated[here] / zero[here]
                    result[here] = cooling(ratio) * zero[here]
