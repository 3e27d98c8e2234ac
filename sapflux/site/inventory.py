"""Radii, sapwood and ground area: what the surveys, cores and plots say of trees and stands.

The latest survey counts; growth between surveys is not laid on the records.
"""

import math
from dataclasses import dataclass
from datetime import timedelta

from sapflux.errors import Fault, SiteError
from sapflux.units import CM2, CM_PER_M, M2_PER_HA, MM_PER_M

# Rows of one plot that are no further apart than this are one survey: measuring a plot may take
# days and be interrupted by weather, and two surveys lie a season apart. Source: own judgement.
SURVEY_LASTS = timedelta(days=30)


@dataclass(frozen=True)
class Composition:
    """One species of one stand, from the latest survey of each of the stand's plots.

    sapwood_per_ground and basal_area_per_ground are m2 per m2 of plan area. Sapwood is NaN if a
    stem has neither cores nor an allometry. `beyond_disc` counts stems whose allometry gives more
    sapwood than the stem has wood (allometries may, in thin stems): their area is not capped.
    """

    stems: int
    stems_per_ground: float
    basal_area_per_ground: float
    sapwood_per_ground: float
    beyond_disc: int

    @property
    def stems_per_ha(self):
        """Living stems per hectare of plan area."""
        return self.stems_per_ground * M2_PER_HA

    @property
    def basal_area_m2_ha(self):
        """Basal area over bark in m2 per hectare of plan area."""
        return self.basal_area_per_ground * M2_PER_HA


def annulus_area(outer_radius, depth):
    """Area [m2] of a ring of that depth [m] inside that radius [m].

    Source: geometry (own derivation).

    >>> round(annulus_area(0.15, 0.02) * 1e4, 1)  # 15 cm, outer 2 cm
    175.9
    """
    return math.pi * (outer_radius**2 - (outer_radius - depth) ** 2)


def annulus_depth(outer_radius, area):
    """Depth [m] of the ring of that area [m2] inside that radius [m]; None if it is too large.

    Source: inverse of `annulus_area` (own derivation).

    >>> round(annulus_depth(0.15, annulus_area(0.15, 0.02)), 12)
    0.02
    """
    inner = outer_radius**2 - area / math.pi
    return outer_radius - math.sqrt(inner) if inner >= 0 else None


def tree_row(site, tree):
    """The row of a tree in `trees.csv`, or None."""
    return next((row for row in site.table("trees") if row.tree == tree), None)


def species_row(site, species):
    """The row of a species in `species.csv`, or None."""
    return next((row for row in site.table("species") if row.species == species), None)


def latest_survey(site, tree):
    """The latest row of `surveys.csv` of the stem that is named as the tree, or None.

    A tree outside all plots is its own row of `trees.csv`, if that gives a diameter.
    Stem names may recur from stand to stand: only plots of the tree's stand are looked at.
    """
    known = tree_row(site, tree)
    plots = {row.plot for row in site.table("plots") if known and row.stand == known.stand}
    rows = [
        row
        for row in site.table("surveys")
        if row.stem == tree and (not known or row.plot in plots)
    ]
    outside = known if known is not None and known.diameter_cm is not None else None
    return max(rows, key=lambda row: row.date, default=outside)


def core_rows(site, tree):
    """The tree's cores that count: of each face the latest date. Unnamed faces are all counted."""
    own = [row for row in site.table("cores") if row.tree == tree]
    last = {}
    for row in own:
        last[row.face] = max(row.date, last.get(row.face, row.date))
    return [row for row in own if row.date == last[row.face]]


def bark_thickness(site, tree):
    """Thickness of one side's bark [m]: of `trees.csv`, else the mean of the cores; else None."""
    known = tree_row(site, tree)
    if known is not None and known.bark_mm is not None:
        return known.bark_mm / MM_PER_M
    given = [row.bark_mm for row in core_rows(site, tree) if row.bark_mm is not None]
    return math.fsum(given) / len(given) / MM_PER_M if given else None


def bark_known(site, tree):
    """Whether `xylem_radius` rests on the wood: diameter under bark, or bark thickness given."""
    row = latest_survey(site, tree)
    return row is not None and (row.under_bark or bark_thickness(site, tree) is not None)


