"""`sapflux run`: one site or many; a failing site does not stop the others."""

import sys
from pathlib import Path

from sapflux.cli import DONE, FAILED, SOME_FAILED, USAGE
from sapflux.cli.text import (
    columns,
    count,
    millimetres,
    note,
    print_json,
    share,
    signed,
    unverified_values,
)
from sapflux.errors import UserError
from sapflux.pipeline.batch import dry_run, run_sites

CAUTIONS = (
    "These are estimates of transpiration, not of evapotranspiration: interception and soil",
    "evaporation are separate. No interval is given yet, and the spread between probes is not one:",
    "shared errors of calibration and radial shape are larger. Not for licensing, allocation or",
    "litigation without an independent check.",
)


def run(options):
    """Run the sites and print what came of each; see `sapflux.cli` for the exit codes."""
    if options.dry_run:
        return _dry_run(options)
    outcomes = []
    several = len(options.sites) > 1
    for outcome in run_sites(
        options.sites,
        jobs=options.jobs,
        scheduler=options.scheduler,
        recipe=options.recipe,
        out=options.out,
        native=options.native,
        keep_all=options.keep_all,
    ):
        outcomes.append(outcome)
        if not options.json:
            _print(outcome, several, options)
    given = [str(site) for site in options.sites]
    outcomes.sort(key=lambda outcome: given.index(outcome.path))
    failed = [outcome for outcome in outcomes if outcome.faults]
    if options.json:
        print_json(
            {outcome.path: outcome.summary or {"faults": outcome.faults} for outcome in outcomes}
        )
    elif several:
        _print_summary(outcomes)
    if not failed:
        return DONE
    if len(failed) < len(outcomes):
        return SOME_FAILED
    return USAGE if all(outcome.usage for outcome in failed) else FAILED


def _dry_run(options):
    """Say what a run would do; a site at fault stops no other, and gives exit code 2."""
    plans = {}
    for path in options.sites:
        try:
            plans[path] = dry_run(path, options.recipe)
        except UserError as error:
            plans[path] = {"faults": [str(fault) for fault in error.faults]}
    if options.json:
        print_json(plans)
    else:
        for path, plan in plans.items():
            _print_plan(path, plan)
        print("Nothing was run.")
    return USAGE if any("faults" in plan for plan in plans.values()) else DONE


def _print_plan(path, plan):
    for fault in plan.get("faults", ()):
        print(fault, file=sys.stderr)
    if "faults" in plan:
        return
    print(f"{path}: {plan['site']}; recipe {plan['recipe']}")
    for name, files in plan["files"].items():
        print(f"  log {name}: {count(len(files), 'file')}")
        for file in files:
            print(f"    {file}")
    for line in plan["steps"]:
        print(f"  {line}")


def _print(outcome, several, options):
    if outcome.faults:
        for fault in outcome.faults:
            print(fault, file=sys.stderr)
        former = (Path(options.out) / Path(outcome.path).resolve().name / "run.json").is_file()
        stands = "; its former results stand as they were" if former else ""
        print(f"{outcome.path}: failed{stands}", file=sys.stderr)
        return
    found = outcome.summary
    print(f"{found['site']}, {found['from']} to {found['to']}, recipe {found['recipe']}")
    ledger = found["ledger"]
    classes = ", ".join(f"{number:,} {name}" for name, number in ledger.items() if name != "lines")
    print(f"  {count(found['files'], 'file')}, {count(ledger['lines'], 'line')}: {classes}")
    print()
    if found["season"]:
        _print_season(found["season"])
    if found["beside"]:
        _print_beside(found["beside"])
    for text in [*found["refused"], *found["notes"]]:
        print(note(text))
    print(f"\n  Written to {found['folder']} ({found['seconds']:.1f} s), run {found['identity']}:")
    for line in columns([[name, what] for name, what in found["written"]], ["", ""])[1:]:
        print(f"    {line}")
    if found["unverified"]:
        print()
        print(note(unverified_values(found["unverified"])))
    if not several:
        print()
        for line in CAUTIONS:
            print(f"  {line}")
    print()


def _print_season(season):
    print("  Season totals, over the days that may be totalled")
    rows = [
        [
            row["stand"],
            row["species"],
            millimetres(row["transpiration_mm"]),
            str(row["days"]),
            str(row["days_refused"]),
            share(row["measured_fraction"]),
            share(row["filled_fraction"]),
            row["reason"],
        ]
        for row in season
    ]
    header = ["stand", "species", "mm", "days", "refused", "measured", "filled", ""]
    for line in columns(rows, header, right=header[2:7]):
        print(f"  {line}")
    print()


def _print_beside(rows):
    """Other methods of a stage: what each made of the season of every stand it touches."""
    print("  The same days by other methods, mm (methods_beside.csv has months and species)")
    table = [
        [
            row["stage"],
            row["method"],
            row["stand"],
            millimetres(row["recipe_mm"]),
            millimetres(row["beside_mm"]),
            signed(row["difference_mm"]) if row["days"] else "no day on which both have a total",
        ]
        for row in rows
    ]
    header = ["stage", "method", "stand", "recipe", "with it", "difference"]
    for line in columns(table, header, right=header[3:]):
        print(f"  {line}")
    print()


def _print_summary(outcomes):
    rows = [
        [
            outcome.path,
            "failed" if outcome.faults else "ok",
            f"{outcome.seconds:.1f}",
            outcome.faults[0] if outcome.faults else "",
        ]
        for outcome in outcomes
    ]
    for line in columns(rows, ["site", "outcome", "seconds", ""], right=["seconds"]):
        print(line)
    failed = sum(bool(outcome.faults) for outcome in outcomes)
    print(f"{len(outcomes) - failed} ok, {failed} failed")
    for line in CAUTIONS:
        print(line)
