"""`stands.csv` and `plots.csv`: what must fit together."""

from sapflux.errors import Fault
from sapflux.site.inventory import plan_area
from sapflux.site.reading import parted, repeats


def stand_faults(reading):
    """Stands that stand twice, or whose name outputs cannot write."""
    rows = list(reading.rows("stands"))
    for where, row, former in repeats(rows, lambda r: r.stand):
        yield Fault(where, f"stand {row.stand!r} stands in {former} already", "Keep one of them.")
    for where, row in rows:
        yield from parted(where, "stand", row.stand)


def plot_faults(reading):
    """Plots that stand twice, without one ground area, or in a stand that is not there."""
    rows = list(reading.rows("plots"))
    for where, row, former in repeats(rows, lambda r: r.plot):
        yield Fault(
            where,
            f"plot {row.plot!r} stands in {former} already",
            "Give each plot a name of its own.",
        )
    for where, row in rows:
        yield from reading.unknown(where, "stand", "stands", "stand", row.stand)
        yield from _area_faults(where, row)


def _area_faults(where, row):
    if (row.plan_area_m2 is None) == (row.slope_area_m2 is None):
        held = "no ground area" if row.plan_area_m2 is None else "two ground areas"
        yield Fault(
            where,
            f"plot {row.plot!r} has {held}",
            "Give plan_area_m2 (horizontal) or slope_area_m2 (along the slope), one of them.",
        )
    elif row.slope_area_m2 is not None and row.slope_deg is None:
        yield Fault(
            where,
            f"plot {row.plot!r} has slope_area_m2 and no slope_deg",
            "Give the slope: ground area is plan area.",
        )


def nesting_faults(reading):
    """Plots that lie in an unknown plot, in one another, or in another stand."""
    plots = {row.plot: row for row in reading.site.table("plots")}
    for where, row in reading.rows("plots"):
        if not row.within:
            continue
        yield from reading.unknown(where, "within: plot", "plots", "plot", row.within)
        circle = _circle(row.plot, plots)
        outer = plots.get(row.within)
        if circle and row.plot != min(circle):
            continue  # told with another of its plots
        if circle:
            yield Fault(
                where,
                f"plot {row.plot!r} lies within itself: {' in '.join(circle)}",
                "Name the larger plot that it lies in; leave the largest one's blank.",
            )
        elif outer is not None and outer.stand != row.stand:
            yield Fault(
                where,
                f"plot {row.plot!r} is in stand {row.stand!r} and lies within "
                f"{row.within!r} of stand {outer.stand!r}",
                "Nested plots share a stand.",
            )
        elif outer is not None and plan_area(row) > plan_area(outer):
            yield Fault(
                where,
                f"plot {row.plot!r} of {plan_area(row):g} m2 lies within "
                f"{row.within!r} of {plan_area(outer):g} m2",
                "The larger one is the outer plot.",
            )


def _circle(plot, plots):
    """The way from a plot outwards back to itself; empty if there is none."""
    way, at = [plot], plots[plot].within
    while at in plots and at not in way:
        way.append(at)
        at = plots[at].within
    return [*way, at] if at == plot else []


CHECKS = (stand_faults, plot_faults, nesting_faults)
