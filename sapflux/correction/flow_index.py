"""Flow index of heat dissipation."""

import xarray as xr

from sapflux.physics import dissipation
from sapflux.stage import stage


@stage(
    chain="heat_dissipation",
    makes="flow_index",
    flags=("above_baseline", "heater_failure"),
    limits={"smallest_difference_K": (0.01, 10.0)},
)
def flow_index(heated_difference, zero_flow_difference, /, *, smallest_difference_K=0.5):
    """How far sap flow has cooled a continuously heated needle.

    Parameters
    ----------
    heated_difference : (probe, point, time) [K]
        Heated minus reference needle, of the part in sapwood.
    zero_flow_difference : (probe, point, time) [K]
        The same without flow.
    smallest_difference_K : float [K]
        A smaller difference means heater or wiring failure: of 10 K without flow, 0.5 K would be
        an index of 19, ten times what the calibration covers. Own judgement.

    Returns
    -------
    flow_index : (probe, point, time) [1]
        Zero without flow. Negative above the baseline: kept, not clipped.
    above_baseline : (probe, point, time) [bool]
        Where it is negative.
    heater_failure : (probe, point, time) [bool]
        Where the difference is below the smallest; the index is NaN.

    Source: Granier (1985), Ann. Sci. For. 42.
    """
    failed = heated_difference < smallest_difference_K
    index = xr.apply_ufunc(dissipation.flow_index, zero_flow_difference, heated_difference)
    index = index.where(~failed)
    return {"flow_index": index, "above_baseline": index < 0, "heater_failure": failed}
