"""Heat dissipation needles that lie partly in wood without flow."""

import xarray as xr

from sapflux.physics import dissipation
from sapflux.stage import stage


@stage(
    chain="heat_dissipation",
    makes="heated_difference",
    flags=("no_contact", "contact_undefined"),
    limits={"least_fraction": (0.05, 1.0)},
)
def sapwood_contact(
    heated_difference, zero_flow_difference, contact_fraction=None, /, *, least_fraction=0.5
):
    """Temperature difference of that part of the needle that lies in conducting sapwood.

    Assumes that flow is uniform along the part in sapwood.

    Parameters
    ----------
    heated_difference, zero_flow_difference : (probe, point, time) [K]
        Measured, and without flow.
    contact_fraction : (probe, point) [1]
        Share of the needle in conducting sapwood. Where it is not given (NaN), the needle counts
        as wholly in sapwood.
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
        Colder than the part without flow alone would leave the needle.

    Source: Clearwater et al. (1999), Tree Physiology 19.
    """
    if contact_fraction is None or not (contact_fraction < 1.0).any():
        return {"heated_difference": heated_difference.copy()}
    # A whole needle is left as it is, also where there is no baseline.
    fraction = contact_fraction.fillna(1.0).broadcast_like(heated_difference)
    fraction = fraction.transpose(*heated_difference.dims)
    partial = fraction < 1.0
    corrected = xr.apply_ufunc(
        dissipation.sapwood_contact,
        heated_difference,
        zero_flow_difference,
        fraction.where(fraction >= least_fraction, 1.0),
    )
    no_contact = fraction < least_fraction
    both = heated_difference.notnull() & zero_flow_difference.notnull()
    undefined = partial & ~no_contact & both & corrected.isnull()
    result = heated_difference.where(~partial, corrected)
    return {
        "heated_difference": result.where(~no_contact),
        "no_contact": no_contact,
        "contact_undefined": undefined,
    }
