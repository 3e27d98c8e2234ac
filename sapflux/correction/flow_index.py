"""Flow index of heat dissipation."""

import xarray as xr

from sapflux.physics import dissipation
from sapflux.stage import stage


@stage(
    chain="heat_dissipation",
    makes="flow_index",
    flags=("above_baseline", "heater_failure"),
)
def flow_index(heated_difference, zero_flow_difference, /):
    """How far sap flow has cooled a continuously heated needle.

    Parameters
    ----------
    heated_difference : (probe, point, time) [K]
        Heated minus reference needle, of the part in sapwood.
    zero_flow_difference : (probe, point, time) [K]
        The same without flow.

    Returns
    -------
    flow_index : (probe, point, time) [1]
        Zero without flow. Negative above the baseline: kept, not clipped.
    above_baseline : (probe, point, time) [bool]
        Where it is negative.
    heater_failure : (probe, point, time) [bool]
        Where the difference is not positive, which no heated needle gives; the index is NaN.

    Source: Granier (1985), Ann. Sci. For. 42.
    """
    index = xr.apply_ufunc(dissipation.flow_index, zero_flow_difference, heated_difference)
    return {
        "flow_index": index,
        "above_baseline": index < 0,
        "heater_failure": heated_difference <= 0,
    }
