"""Facts of the site laid on records: what stages read beside the measured variables, in SI.

A fact that is the same for all the given times has no time dimension, one that changes has a
trailing one. What is laid on a record hangs on that record's time alone, so that it is the same
in every block. NaN where the site does not say.
"""

import numpy as np

from sapflux.errors import Fault, SiteError
from sapflux.site import dated, inventory, laying, spans
from sapflux.site.installations import episodes, heating, installation_numbers, latest_begun
from sapflux.site.sources import CALIBRATED, INSTALLED, SAMPLED
from sapflux.units import MM, factor_of_key


def lay_facts(site, probes, point_count, times_end, interval_s, wanted=None):
    """name -> DataArray of every fact of the probes, named and with attributes of the schema.

    Dims (probe,), (probe, point) or (probe, relative_depth), and a trailing `time` where the fact
    changes within `times_end`; `installation` always has one. Facts of an installation go on
    through the gap after its removal. Dated facts hold for the middle of a record, a profile with
    its dates for the beginning.

    times_end : (time) datetime64, ends of the records [UTC]; interval_s : their length [s].
    point_count : size of the dimension `point`. wanted : names to lay; None: all.
    SiteError: a probe whose rows name several trees.
    """
    ends = np.asarray(times_end).astype("datetime64[ns]")
    records = _records(site, probes, ends, interval_s)
    makers = _makers(site, records, point_count)
    makers["installation"] = lambda: (
        ("probe", "time"),
        installation_numbers(site, probes, ends, interval_s),
    )
    names = makers if wanted is None else [name for name in makers if name in wanted]
    return {name: laying.named(name, *makers[name]()) for name in names}


def labels(site, probes):
    """tree, species and stand of each probe: name -> list of str, "" where the site has none.

    SiteError: a probe whose rows name several trees.
    """
    trees = [sorted({row.tree for row in episodes(site, probe)}) for probe in probes]
    faults = [
        Fault(f"{site.folder}/probes.csv", f"probe {probe!r} sits in trees {', '.join(own)}",
              "Give the probe another name where it moves to another tree.")
        for probe, own in zip(probes, trees, strict=True)
        if len(own) > 1
    ]  # fmt: skip
    if faults:
        raise SiteError(faults)
    names = [own[0] if own else "" for own in trees]
    return {"tree": names} | labels_of_trees(site, names)


def labels_of_trees(site, trees):
    """species and stand of each tree: name -> list of str, "" of a tree not in `trees.csv`."""
    known = {row.tree: row for row in site.table("trees")}
    return {
        name: [getattr(known[tree], name) if tree in known else "" for tree in trees]
        for name in ("species", "stand")
    }


def tree_facts(site, trees):
    """sapwood_area (tree,) [m2] with the coordinates tree, species, stand; NaN where unknown."""
    areas = [laying.as_number(inventory.tree_sapwood_area(site, tree)) for tree in trees]
    coords = {"tree": np.array(trees, dtype=str)}
    for name, values in labels_of_trees(site, trees).items():
        coords[name] = ("tree", np.array(values, dtype=str))
    array = laying.named("sapwood_area", ("tree",), np.array(areas, dtype=float))
    return {"sapwood_area": array.assign_coords(coords)}


def stand_facts(site, times_end):
    """sapwood_per_ground (stand_species,) and in_leaf (stand_species, time) of the surveys.

    Coordinates on stand_species: its label "stand/species", stand, species, and stand_in, the
    species whose flux density stands in for one without probes ("" for none). in_leaf is 1 from
    leaf_on 0 h to leaf_off 0 h of fixed standard time, over the turn of the year where leaf_on
    comes later (southern hemisphere), and always where either is blank; a record that ends at
    0 h is of the day before.

    times_end : (time) datetime64, ends of the records [UTC]. SiteError: an unknown plot area.
    """
    ends = np.asarray(times_end).astype("datetime64[ns]")
    areas = inventory.sapwood_per_ground(site)
    known = {row.species: row for row in site.table("species")}
    rows = [known.get(species) for _, species in areas]
    days = month_days(site.day_of(ends))
    leaf = np.ones((len(rows), len(ends)), dtype=np.int8)
    for place, row in enumerate(rows):
        if row is not None and row.leaf_on and row.leaf_off:
            leaf[place] = _in_season(days, _number_of(row.leaf_on), _number_of(row.leaf_off))
    columns = {
        "stand_species": [f"{stand}/{species}" for stand, species in areas],
        "stand": [stand for stand, _ in areas],
        "species": [species for _, species in areas],
        "stand_in": [row.stand_in if row else "" for row in rows],
    }
    coords = {name: ("stand_species", np.array(c, dtype=str)) for name, c in columns.items()}
    per_ground = laying.named(
        "sapwood_per_ground", ("stand_species",), np.array(list(areas.values()), dtype=float)
    )
    in_leaf = laying.named("in_leaf", ("stand_species", "time"), leaf)
    return {
        "sapwood_per_ground": per_ground.assign_coords(coords),
        "in_leaf": in_leaf.assign_coords(coords | {"time": ends}),
    }


def month_days(moments):
    """Month times 100 plus day of datetime64 moments, as int.

    >>> int(month_days(np.datetime64("2031-05-20T12:00")))
    520
    """
    months = moments.astype("datetime64[M]")
    day = (moments.astype("datetime64[D]") - months.astype("datetime64[D]")).astype(int) + 1
    return (months.astype(int) % 12 + 1) * 100 + day


def _records(site, probes, ends, interval_s):
    length = np.timedelta64(int(interval_s), "s")
    names = labels(site, probes)
    return laying.Records(
        begins=ends - length,
        middles=ends - np.timedelta64(int(interval_s) * 500, "ms"),
        probes=tuple(probes),
        trees=names["tree"],
        species=names["species"],
        installations=[episodes(site, probe) for probe in probes],
        number=latest_begun(site, probes, ends, interval_s),
    )


