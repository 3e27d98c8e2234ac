"""Heat dissipation signal: from thermocouple voltage to temperature difference."""

from typing import Literal

import xarray as xr

from sapflux.constants import ZERO_CELSIUS
from sapflux.physics import thermocouple
from sapflux.stage import stage

AT_STEM_TEMPERATURE = ("its90_and_wood", "its90_alone")


@stage(
    chain="heat_dissipation",
    makes="heated_difference",
    flags="no_stem_temperature",
    method_needs=dict.fromkeys(AT_STEM_TEMPERATURE, ("stem_temperature",)),
    limits={
        "assumed_stem_temperature_degC": (-20.0, 50.0),
        "sensitivity_uV_per_K": (30.0, 70.0),
        "conductivity_growth_percent_per_K": (0.0, 1.0),
        "reference_temperature_degC": (-20.0, 50.0),
    },
    unverified=(
        "growth of the conductivity of wood with temperature "
        "(Wood Handbook, physical properties: 2 to 3 % in 10 K)",
    ),
)
def heated_difference(
    heated_emf=None,
    heated_difference=None,
    stem_temperature=None,
    /,
    *,
    method: Literal["its90_given", "its90_and_wood", "its90_alone", "constant"] = "its90_given",
    assumed_stem_temperature_degC=20.0,
    sensitivity_uV_per_K=40.0,
    conductivity_growth_percent_per_K=0.2,
    reference_temperature_degC=20.0,
):
    """Temperature of the heated minus the reference needle.

    A voltage of a type T pair is converted. The voltage per kelvin rises with the temperature of
    the stem by 0.2 % per kelvin, and the wood conducts better by about as much, which lowers the
    difference: the two offset each other in the flow index. Correct for both or for neither.
    "its90_given" and "constant" correct for neither. "its90_and_wood" corrects for both: it
    converts at the logged stem temperature and brings the difference to what wood of the
    reference temperature would show. "its90_alone" leaves the wood out, and so makes the error
    that the pair avoids: a stem warmer by 8 K at day reads 12 % high in flux density at an index
    of 0.2. It is there to show that, and for wood whose conduction is known not to change.

    A difference logged in kelvin stays as it is with every method. The logger converted it, by
    what is not known: with one sensitivity, as most do, it carries both effects, which offset
    each other, and correcting it for the wood would leave the other alone.

    Parameters
    ----------
    heated_emf : (probe, point, time) [V]
        Positive while the heated needle is warmer.
    heated_difference : (probe, point, time) [K]
        As logged.
    stem_temperature : (probe, time) [K]
        At the reference needle.
    method : text
        See above. The default corrects for neither: it needs no stem temperature. Own judgement.
    assumed_stem_temperature_degC : float [degC]
        Of "its90_given", temperature of the reference needle. Common practice.
    sensitivity_uV_per_K : float [uV K-1]
        Of "constant", voltage per kelvin. Common practice for type T; ITS-90 gives 40.27 at
        20 degC.
    conductivity_growth_percent_per_K : float [% K-1]
        Of "its90_and_wood", growth of the thermal conductivity of wood with its temperature.
        Source: Wood Handbook (2 to 3 % in 10 K), value from memory.
    reference_temperature_degC : float [degC]
        Of "its90_and_wood", temperature of the wood to which the difference is brought. It hardly
        touches the flow index, in which only ratios of differences count. Own judgement.

    Returns
    -------
    heated_difference : (probe, point, time) [K]
        NaN where neither signal is, or without the stem temperature that the method needs.
    no_stem_temperature : (probe, point, time) [bool]
        Where that temperature is missing under a voltage.

    ValueError if neither signal is given.

    Source: Burns et al. (1993), NIST Monograph 175 (ITS-90, type T). A heater of constant power
    warms its needle in inverse proportion to the conductivity around it (own derivation).
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
        if method == "its90_and_wood":
            warmer = stem_temperature - (reference_temperature_degC + ZERO_CELSIUS)
            converted = converted * (1.0 + conductivity_growth_percent_per_K / 100.0 * warmer)
        converted = converted.transpose(*heated_emf.dims)
    whole = converted if heated_difference is None else heated_difference.fillna(converted)
    result = {"heated_difference": whole}
    if method in AT_STEM_TEMPERATURE:
        result["no_stem_temperature"] = whole.isnull() & heated_emf.notnull()
    return result
