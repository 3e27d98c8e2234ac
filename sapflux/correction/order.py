"""The order of work: which corrections must come before which.

Faults first, then the zero, then geometry, then the calibration. A correction works on what those
before it have made, so a recipe that lists them the other way round makes no sense and is refused.
"""

ORDER = {
    "heat_dissipation": (
        "heated_difference",
        "screen_power_loss",
        "zero_flow_difference",
        "sapwood_contact",
        "flow_index",
        "flux_density",
    ),
    "heat_ratio": (
        "rises",
        "log_heat_ratio",
        "thermal_diffusivity",
        "heat_pulse_velocity",
        "zero_offset",
        "wound",
        "flux_density",
    ),
}


def stages_before(chain, name):
    """The stages of the chain that must come before the stage `name`.

    >>> stages_before("heat_ratio", "thermal_diffusivity")
    ('rises', 'log_heat_ratio')
    """
    order = ORDER[chain]
    return order[: order.index(name)]
