"""Stems and species of a virtual copy, drawn about what the site says of them."""

import math
from dataclasses import dataclass, replace

import numpy as np

from sapflux.physics import dissipation
from sapflux.site import inventory
from sapflux.units import CM2, CM_PER_M, MM_PER_M, G
from sapflux.virtual import assumptions, forest
from sapflux.virtual.copy_needs import SAP_FLOW
from sapflux.virtual.seeds import generator


@dataclass(frozen=True)
class SpeciesTruth:
    """What is true of a species. `nodes` is its mean shape, `leaves` (time) its leaf area [1]."""

    name: str
    anatomy: str
    response: forest.Response
    nodes: tuple
    leaves: np.ndarray
    factor: float  # kg m-2 s-1, of heat dissipation
    exponent: float
    registered: bool  # whether the site registers that calibration


@dataclass(frozen=True)
class StemTruth:
    """A stem and what belongs to it alone.

    `nodes` is its shape before the tilt, `own_profile` whether the site gives it for this tree.
    `count`: how many stems of the stand's ground it stands for; `plot` "" outside all plots.
    """

    stem: forest.Stem
    nodes: tuple
    own_profile: bool
    instrumented: bool
    count: float


def draw_species(site, seed, weather):
    """name -> `SpeciesTruth` of every species of `species.csv`."""
    drawn = {}
    for row in site.table("species"):
        mean = assumptions.RESPONSES[row.anatomy]
        rng = generator(seed, "species", row.species)
        greatest = mean.greatest_flux_density * math.exp(rng.normal(0, assumptions.SPECIES_SPREAD))
        response = forest.Response(
            greatest, mean.deficit_scale, mean.half_radiation, mean.dark_share,
            mean.half_soil_water, mean.storage_lag, night_cooling=assumptions.NIGHT_COOLING,
        )  # fmt: skip
        nodes = _profile_nodes(site, species=row.species) or assumptions.PROFILES[row.anatomy]
        known = [
            c
            for c in site.table("calibrations")
            if (c.species, c.method, c.heating) == (row.species, "heat_dissipation", "continuous")
        ]
        latest = max(known, key=lambda c: c.date, default=None)
        drawn[row.species] = SpeciesTruth(
            row.species, row.anatomy, response, nodes,
            leaf_area(row.leaf_on, row.leaf_off, site.standard(weather.end)),
            latest.factor_g_m2_s * G if latest else dissipation.GENERAL_FACTOR,
            latest.exponent if latest else dissipation.GENERAL_EXPONENT,
            latest is not None,
        )  # fmt: skip
    return drawn


def draw_stems(site, seed, species, azimuth=False):
    """`StemTruth` of every living stem of the latest surveys and of each tree with probes.

    azimuth : whether the flux density of stems differs around them.
    """
    carrying = {row.tree for row in site.table("probes") if row.method in SAP_FLOW}
    stands = {row.tree: row.stand for row in site.table("trees")}
    grounds, within = {}, inventory.plots_within(site)
    living = list(inventory.living_stems(site))
    names = [row.stem for _, row in living]
    taken = {*names, *stands}
    drawn = []
    for plot, row in living:
        own = stands.get(row.stem) == plot.stand
        name = row.stem
        if not own and (names.count(name) > 1 or name in stands):
            name = _free(f"{plot.plot}-{name}", taken)
        diameter = inventory.surveyed_diameter(site, plot, row)
        ground = grounds.setdefault(plot.stand, _sampled_area(site, within, plot.stand, math.inf))
        thick = diameter >= plot.smallest_diameter_cm / CM_PER_M
        area = _sampled_area(site, within, plot.stand, diameter)
        count = ground / area if thick and area > 0.0 else 0.0
        place = (plot.stand, plot.plot, row.species)
        instrumented = own and row.stem in carrying
        source = row.stem if own or name == row.stem else ""
        drawn.append(_stem(site, seed, species, name, source, place, diameter, instrumented, count))
    there = {(one.stem.stand, one.stem.name) for one in drawn}
    for row in site.table("trees"):
        survey = inventory.latest_survey(site, row.tree)
        if survey is None or (row.stand, row.tree) in there:
            continue
        bark = inventory.bark_thickness(site, row.tree) or 0.0
        diameter = survey.diameter_cm / CM_PER_M + (2.0 * bark if survey.under_bark else 0.0)
        place = (row.stand, "", row.species)
        own = (row.tree, row.tree, place, diameter, row.tree in carrying, 0.0)
        drawn.append(_stem(site, seed, species, *own))
    return tuple(_with_azimuth(one, seed) for one in drawn) if azimuth else tuple(drawn)


def stand_ground(site, stand):
    """Horizontal area of a stand's plots, those within another apart [m2]; NaN without plots."""
    return _sampled_area(site, inventory.plots_within(site), stand, math.inf) or math.nan


