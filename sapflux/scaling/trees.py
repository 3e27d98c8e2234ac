"""Sap flow of a tree from its probes."""

import numpy as np
import xarray as xr

from sapflux.stage import stage


@stage(
    chain="scaling",
    makes=("tree_flow", "tree_filled_share"),
)
def tree_flow(probe_flow, probe_filled_share, /):
    """Sap flow of a tree: the mean over those of its probes that have a value.

    Probes round the stem differ, so a tree that loses one for part of the time may step.

    Parameters
    ----------
    probe_flow : (probe, time) [kg s-1]
        Flow of the tree as each probe sees it, with the coordinate `tree` on probe.
    probe_filled_share : (probe, time) [1]
        Share of it that rests on filled values.

    Returns
    -------
    tree_flow : (tree, time) [kg s-1]
        NaN where no probe has a value. `stand` and `species` are coordinates of tree. Probes
        that belong to no tree are left out.
    tree_filled_share : (tree, time) [1]
        Mean over the same probes.

    Source: common practice: the mean of the faces.
    """
    flow = probe_flow.transpose("probe", "time")
    share = probe_filled_share.transpose("probe", "time").values
    owner = [str(name) for name in flow["tree"].values]
    names = [name for name in dict.fromkeys(owner) if name]
    values = np.full((len(names), flow.sizes["time"]), np.nan)
    shares = values.copy()
    for place, name in enumerate(names):
        own = [probe for probe, tree in enumerate(owner) if tree == name]
        values[place], shares[place] = _means(flow.values[own], share[own])
    coords = {"tree": np.array(names, dtype=str), "time": flow["time"].values}
    for label in ("stand", "species"):
        if label in flow.coords:
            of_tree = dict(zip(owner, flow[label].values.astype(str), strict=True))
            coords[label] = ("tree", np.array([of_tree[name] for name in names], dtype=str))
    return {
        "tree_flow": xr.DataArray(values, coords, ("tree", "time")),
        "tree_filled_share": xr.DataArray(shares, coords, ("tree", "time")),
    }


def _means(flows, shares):
    """Mean over the rows that have a value; rows are added in order, whatever the block."""
    count = np.zeros(flows.shape[1])
    total, filled = count.copy(), count.copy()
    for flow, share in zip(flows, shares, strict=True):
        there = np.isfinite(flow)
        count += there
        total += np.where(there, flow, 0.0)
        filled += np.where(there, share, 0.0)
    absent = np.full(len(count), np.nan)
    return (
        np.divide(total, count, out=absent.copy(), where=count > 0),
        np.divide(filled, count, out=absent.copy(), where=count > 0),
    )