def xylem_radius(site, tree):
    """Radius of the tree under bark [m] at its latest survey; None where the site has no diameter.

    The diameter less twice the bark. Where no bark is known it is the radius over bark, which is
    too large by the bark (`bark_known` tells). None, too, where the bark leaves no wood.
    """
    row = latest_survey(site, tree)
    return None if row is None else _radius_inside_bark(row, bark_thickness(site, tree))


def sapwood_depth(site, tree):
    """Depth of the tree's sapwood below cambium [m]; None where the site does not say.

    The mean of its cores' faces; without cores, the depth of the ring whose area the species'
    allometry gives. Never capped: None where that area is more than the stem has wood.
    """
    cores = core_rows(site, tree)
    if cores:
        return _mean_depth(cores)
    radius, area = xylem_radius(site, tree), tree_sapwood_area(site, tree)
    return None if radius is None or area is None else annulus_depth(radius, area)


def tree_sapwood_area(site, tree):
    """Conducting sapwood area of an instrumented tree [m2]; None where the site does not say.

    See `stem_sapwood_area`.
    """
    row, known = latest_survey(site, tree), tree_row(site, tree)
    if row is None:
        return None
    species = known.species if known else row.species
    return stem_sapwood_area(
        row, core_rows(site, tree), bark_thickness(site, tree), species_row(site, species)
    )


def stem_sapwood_area(row, cores, bark, species):
    """Conducting sapwood area of a surveyed stem [m2]; None where neither source says.

    row : its row of `surveys.csv`; cores : its rows of `cores.csv`; bark : thickness [m] or None;
    species : the row of `species.csv` or None.
    With cores: the ring as deep as the mean of the faces, None if deeper than the radius.
    Without: a D^b of the species, D over bark in cm and the area in cm2.
    """
    if cores:
        radius, depth = _radius_inside_bark(row, bark), _mean_depth(cores)
        return annulus_area(radius, depth) if radius is not None and depth <= radius else None
    if species is None or species.sapwood_area_a_cm2 is None or species.sapwood_area_b is None:
        return None
    diameter_cm = _diameter_over_bark(row, bark) * CM_PER_M
    return species.sapwood_area_a_cm2 * diameter_cm**species.sapwood_area_b * CM2


def is_beyond_disc(site, row):
    """Whether a surveyed stem has more sapwood, by its allometry, than it has wood."""
    known = tree_row(site, row.stem)
    stand = known.stand if known is not None else None
    given = _stem(site, stand, row)
    area, radius = stem_sapwood_area(row, **given), _radius_inside_bark(row, given["bark"])
    return area is not None and (radius is None or area > math.pi * radius**2)


def sapwood_per_ground(site):
    """(stand, species) -> conducting sapwood area per plan ground area [m2 m-2]."""
    return {key: part.sapwood_per_ground for key, part in composition(site).items()}


def composition(site):
    """(stand, species) -> `Composition` of its living stems, keys sorted.

    Each plot counts with its latest survey: stems of earlier ones that it does not list are gone.
    A stem of diameter D stands for 1 / (plan area of the stand's plots that measure stems of
    D and do not lie within another such plot); a stem thinner than its own plot measures was no
    part of the sample and is left out, and one in nested plots is listed in one of them. A plot
    without rows counts as empty. Dead and removed stems carry nothing. SiteError: a plot area
    that is not known.
    """
    areas = _plan_areas(site)
    sums = {}
    for plot, row in living_stems(site):
        stem = _stem(site, plot.stand, row)
        diameter = _diameter_over_bark(row, stem["bark"])
        if diameter < plot.smallest_diameter_cm / CM_PER_M:
            continue
        ground = _sampled_area(site, areas, plot.stand, diameter)
        basal = math.pi * diameter**2 / 4.0
        sapwood = stem_sapwood_area(row, **stem)
        radius = _radius_inside_bark(row, stem["bark"])
        disc = math.pi * radius**2 if radius is not None else 0.0
        sums.setdefault((plot.stand, row.species), []).append((
            1.0 / ground,
            basal / ground,
            math.nan if sapwood is None else sapwood / ground,
            sapwood is not None and sapwood > disc,
        ))  # fmt: skip
    return {key: _summed(parts) for key, parts in sorted(sums.items())}


