"""`sapflux init`: a commented starter site, or a draft from logger files."""

import glob
from pathlib import Path

from sapflux.site import draft


def init(options):
    """Write a starter site, or draft one from logger files, and say what comes next."""
    folder = Path(options.folder)
    if options.files:
        written = draft.draft_from_files(folder, expanded(options.files))
        print(f"A draft of a site stands in {folder}:")
        asked = ", ".join(_questions(written))
        task = f"answer the lines marked QUESTION ({asked}), put the downloads into raw/"
    else:
        written = draft.write_starter(folder)
        print(f"A starter site stands in {folder}:")
        task = "put your facts in place of the examples, the downloads into raw/"
    for path in written:
        print(f"  {path}")
    print(f"\nNext: {task}, then run")
    print(f"  sapflux check {folder}")
    return 0


def expanded(names):
    """Paths of the files named, patterns expanded: not every shell does it (cmd.exe does not).

    What is no pattern, or matches nothing, stays as it is written.
    """
    paths = []
    for name in names:
        matched = [] if Path(name).exists() else sorted(glob.glob(name))  # noqa: PTH207 (absolute patterns)
        paths += map(Path, matched or [name])
    return paths


def _questions(paths):
    """How many questions each file asks, as "3 in site.toml", where it asks any."""
    for path in paths:
        count = path.read_text(encoding="utf-8").count("# QUESTION: ")
        if count:
            yield f"{count} in {path.name}"
