"""`sapflux rehearse`: the site's own design on a virtual forest whose truth is known."""

from math import isnan, nan
from pathlib import Path

from sapflux.cli import DONE
from sapflux.cli.text import columns, count, note, print_json, unverified_values
from sapflux.study.rehearsal import rehearse as rehearsed
from sapflux.study.rehearsal_files import as_data, spread, write_reports


def rehearse(options):
    """Rehearse a site and print what the design and the pipeline make of known truth."""
    found = rehearsed(
        options.site,
        Path(options.out),
        seed=options.seed,
        years=options.years,
        recipe=options.recipe,
        knowledge=options.knowledge,
        wound=options.wound,
        azimuth=options.azimuth,
        gradients=options.gradients == "natural",
        weather=options.weather,
        faults=options.faults,
    )
    paths = write_reports(found)
    if options.json:
        print_json(as_data(found))
        return DONE
    print(f"{options.site}: a virtual copy, seed {found.seed}, knowledge {found.knowledge}, recipe "
          f"{found.recipe}")  # fmt: skip
    model = ", ".join(f"{name} {value}" for name, value in found.options.items())
    print(f"  true: {model}")
    kinds = found.faults["kind"].nunique()
    print(f"  faults injected: {len(found.faults)}, of {count(kinds, 'kind')}\n")
    _print_stands(found)
    _print_steps(found)
    for name, table in [("tree", found.trees), ("probe", found.probes)]:
        if len(table):
            own = spread(table)
            about = f", spread {own['spread']:.1%}" if own["spread"] is not None else ""
            print(f"  {name}s: {own['number']}, mean bias {own['mean_bias']:+.1%}{about}")
    for text in found.left_out:
        print(note(text))
    if found.unverified:
        print(note(unverified_values(found.unverified)))
    print("\n  The forest is invented, with the site's stems, probes and tables: it shows what the")
    print("  design and the pipeline can deliver, not what the site transpires.")
    print(f"  Written: {', '.join(map(str, paths))}")
    return DONE


def _print_stands(found):
    rows = [
        [row.stand, row.species, row.days, f"{row.truth_mm:.1f}", f"{row.sampled_mm:.1f}",
         _number(row.result_mm, ".1f"), f"{row.sampling_error_mm:+.1f}",
         _number(row.processing_error_mm, "+.1f"),
         _number(row.processing_error_mm / row.sampled_mm if row.sampled_mm else nan, "+.1%"),
         f"{row.design_error_mm:.1f}" if row.design_error_mm == row.design_error_mm else ""]
        for row in found.stands.itertuples()
    ]  # fmt: skip
    header = ["stand", "species", "days", "truth mm", "sampled mm", "result mm", "sampling mm",
              "processing mm", "", "design s.e. mm"]  # fmt: skip
    for line in columns(rows, header, right=header[2:]):
        print(f"  {line}")
    print("\n  sampled: the trees with probes, without error; sampling: sampled minus truth;")
    print("  processing: result minus sampled, over the same days.\n")


def _number(value, form):
    """A number as written, '-' where there is none."""
    return "-" if isnan(value) else format(value, form)


def _print_steps(found):
    print("  What each step adds to the processing error, mm")
    table = found.steps.pivot(index="step", columns="stand", values="error_mm")
    table = table.loc[found.steps["step"].drop_duplicates()]
    rows = [[step, *(f"{value:+.2f}" for value in own)] for step, own in
            zip(table.index, table.to_numpy(), strict=True)]  # fmt: skip
    header = ["step", *table.columns]
    for line in columns(rows, header, right=header[1:]):
        print(f"  {line}")
    print()
