"""Heat dissipation signal: from thermocouple voltage to temperature difference."""

from typing import Literal

import xarray as xr

from sapflux.constants import ZERO_CELSIUS
from sapflux.physics import thermocouple
from sapflux.stage import stage


@stage(
    chain="heat_dissipation",
    makes="heated_difference",
    flags="no_stem_temperature",
    method_needs={"its90_measured": ("stem_temperature",)},
    limits={
        "assumed_stem_temperature_degC": (-20.0, 50.0),
        "sensitivity_uV_per_K": (30.0, 70.0),
    },
)
def heated_difference(
    heated_emf=None,
    heated_difference=None,
    stem_temperature=None,
    /,
    *,
    method: Literal["its90_given", "its90_measured", "constant"] = "its90_given",
    assumed_stem_temperature_degC=20.0,
    sensitivity_uV_per_K=40.0,
):
    """Temperature of the heated minus the reference needle.

    A difference logged in kelvin stays as it is; a logged voltage of a type T pair is converted.
    The voltage per kelvin rises with the temperature of the stem by 0.2 % per kelvin, and the
    wood conducts better by about as much, which lowers the difference: the two offset each other
    in the flow index. Correct for both or for neither. A constant stem temperature, or a
    constant sensitivity, corrects for neither; "its90_measured" undoes the first alone and is
    meant for stems whose temperature hardly changes or where conduction is treated as well.

    Parameters
    ----------
    heated_emf : (probe, point, time) [V]
        Positive while the heated needle is warmer.
    heated_difference : (probe, point, time) [K]
        As logged.
    stem_temperature : (probe, time) [K]
        At the reference needle.
    method : text
        "its90_given" takes the assumed stem temperature, "its90_measured" the logged one,
        "constant" the sensitivity. The default corrects for neither, see above. Own judgement.
    assumed_stem_temperature_degC : float [degC]
        Of "its90_given", temperature of the reference needle. Common practice.
    sensitivity_uV_per_K : float [uV K-1]
        Of "constant", voltage per kelvin. Common practice for type T; ITS-90 gives 40.27 at
        20 degC.

    Returns
    -------
    heated_difference : (probe, point, time) [K]
        NaN where neither signal is, or without the stem temperature that the method needs.
    no_stem_temperature : (probe, point, time) [bool]
        Where that temperature is missing under a voltage.

    ValueError if neither signal is given.

    Source: Burns et al. (1993), NIST Monograph 175 (ITS-90, type T).
    """
    if heated_emf is None and heated_difference is None:
        raise ValueError("neither heated_emf nor heated_difference is given")
    if heated_emf is None:
        return {"heated_difference": heated_difference.copy()}
    if method == "constant":
        converted = heated_emf / (sensitivity_uV_per_K * 1e-6)
    elif method == "its90_given":
        reference = assumed_stem_temperature_degC + ZERO_CELSIUS
        converted = xr.apply_ufunc(thermocouple.difference, heated_emf, reference)
    else:
        converted = xr.apply_ufunc(thermocouple.difference, heated_emf, stem_temperature)
        converted = converted.transpose(*heated_emf.dims)
    whole = converted if heated_difference is None else heated_difference.fillna(converted)
    result = {"heated_difference": whole}
    if method == "its90_measured":
        result["no_stem_temperature"] = whole.isnull() & heated_emf.notnull()
    return result
