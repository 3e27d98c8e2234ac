"""`sapflux init`: a commented starter site."""

from pathlib import Path

from sapflux.site import draft


def init(options):
    """Write a starter site, or draft one from logger files, and say what comes next."""
    folder = Path(options.folder)
    if options.files:
        written = draft.draft_from_files(folder, [Path(name) for name in options.files])
    else:
        written = draft.write_starter(folder)
    print(f"A starter site stands in {folder}:")
    for path in written:
        print(f"  {path}")
    print("\nNext: put your facts in place of the examples, the downloads into raw/, then run")
    print(f"  sapflux check {folder}")
    return 0