def leaf_area(leaf_on, leaf_off, standard):
    """Share of the leaf area at work at each moment of standard time: (time) [1].

    1 for a species in leaf all year (blank dates); else it rises from 0 at `leaf_on`, and falls
    to 0 at `leaf_off`, month and day, in straight lines.

    >>> leaf_area("05-01", "10-01", np.array(["2031-05-11", "2031-07-01"], "M8[s]")).tolist()
    [0.5, 1.0]
    """
    if not (leaf_on and leaf_off):
        return np.ones(len(standard))
    years = np.unique(standard.astype("datetime64[Y]")).astype(int) + 1970
    share, day = np.zeros(len(standard)), np.timedelta64(86400, "s")
    for year in range(int(years[0]) - 1, int(years[-1]) + 1):
        on = np.datetime64(f"{year}-{leaf_on}", "s")
        off = np.datetime64(f"{year + (leaf_off <= leaf_on)}-{leaf_off}", "s")
        rising = (standard - on) / day / assumptions.DAYS_OF_FLUSHING
        falling = (off - standard) / day / assumptions.DAYS_OF_AGEING
        share = np.maximum(share, np.clip(np.minimum(rising, falling), 0.0, 1.0))
    return share


def _with_azimuth(one, seed):
    rng = generator(seed, "azimuth", f"{one.stem.stand}/{one.stem.name}")
    amplitude = float(rng.uniform(*assumptions.AZIMUTH_AMPLITUDE))
    greatest = float(rng.uniform(0.0, 360.0))
    stem = replace(one.stem, azimuth_amplitude=amplitude, greatest_azimuth=greatest)
    return replace(one, stem=stem)


def _stem(site, seed, species, name, source, place, diameter, instrumented, count):
    """source : the name under which the site's tables know the stem, "" for none."""
    stand, plot, kind = place
    of_species, rng = species[kind], generator(seed, "stem", f"{stand}/{name}")
    normal = rng.normal(0.0, 1.0, 5)
    cores = inventory.core_rows(site, source) if source else []
    bark = inventory.bark_thickness(site, source) if source else None
    if bark is None:
        share = assumptions.BARK_SHARES[of_species.anatomy]
        bark = share * diameter * math.exp(assumptions.BARK_SPREAD * normal[0])
        deepest = max((max(r.depth_to_mm) for r in site.table("probes") if r.tree == source),
                      default=0.0)  # fmt: skip
        bark = max(min(bark, diameter / 2.0 - (deepest + 1.0) / MM_PER_M), 0.0)
    radius = diameter / 2.0 - bark
    if cores:
        depth = math.fsum(row.sapwood_depth_cm for row in cores) / len(cores) / CM_PER_M
        depth *= math.exp(assumptions.CORE_SPREAD * normal[1])
    else:
        row = inventory.species_row(site, kind)
        area = row.sapwood_area_a_cm2 * (diameter * CM_PER_M) ** row.sapwood_area_b * CM2
        area *= math.exp(assumptions.ALLOMETRY_SPREAD * normal[1])
        depth = inventory.annulus_depth(radius, area) or radius
    depth = min(max(depth, assumptions.SHALLOWEST_SAPWOOD * radius),
                assumptions.DEEPEST_SAPWOOD * radius)  # fmt: skip
    own_nodes = _profile_nodes(site, tree=source) if source else ()
    tilt = np.clip(assumptions.TILT_SPREAD * normal[3], -assumptions.LARGEST_TILT,
                   assumptions.LARGEST_TILT)  # fmt: skip
    stem = forest.Stem(
        name, stand, plot, kind, diameter, bark, depth,
        vigour=math.exp(assumptions.VIGOUR_SPREAD * normal[2]),
        tilt=0.0 if own_nodes else float(tilt),
        deficit_ratio=math.exp(assumptions.DEFICIT_SPREAD * normal[4]),
    )  # fmt: skip
    return StemTruth(stem, own_nodes or of_species.nodes, bool(own_nodes), instrumented, count)


def _profile_nodes(site, tree="", species=""):
    """Nodes of the site's latest profile of a tree or species, greatest ratio 1; () for none."""
    rows = [
        row
        for row in site.table("profiles")
        if (tree and row.tree == tree) or (species and not row.tree and row.species == species)
    ]
    if not rows:
        return ()
    started = [row.from_ for row in rows if row.from_ is not None]
    latest = max(started, default=None)
    rows = sorted((r for r in rows if r.from_ == latest), key=lambda r: r.relative_depth)
    greatest = max(row.ratio for row in rows)
    return tuple((row.relative_depth, row.ratio / greatest) for row in rows)


def _sampled_area(site, within, stand, diameter):
    """Plan area on which a stand's stems of a diameter [m] over bark were measured [m2]."""
    counted = {
        plot.plot: inventory.plan_area(plot)
        for plot in site.table("plots")
        if plot.stand == stand and plot.smallest_diameter_cm / CM_PER_M <= diameter
    }
    return math.fsum(
        area
        for name, area in counted.items()
        if counted.keys().isdisjoint(inventory.outer_plots(within, name))
    )


def _free(name, taken):
    while name in taken:
        name += "x"
    taken.add(name)
    return name
