"""`sapflux check`: every fault of a site, before anything is run."""

import sys

from sapflux.cli import DONE, USAGE
from sapflux.cli.text import columns, count, note, print_json
from sapflux.errors import UserError
from sapflux.pipeline.check import check_site


def check(options):
    """Check each site; exit code 2 if any has a fault."""
    reports = {}
    for path in options.sites:
        try:
            reports[path] = {"faults": [], **check_site(path, options.recipe)}
        except UserError as error:
            reports[path] = {"faults": [str(fault) for fault in error.faults]}
    if options.json:
        print_json(reports)
    else:
        for path, report in reports.items():
            _print(path, report)
    return USAGE if any(report["faults"] for report in reports.values()) else DONE


def _print(path, report):
    if report["faults"]:
        for fault in report["faults"]:
            print(fault, file=sys.stderr)
        print(f"{path}: {count(len(report['faults']), 'fault')}", file=sys.stderr)
        return
    parts = [
        count(report["probes"], "probe"),
        count(report["trees"], "tree"),
        count(report["stands"], "stand"),
        count(report["logs"], "log"),
        count(report["files"], "file"),
    ]
    print(f"{path}: no fault. {', '.join(parts)}.")
    rows = [
        [
            row["stand"],
            row["species"],
            row["stems"],
            f"{row['stems_per_ha']:.0f}",
            f"{row['basal_area_m2_ha']:.1f}",
            f"{row['sapwood_area_m2_ha']:.1f}",
        ]
        for row in report["strata"]
    ]
    header = ["stand", "species", "stems", "stems/ha", "basal area m2/ha", "sapwood m2/ha"]
    for line in columns(rows, header, right=header[2:]) if rows else []:
        print(f"  {line}")
    for text in report["notes"]:
        print(note(text))
