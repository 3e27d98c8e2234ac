"""Probes of a virtual copy: their geometry as the site gives it, the rest drawn."""

import math
from dataclasses import replace

import numpy as np

from sapflux.physics import heat_pulse
from sapflux.site import dated, inventory
from sapflux.site.installations import episodes
from sapflux.units import CM2_PER_S, MM
from sapflux.virtual import assumptions, forest, sensors, strip
from sapflux.virtual.copy_needs import SAP_FLOW
from sapflux.virtual.seeds import generator


def installations(site):
    """The last installation of each probe, a row of `probes.csv`, in the order of the table."""
    names = dict.fromkeys(row.probe for row in site.table("probes"))
    return [episodes(site, name)[-1] for name in names]


def draw_probes(site, seed, species, gradients, known, wound="cubic"):
    """name -> the sensors of a sap-flow probe: one for each point, or one `RatioProbe`.

    species : name -> `SpeciesTruth`; gradients : as `draw_gradients` gives them; known : name of
    a stem -> `StemTruth`; wound : "cubic" or "strip". The face of a probe without azimuth is drawn.
    """
    drawn = {}
    for row in installations(site):
        if row.method == "heat_dissipation":
            parts = _dissipation(site, row, seed, species, gradients[row.tree])
        elif row.method in SAP_FLOW:
            parts = (_ratio(site, row, seed, species),)
            if wound == "strip":
                parts = (replace(parts[0], shown=_strip(parts[0])),)
        else:
            continue
        azimuth = row.azimuth_deg
        if azimuth is None:
            azimuth = generator(seed, "face", row.probe).uniform(0.0, 360.0)
        facing = float(forest.facing(known[row.tree].stem, azimuth))
        drawn[row.probe] = tuple(replace(part, facing=facing) for part in parts)
    return drawn


def draw_gradients(site, seed):
    """tree -> natural gradient in full sun [K]: every pair of needles in a stem shows the same."""
    return {
        row.tree: float(
            generator(seed, "gradient", row.tree).normal(0.0, assumptions.GRADIENT_SPREAD)
        )
        for row in installations(site)
    }


def true_wood(site, tree, of_species):
    """Dry density [kg m-3] and water content [1] of a tree: the site's, else of the anatomy."""
    given = []
    for column, usual in zip(
        ("dry_density_kg_m3", "water_content"), assumptions.WOOD[of_species.anatomy], strict=True
    ):
        measured = _measured(site, tree, of_species, column)
        given.append(usual if measured is None else measured)
    return tuple(given)


def true_diffusivity(site, tree, of_species):
    """Thermal diffusivity of a tree's wood [m2 s-1] where the site measured it; None else."""
    measured = _measured(site, tree, of_species, "diffusivity_cm2_s")
    return None if measured is None else measured * CM2_PER_S


def _measured(site, tree, of_species, column):
    """Mean of a column of `wood.csv` as written; None without a value."""
    nodes = dated.wood_nodes(site, tree, of_species.name, column)
    return math.fsum(value for _, value in nodes) / len(nodes) if nodes else None


def _of_tree(site, tree, species):
    return species[inventory.tree_row(site, tree).species]


def _dissipation(site, row, seed, species, gradient):
    own = _of_tree(site, row.tree, species)
    parts = []
    for point, (begin, end) in enumerate(zip(row.depth_from_mm, row.depth_to_mm, strict=True)):
        name = row.probe if point == 0 else f"{row.probe}/{point + 1}"
        rng = generator(seed, "probe", name)
        parts.append(sensors.DissipationProbe(
            name, row.tree, begin * MM, end * MM,
            zero_flow=float(rng.uniform(*assumptions.ZERO_FLOW)),
            drift=float(rng.choice([-1.0, 1.0]) * rng.uniform(*assumptions.DRIFT)),
            bow=float(rng.normal(0.0, assumptions.BOW_SPREAD)),
            gradient=gradient,
            noise=float(rng.uniform(*assumptions.DISSIPATION_NOISE)),
            factor=own.factor,
            exponent=own.exponent,
        ))  # fmt: skip
    return tuple(parts)


def _ratio(site, row, seed, species):
    own = _of_tree(site, row.tree, species)
    rng = generator(seed, "probe", row.probe)
    drawn = float(rng.uniform(*assumptions.WOUNDS))
    density, water = true_wood(site, row.tree, own)
    usual = assumptions.PULSE
    window = (
        usual["window"][0] if row.window_from_s is None else row.window_from_s,
        usual["window"][1] if row.window_to_s is None else row.window_to_s,
    )
    pulse = usual["pulse_length"] if row.pulse_length_s is None else row.pulse_length_s
    points = len(row.depth_from_mm)
    return sensors.RatioProbe(
        row.probe, row.tree,
        tuple(depth * MM for depth in row.depth_from_mm),
        tuple(depth * MM for depth in row.depth_to_mm),
        wound_width=_wound(site, row, own.name, drawn),
        offset=tuple(
            float(v) * heat_pulse.CM_PER_HOUR for v in rng.uniform(*assumptions.OFFSETS, points)
        ),
        noise=float(rng.uniform(*assumptions.RATIO_NOISE)),
        dry_density=density,
        water_content=water,
        spacing=row.spacing_downstream_mm * MM,
        spacing_upstream=row.spacing_upstream_mm * MM,
        pulse_length=pulse,
        pulse_energy=row.pulse_energy_J_m or usual["pulse_energy"],
        window=window,
        diffusivity=true_diffusivity(site, row.tree, own),
    )  # fmt: skip


def _strip(probe):
    reading = strip.Reading(
        probe.spacing, probe.spacing_upstream, probe.pulse_length, probe.window
    )  # fmt: skip
    return strip.apparent_velocities(probe.wound_width, probe.wood_diffusivity, reading)


def _wound(site, row, species, drawn):
    """Width [m]: the mean of what the site says, within the published table; else as drawn."""
    installed = [one.installed.date() for one in episodes(site, row.probe)]
    nodes = dated.wound_nodes(
        site, row.probe, len(installed) - 1, installed, row.tree, species
    )  # fmt: skip
    width = math.fsum(v for _, v in nodes) / len(nodes) * MM if nodes else drawn
    return float(np.clip(width, heat_pulse.NARROWEST_WOUND, heat_pulse.WIDEST_WOUND))
