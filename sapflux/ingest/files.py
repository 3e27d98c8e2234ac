"""The files of a log: which they are, their bytes, and their text as the layout reads it."""

from pathlib import Path

from sapflux.errors import DataError, Fault
from sapflux.ingest import lines as text_lines
from sapflux.ingest.text import as_utf8, shown, squeezed

HEAD_BYTES = 64 * 1024  # of a file, to check it: names of a thousand columns, or many records


def match_files(site, log_name):
    """Paths of a log's files, sorted, each once. DataError where no file matches."""
    paths = [path for path in _matches(site, log_name) if path.is_file()]
    if not paths:
        patterns = ", ".join(repr(p) for p in site.logs[log_name].files)
        raise DataError(
            Fault(
                f"{site.folder}/site.toml, [logs.{log_name}]",
                f"no file matches {patterns}",
                "Patterns count from the site folder; put the downloads there or correct 'files'.",
            )
        )
    return paths


def stray_notes(site, log_name):
    """Notes on what a log's patterns match and is no file: nothing is read from it."""
    notes = []
    for path in _matches(site, log_name):
        if not path.is_file():
            what = "a folder" if path.is_dir() else "no file"
            if path.is_symlink() and not path.exists():
                what = "a link that leads to nothing"
            notes.append(f"{path}: 'files' of log {log_name!r} matches it, but it is {what}: "
                         "nothing is read from it")  # fmt: skip
    return notes


def read_bytes(path, where, most=-1):
    """The first `most` bytes of a file, or all. DataError if it cannot be opened."""
    try:
        with Path(path).open("rb") as file:
            return file.read(most)
    except OSError as error:
        what = f"the file cannot be read ({error.strerror})"
        raise DataError(
            Fault(where, what, "Check that it is there, and that no other program holds it open.")
        ) from None


def utf8_of(raw, layout, where):
    """The text of a file as UTF-8. DataError if the layout's encoding is not known."""
    try:
        data = as_utf8(raw, layout.encoding)
    except LookupError:
        what = f"encoding '{layout.encoding}' is not known"
        raise DataError(Fault(where, what, "Use for example utf-8, cp1252 or utf-16.")) from None
    return squeezed(data) if layout.separator == " " else data


def no_names(where, layout, line, cut=False):
    """The fault of a file without column names. line : what stands where they are looked for."""
    expected = ", ".join(sorted(text_lines.required_names(layout)))
    among = f"no line of its first {HEAD_BYTES // 1024} kB" if cut else "no line"
    return Fault(
        where,
        f"{among} holds the column names {expected}; line {layout.names_line} is '{shown(line)}'",
        "Correct 'time_columns', 'delimiter' or 'encoding' of its layout.",
    )


def _matches(site, log_name):
    """Whatever a log's patterns match, sorted, each once."""
    found = set()
    for pattern in filter(None, site.logs[log_name].files):
        anchor = Path(pattern).anchor
        root = Path(anchor) if anchor else site.folder
        found |= set(root.glob(pattern.removeprefix(anchor)))
    return sorted(found)