def _makers(site, records, point_count):
    """name -> function () -> (dims, values), so that only what is wanted is made."""
    depths = {
        tree: laying.as_number(inventory.sapwood_depth(site, tree)) for tree in set(records.trees)
    }
    depth = dict(zip(records.probes, (depths[tree] for tree in records.trees), strict=True))

    def of_row(column):
        unit = factor_of_key(column)
        return lambda: laying.by_installation(
            records, lambda row: laying.as_number(getattr(row, column)) * unit, ("probe",)
        )

    def of_points(values_of):
        return lambda: laying.by_installation(
            records, lambda row: laying.padded(values_of(row), point_count), ("probe", "point")
        )

    def of_wood(column):
        return lambda: laying.by_date(
            records,
            lambda place, number: dated.wood_nodes(
                site, records.trees[place], records.species[place], column
            ),
            factor_of_key(column),
        )

    def of_calibration(column):
        return lambda: _calibrated(site, records, column)

    return {
        **{name: of_row(column) for name, column in INSTALLED.items()},
        "radial_from": of_points(lambda row: np.array(row.depth_from_mm) * MM),
        "radial_to": of_points(lambda row: np.array(row.depth_to_mm) * MM),
        "contact_fraction": of_points(lambda row: _contact(row, depth[row.probe])),
        **{name: of_wood(column) for name, column in SAMPLED.items()},
        "wound_width": lambda: laying.by_date(records, _wounds(site, records), MM, dated.width_at),
        **{name: of_calibration(column) for name, column in CALIBRATED.items()},
        "installed_age": lambda: (("probe", "time"), _ages(site, records)),
        "probe_tree": lambda: (("probe",), np.array(records.trees, dtype=str)),
        "probe_stratum": lambda: (("probe",), np.array(_strata(site, records), dtype=str)),
        "paired": lambda: spans.paired(site, records),
        "heater_state_given": lambda: spans.heater_state_given(site, records),
        "power_off": lambda: spans.power_off(site, records),
        "visited": lambda: spans.visited(site, records),
        "at_rest": lambda: spans.at_rest(site, records),
        "xylem_radius": lambda: (("probe",), _radii(site, records)),
        "sapwood_depth": lambda: (("probe",), np.array([depth[p] for p in records.probes])),
        "relative_profile": lambda: _profiles(site, records),
    }


def _wounds(site, records):
    installed = [[row.installed.date() for row in rows] for rows in records.installations]
    return lambda place, number: dated.wound_courses(
        site, records.probes[place], number, installed[place],
        records.trees[place], records.species[place],
    )  # fmt: skip


def _ages(site, records):
    """Seconds from the installation begun last to the middle of each record."""
    second = np.timedelta64(1, "s")
    begun = [
        np.array([site.utc(row.installed) for row in rows])[number]
        for rows, number in zip(records.installations, records.number, strict=True)
    ]
    return (records.middles - np.array(begun)) / second


def _strata(site, records):
    names = labels_of_trees(site, records.trees)
    return [f"{stand}/{kind}" for stand, kind in zip(names["stand"], names["species"], strict=True)]


def _contact(row, sapwood_depth):
    """Share of each point's span in sapwood: as given, else shallower than the sapwood's depth."""
    begin, end = np.array(row.depth_from_mm) * MM, np.array(row.depth_to_mm) * MM
    if row.contact_fraction is not None:
        return np.full(len(end), row.contact_fraction)
    span = end - begin
    inside = np.clip(sapwood_depth - begin, 0.0, span)
    # A point without a span is in sapwood or is not.
    at_a_depth = np.where(np.isnan(sapwood_depth), np.nan, begin <= sapwood_depth)
    return np.divide(inside, span, out=at_a_depth, where=span > 0)


def _calibrated(site, records, column):
    """Of each probe's species the register's latest row for heat dissipation heated as it is."""
    latest, unit = {}, factor_of_key(column)
    for row in site.table("calibrations"):
        if row.method == "heat_dissipation":
            key = (row.species, row.heating)
            known = latest.get(key)
            latest[key] = row if known is None or row.date > known.date else known
    species = dict(zip(records.probes, records.species, strict=True))

    def value_of(row):
        own = latest.get((species[row.probe], heating(row)))
        return np.nan if own is None else laying.as_number(getattr(own, column)) * unit

    return laying.by_installation(records, value_of, ("probe",))


def _radii(site, records):
    radii = {
        tree: laying.as_number(inventory.xylem_radius(site, tree)) for tree in set(records.trees)
    }
    return np.array([radii[tree] for tree in records.trees])


def _profiles(site, records):
    """(dims, values) of the relative profiles on `laying.RELATIVE_DEPTHS`."""
    made = {}
    keys = list(zip(records.trees, records.species, strict=True))
    for key in dict.fromkeys(keys):
        made[key] = dated.profile_curves(site, *key, laying.RELATIVE_DEPTHS, records.begins)
    dims = ("probe", "relative_depth")
    if all(np.array_equal(c, c[:1].repeat(len(c), 0), equal_nan=True) for c, _ in made.values()):
        return dims, np.array([made[key][0][0] for key in keys])
    laid = [curves[which].T for curves, which in (made[key] for key in keys)]
    return (*dims, "time"), np.array(laid)


def _number_of(month_day):
    month, day = month_day.split("-")
    return int(month) * 100 + int(day)


def _in_season(days, begin, end):
    if begin < end:
        return (days >= begin) & (days < end)
    return (days >= begin) | (days < end)
