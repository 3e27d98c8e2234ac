"""Corrections, from the measured signal of a probe to its flux density.

Importing this package registers every stage of the two method chains.
"""

from sapflux.correction import (
    contact,
    dissipation_flux,
    flow_index,
    heat_ratio,
    heated_difference,
    power_loss,
    pulse_velocity,
    ratio_flux,
    thermal_diffusivity,
    wound,
    zero_flow,
    zero_offset,
)

__all__ = [
    "contact",
    "dissipation_flux",
    "flow_index",
    "heat_ratio",
    "heated_difference",
    "power_loss",
    "pulse_velocity",
    "ratio_flux",
    "thermal_diffusivity",
    "wound",
    "zero_flow",
    "zero_offset",
]
