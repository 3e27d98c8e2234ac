"""The pipeline with the truth in place of what a stage made: what each step adds to the error.

Steps are replaced from the front: first the baseline is the true one, then what the needles read,
then what they would read if they were cooled evenly, then all of heat dissipation, then the heat
ratio as well, then the flow of the trees. What a replacement takes from the error is the
contribution of the steps it covers; what is left after the last belongs to the stand.
"""

import numpy as np

from sapflux.ingest.series import Series, on_records

# What is known in each round, and the name of the steps whose error the round takes away. Needles
# average unevenly cooled wood: what their correction leaves of that is told by itself.
NEEDLES = "sapwood_contact: what is left of uneven cooling along the needles"
ROUNDS = (
    ("zero_flow_difference", {"zero_flow"}),
    ("signal of heat dissipation: conversion, gradient, noise", {"zero_flow", "signal"}),
    (NEEDLES, {"zero_flow", "needles"}),
    ("calibration of heat dissipation", {"zero_flow", "heat_dissipation"}),
    ("heat ratio", {"zero_flow", "heat_dissipation", "heat_ratio"}),
    (
        "probe_flow and tree_flow, faces of the trees",
        {"zero_flow", "heat_dissipation", "heat_ratio", "trees"},
    ),
)
REST = "sapwood of the stand, gaps and totals"


def known_truth(truth, parts):
    """A function (chain, cube) for `compute`: the true values of those parts.

    truth : a virtual site's truth; parts : of "zero_flow", "signal" (what the needles read before
    sapwood_contact), "needles" (what evenly cooled ones would read, after it),
    "heat_dissipation", "heat_ratio", "trees".
    """

    def known(chain, cube):
        ends = cube["time"].values.astype("datetime64[s]")
        interval_s = int(cube.attrs["interval_s"])

        def laid(values):
            series = Series(truth.weather.end, truth.step_s, values)
            return on_records(series, ends, interval_s, least_share=1.0)

        if chain == "scaling":
            return _trees(truth, cube, laid) if "trees" in parts else {}
        made = {}
        if chain == "heat_dissipation" and "zero_flow" in parts:
            zero = _of_points(truth, cube, laid, lambda probe: _zero_flow(truth, probe))
            made["zero_flow_difference"] = {"zero_flow_difference": zero}
            if "signal" in parts:
                read = _of_points(truth, cube, laid, truth.needle_ratio)
                made["zero_flow_difference"]["heated_difference"] = zero * read
            if "needles" in parts:
                even = _of_points(truth, cube, laid, truth.even_ratio)
                made["sapwood_contact"] = {"heated_difference": zero * even}
        if chain in parts:
            flux = _of_points(truth, cube, laid, truth.point_flux)
            made["flux_density"] = {"flux_density": flux}
        return made

    return known


def _zero_flow(truth, probe):
    points = len(truth.point_flux(probe))
    return [truth.zero_flow(probe, point) for point in range(1, points + 1)]


def _of_points(truth, cube, laid, of_probe):
    values = np.full((cube.sizes["probe"], cube.sizes["point"], cube.sizes["time"]), np.nan)
    for row, name in enumerate(cube["probe"].values):
        for point, series in enumerate(of_probe(str(name))):
            values[row, point] = laid(series)
    return values


def _trees(truth, cube, laid):
    names = list(dict.fromkeys(cube["tree"].values.astype(str)))
    flows = np.array([laid(truth.tree_flow(name)) for name in names])
    return {"tree_flow": {"tree_flow": flows}}
