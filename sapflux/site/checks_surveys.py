"""`surveys.csv`: what must fit together, and with the plots."""

from itertools import pairwise

from sapflux.errors import Fault
from sapflux.site.inventory import (
    living_stems,
    outer_plots,
    plot_surveys,
    plots_within,
    surveyed_diameter,
)
from sapflux.site.reading import repeats
from sapflux.units import CM_PER_M

# Least share of a survey's living stems that the next one of the plot has to list. Stems die or
# are felled, and are listed as such; fewer mean that only some were measured again.
# Source: own judgement.
LEAST_LISTED = 0.5


def stem_faults(reading):
    """Stems that stand twice on one date, or name what is not there."""
    rows = list(reading.rows("surveys"))
    for where, row, former in repeats(rows, lambda r: (r.plot, r.stem, r.date)):
        yield Fault(
            where,
            f"stem {row.stem!r} of plot {row.plot!r} stands in {former} with the "
            f"same date {row.date}",
            "Keep one of them, or name the stems apart.",
        )
    for where, row in rows:
        yield from reading.unknown(where, "plot", "plots", "plot", row.plot)
        yield from reading.unknown(where, "species", "species", "species", row.species)


def nesting_faults(reading):
    """Living stems that an inner plot and one that it lies in both list."""
    places, within = _places(reading), plots_within(reading.site)
    listed = {(plot.plot, row.stem): row for plot, row in living_stems(reading.site)}
    for (plot, stem), row in listed.items():
        for outer in outer_plots(within, plot):
            if (outer, stem) in listed:
                former = places[id(listed[outer, stem])].rpartition(", ")[2]
                yield Fault(
                    places[id(row)],
                    f"stem {stem!r} of plot {plot!r} stands in {former} as a stem of {outer!r}, "
                    f"which {plot!r} lies in",
                    "It would count twice: keep it in one plot, or name two stems apart.",
                )
                break


def size_faults(reading):
    """Plots with living stems that are thinner than what the plot measures."""
    if not reading.are_whole("trees", "cores"):
        return
    places, thin = _places(reading), {}
    for plot, row in living_stems(reading.site):
        smallest = plot.smallest_diameter_cm / CM_PER_M
        if surveyed_diameter(reading.site, plot, row) < smallest:
            thin.setdefault(plot, []).append(row)
    for plot, rows in thin.items():
        stems = "1 living stem" if len(rows) == 1 else f"{len(rows)} living stems"
        yield Fault(
            places[id(rows[0])],
            f"plot {plot.plot!r} has smallest_diameter_cm {plot.smallest_diameter_cm:g} and "
            f"{stems} below it, the first {rows[0].stem!r} of {rows[0].diameter_cm:g} cm",
            "Take them out, or give in plots.csv the diameter from which on the plot lists all.",
        )


def coverage_faults(reading):
    """Plots without a stem that nobody says are empty, and empty ones with living stems."""
    surveyed = {row.plot for row in reading.site.table("surveys")}
    known = all(reading.has("plots", "plot", plot) for plot in surveyed)
    if not (surveyed and known and reading.are_whole("surveys")):
        return  # no survey yet, or a plot that is told there under a wrong name
    living = {plot.plot for plot, _ in living_stems(reading.site)}
    for where, row in reading.rows("plots"):
        if row.plot not in surveyed and not row.empty:
            yield Fault(
                where,
                f"plot {row.plot!r} has no stem in surveys.csv and would count as empty ground",
                "List its stems, or take it out; write yes in its column 'empty' if none stands "
                "on it.",
            )
        elif row.empty and row.plot in living:
            yield Fault(
                where,
                f"plot {row.plot!r} is empty, and surveys.csv has living stems of it",
                "Leave the column 'empty' blank, or mend the survey.",
            )


def resurvey_faults(reading):
    """Later surveys of a plot that leave out most of the stems of the one before."""
    if not reading.are_whole("surveys"):
        return
    places = _places(reading)
    for plot in dict.fromkeys(row.plot for row in reading.site.table("surveys")):
        for later, before in pairwise(plot_surveys(reading.site, plot)):
            alive = [stem for stem, row in before.items() if row.status == "alive"]
            missing = [stem for stem in alive if stem not in later]
            if len(alive) - len(missing) < LEAST_LISTED * len(alive):
                first = next(iter(later.values()))
                yield Fault(
                    places[id(first)],
                    f"the survey of plot {plot!r} of {first.date} leaves out {len(missing)} of the "
                    f"{len(alive)} living stems of the one before, the first {missing[0]!r}",
                    "What a survey does not list counts as gone: list every stem, with status "
                    "dead or removed where it is.",
                )


def _places(reading):
    """id of a row -> where it stands."""
    return {id(row): where for where, row in reading.rows("surveys")}


CHECKS = (stem_faults, nesting_faults, size_faults, coverage_faults, resurvey_faults)
