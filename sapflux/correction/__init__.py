"""Corrections, from the measured signal of a probe to its flux density.

Importing this package registers every stage of the two method chains.
"""

from sapflux.correction import (
    ageing,
    contact,
    dissipation_flux,
    flow_index,
    frost,
    heat_ratio,
    heated_difference,
    heating_cycle,
    high_flow,
    natural_gradient,
    power_loss,
    pulse_velocity,
    ratio_flux,
    thermal_diffusivity,
    wound,
    zero_flow,
    zero_flow_ratio,
)

__all__ = [
    "ageing",
    "contact",
    "dissipation_flux",
    "flow_index",
    "frost",
    "heat_ratio",
    "heated_difference",
    "heating_cycle",
    "high_flow",
    "natural_gradient",
    "power_loss",
    "pulse_velocity",
    "ratio_flux",
    "thermal_diffusivity",
    "wound",
    "zero_flow",
    "zero_flow_ratio",
]