def living_stems(site):
    """(row of `plots.csv`, row of `surveys.csv`) of every living stem in each plot's last survey.

    A survey of a plot is what was measured within SURVEY_LASTS; of a stem measured twice in it
    the later row counts.
    """
    for plot in site.table("plots"):
        for stems in plot_surveys(site, plot.plot)[:1]:
            yield from ((plot, row) for row in stems.values() if row.status == "alive")


def plot_surveys(site, plot):
    """The surveys of a plot, latest first: each a stem's name -> its (later) row."""
    rows = [row for row in site.table("surveys") if row.plot == plot]
    rows.sort(key=lambda row: row.date)
    found = []
    while rows:
        last = rows[-1].date
        found.append({row.stem: row for row in rows if last - row.date <= SURVEY_LASTS})
        rows = [row for row in rows if last - row.date > SURVEY_LASTS]
    return found


def surveyed_diameter(site, plot, row):
    """Diameter over bark [m] of a stem surveyed in a plot; under bark where no bark is known."""
    return _diameter_over_bark(row, _stem(site, plot.stand, row)["bark"])


def plots_within(site):
    """Plot -> the next larger plot that it lies in, "" for none."""
    return {row.plot: row.within for row in site.table("plots")}


def outer_plots(within, plot):
    """Names of the plots that a plot lies in, from the next one outwards; see `plots_within`."""
    found, name = [], plot
    while (name := within.get(name, "")) and name != plot and name not in found:
        found.append(name)
    return found


def plan_area(plot):
    """Horizontal area of a plot [m2]: as given, else its area along the slope times cos(slope).

    NaN where neither is known.

    Source: geometry (own derivation).
    """
    if plot.plan_area_m2 is not None:
        return plot.plan_area_m2
    if plot.slope_area_m2 is None or plot.slope_deg is None:
        return math.nan
    return plot.slope_area_m2 * math.cos(math.radians(plot.slope_deg))


def _plan_areas(site):
    areas = {plot.plot: plan_area(plot) for plot in site.table("plots")}
    unknown = [name for name, area in areas.items() if math.isnan(area)]
    if unknown:
        raise SiteError([
            Fault(f"{site.folder}/plots.csv", f"plot {name!r} has no ground area",
                  "Give plan_area_m2, or slope_area_m2 and slope_deg.")
            for name in unknown
        ])  # fmt: skip
    return areas


def _sampled_area(site, areas, stand, diameter):
    """Plan area [m2] on which stems of that diameter [m] were measured in the stand."""
    counted = [
        plot
        for plot in site.table("plots")
        if plot.stand == stand and plot.smallest_diameter_cm / CM_PER_M <= diameter
    ]
    within, names = plots_within(site), {plot.plot for plot in counted}
    return math.fsum(
        areas[name] for name in sorted(names) if names.isdisjoint(outer_plots(within, name))
    )


def _stem(site, stand, row):
    """What `stem_sapwood_area` asks of a surveyed stem; only instrumented trees have cores."""
    known = tree_row(site, row.stem)
    own = known is None or known.stand == stand
    return {
        "cores": core_rows(site, row.stem) if own else [],
        "bark": bark_thickness(site, row.stem) if own else None,
        "species": species_row(site, row.species),
    }


def _summed(parts):
    stems, basal, sapwood, beyond = zip(*parts, strict=True)
    return Composition(
        len(parts), math.fsum(stems), math.fsum(basal), math.fsum(sapwood), sum(beyond)
    )


def _mean_depth(cores):
    return math.fsum(row.sapwood_depth_cm for row in cores) / len(cores) / CM_PER_M


def _radius_inside_bark(row, bark):
    radius = row.diameter_cm / 2.0 / CM_PER_M - (0.0 if row.under_bark else bark or 0.0)
    return radius if radius > 0 else None


def _diameter_over_bark(row, bark):
    """Diameter [m]; the one under bark where no bark is known."""
    return row.diameter_cm / CM_PER_M + (2.0 * (bark or 0.0) if row.under_bark else 0.0)
