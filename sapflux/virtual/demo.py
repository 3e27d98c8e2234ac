"""The demo site written to disk: `python -m sapflux.virtual.demo configs/NAME tests/truth/NAME`."""

import sys
from pathlib import Path

from sapflux.virtual import demo_forest, demo_raw, demo_tables, demo_truth
from sapflux.virtual import demo_plan as plan
from sapflux.virtual.folder import config_text, csv_text


def write_demo(configs_folder, truth_folder, seed=plan.SEED):
    """Write the site folder and the folder of its truth; return the paths written.

    Files of the same names are overwritten, others are left alone. The same seed gives the same
    bytes. OSError where a folder cannot be written.
    """
    truth = demo_forest.grow(seed)
    site, beside = Path(configs_folder), Path(truth_folder)
    written = []

    def write(path, content):
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content if isinstance(content, bytes) else content.encode("utf-8"))
        written.append(path)

    write(site / "site.toml", site_text())
    for name, (columns, rows) in demo_tables.all_tables(truth).items():
        write(site / f"{name}.csv", csv_text(columns, rows))
    files, told = demo_raw.raw_files(truth)
    for name, content in files.items():
        write(site / "raw" / name, content)
    columns = ["stand", "species", "date", "sampled_mm", "stand_mm", "sampling_error_mm"]
    write(beside / "daily.csv", csv_text(columns, demo_truth.daily_rows(truth)))
    write(beside / "trees.csv", csv_text(["tree", "date", "kg"], demo_truth.tree_rows(truth)))
    columns = [
        "stem",
        "stand",
        "species",
        "alive",
        "instrumented",
        "xylem_radius_cm",
        "sapwood_depth_cm",
        "sapwood_area_cm2",
        "vigour",
        "tilt",
    ]
    write(beside / "stems.csv", csv_text(columns, demo_truth.stem_rows(truth)))
    write(beside / "mess.csv", csv_text(["file", "line", "what"], told))
    write(beside / "truth.toml", demo_truth.toml_text(truth))
    return written


def site_text():
    """`site.toml` of the demo site."""
    comment = (
        "The demo site: an invented catchment with two stands, written by sapflux.virtual.demo.",
        "Nothing here was measured. Its truth lies in tests/truth.",
    )
    return config_text(
        comment, plan.POSITION, demo_raw.LAYOUTS, demo_raw.LOGS, skip=("missing_text",)
    )


def main(arguments):
    """Write the demo site to the two folders named; exit code 2 if they are not."""
    if len(arguments) != 2:
        print("usage: python -m sapflux.virtual.demo SITE_FOLDER TRUTH_FOLDER", file=sys.stderr)
        return 2
    written = write_demo(*arguments)
    size = sum(path.stat().st_size for path in written)
    print(f"{len(written)} files, {size / 1e6:.2f} MB")
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
