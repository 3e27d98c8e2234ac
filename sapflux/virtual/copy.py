"""`write_copy`: a virtual copy of any site, a complete site folder with the truth behind it."""

from dataclasses import replace
from pathlib import Path

import numpy as np

from sapflux.errors import Fault, SiteError
from sapflux.schema import SIGNALS
from sapflux.virtual import assumptions
from sapflux.virtual.copy_channels import common_step, plan_logs
from sapflux.virtual.copy_files import downloads
from sapflux.virtual.copy_forest import draw_species, draw_stems, stand_ground
from sapflux.virtual.copy_needs import check_needs
from sapflux.virtual.copy_probes import draw_gradients, draw_probes, installations
from sapflux.virtual.copy_tables import all_tables, simplifications
from sapflux.virtual.copy_truth import VirtualTruth, draw_strata
from sapflux.virtual.faults_draw import check_level, draw_faults
from sapflux.virtual.faults_tree import with_deaths
from sapflux.virtual.folder import config_text, csv_text
from sapflux.virtual.given import whole_days
from sapflux.virtual.weather import climate_at, soil_water, stochastic_weather

__all__ = ["VirtualTruth", "grow_copy", "write_copy"]

KNOWLEDGE = ("exact", "estimated")
WOUNDS = ("cubic", "strip")
STORED = {signal for signals in SIGNALS.values() for signal in signals}


def write_copy(
    site, folder, *, seed, first_day=None, days=None, knowledge="estimated", gradients=True,
    weather=None, wound="cubic", azimuth=False, faults="none",
):  # fmt: skip
    """Write a virtual copy of a site into a folder; returns its `VirtualTruth`.

    The copy has the site's position, design, layouts and logs, its own weather, and downloads of
    about a month that overlap by a day. Where the site has no logs they are invented. The same
    seed gives the same bytes.

    site : a validated `Site`; a plan without logs is enough. folder : made, or empty so far.
    first_day : date of standard time, None for the first day of the first growing season after
    the latest survey. days : length, None for a growing season; may span years.
    knowledge : "exact": the tables hold the truth, with the shape of every tree with probes and
    a core of every stem; "estimated": they hold what a crew would have measured.
    gradients : whether stems have natural temperature gradients; without them what is left of an
    exact copy's error is sap that flows at night, and noise.
    weather : `Weather` such as of `given.given_weather`, on a step that all logs' intervals are
    whole multiples of; its whole days are the period, without `first_day` and `days`. None for a
    stochastic season of the site's place.
    wound : what slows the heat pulses, "cubic": the published correction, inverted numerically;
    "strip": a strip without flow, by finite volumes.
    azimuth : whether flux density differs around a stem, by a cosine drawn for each.

    faults : "none"; "few", what a well kept site sees; "many", every kind that `faults.KINDS`
    has a place for. They are in `faults` of the truth and nowhere in the folder.

    SiteError: what the site lacks, all at once, or a folder that holds something. ValueError for
    another `knowledge`, `wound` or `faults`, less than 2 days, or weather that does not fit.
    """
    truth, plan = grow_copy(
        site, seed=seed, first_day=first_day, days=days, knowledge=knowledge, gradients=gradients,
        weather=weather, wound=wound, azimuth=azimuth, faults=faults,
    )  # fmt: skip
    folder = Path(folder)
    if folder.exists() and (not folder.is_dir() or any(folder.iterdir())):
        raise SiteError(Fault(str(folder), "something is there already", "Name a new folder."))
    comment = (
        f"A virtual copy of {site.position.name}, seed {seed}. Nothing here was measured.",
        f"Knowledge of its tables: {knowledge}.",
    )
    text = config_text(comment, site.position, plan.layouts, plan.logs)
    _write(folder / "site.toml", text.encode("utf-8"))
    for name, (columns, rows) in all_tables(truth, site, plan).items():
        _write(folder / f"{name}.csv", csv_text(columns, rows).encode("utf-8"))
    for name, content in downloads(truth, site, plan):
        _write(folder / name, content)
    return truth


def grow_copy(
    site, *, seed, first_day=None, days=None, knowledge="estimated", gradients=True, weather=None,
    wound="cubic", azimuth=False, faults="none",
):  # fmt: skip
    """(`VirtualTruth`, `LogPlan`) of a virtual copy, without writing; see `write_copy`."""
    if knowledge not in KNOWLEDGE:
        raise ValueError(f"knowledge is {knowledge!r}; known: {', '.join(KNOWLEDGE)}")
    if wound not in WOUNDS:
        raise ValueError(f"wound is {wound!r}; known: {', '.join(WOUNDS)}")
    check_level(faults)
    check_needs(site)
    plan = plan_logs(site)
    given = weather is not None
    if given:
        weather, first_day, days = _given_period(site, plan, weather, first_day, days)
    else:
        first_day, days = period(site, first_day, days)
        position = site.position
        climate = climate_at(position.latitude_deg, position.elevation_m)
        step_s = common_step(plan.logs)
        weather = stochastic_weather(climate, position, str(first_day), days, step_s, seed)
    soil = soil_water(weather, **assumptions.SOIL)
    species = draw_species(site, seed, weather)
    stems = draw_stems(site, seed, species, azimuth)
    strata = draw_strata(stems, species, weather, soil, lambda stand: stand_ground(site, stand))
    bare = {
        kind for by_species in strata.values() for kind, s in by_species.items()
        if not s.sampled.any()
    }  # fmt: skip
    stand_ins = {row.species: row.stand_in for row in site.table("species")}
    natural = draw_gradients(site, seed)
    natural = natural if gradients else dict.fromkeys(natural, 0.0)
    known = {one.stem.name: one for one in stems}
    options = {
        "wound": wound,
        "azimuth": azimuth,
        "gradients": "natural" if gradients else "none",
        "night_cooling": assumptions.NIGHT_COOLING,
        "weather": "given" if given else "stochastic",
    }
    truth = VirtualTruth(
        seed=seed,
        knowledge=knowledge,
        weather=weather,
        step_s=weather.step_s,
        dates=first_day + np.arange(days),
        stems=tuple(one.stem for one in stems),
        strata=strata,
        carriers={kind: stand_ins[kind] for kind in sorted(bare) if stand_ins[kind]},
        left_out=plan.left_out + tuple(simplifications(site)),
        options=options,
        species=species,
        soil=soil,
        probes=draw_probes(site, seed, species, natural, known, wound),
        gradients=natural,
        stores={row.id: row.quantity for row in reversed(plan.channels) if row.quantity in STORED},
        known=known,
        tree_of={row.probe: row.tree for row in installations(site)},
    )
    truth = replace(truth, faults=draw_faults(truth, site, plan, faults))
    return with_deaths(truth), plan


def period(site, first_day=None, days=None):
    """(first day, days): as given, else of the first growing season after the latest survey.

    ValueError for less than 2 days.
    """
    half = "south" if site.position.latitude_deg < 0.0 else "north"
    begin, end = assumptions.SEASONS[half]
    if first_day is None:
        dates = [row.date for row in site.table("surveys")]
        latest = np.datetime64(max(dates), "D")
        year = latest.astype("datetime64[Y]")
        first = np.datetime64(f"{year}-{begin}", "D")
        first_day = first if first > latest else np.datetime64(f"{year + 1}-{begin}", "D")
    first_day = np.datetime64(first_day, "D")
    if days is None:
        year = int(str(first_day)[:4])
        last = np.datetime64(f"{year}-{end}", "D")
        if last <= first_day:
            last = np.datetime64(f"{year + 1}-{end}", "D")
        days = int((last - first_day) / np.timedelta64(1, "D"))
    if days < 2:
        raise ValueError(f"days is {days}; a copy has at least 2")
    return first_day, days


def _given_period(site, plan, weather, first_day, days):
    """(whole days of the given weather, first day, days); ValueError where it does not fit."""
    if first_day is not None or days is not None:
        raise ValueError("the period follows from the weather; give no first_day and no days")
    intervals = sorted({round(log.interval_min * 60) for log in plan.logs.values()})
    if any(interval % weather.step_s for interval in intervals):
        raise ValueError(
            f"the weather has steps of {weather.step_s} s; the logs' intervals of "
            f"{', '.join(map(str, intervals))} s are to be whole multiples of it"
        )
    return whole_days(weather, site.position.utc_offset_h)


def _write(path, content):
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_bytes(content)
