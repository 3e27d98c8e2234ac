"""`init`: a commented starter site, or a draft of one from logger files."""

import csv
import io
import json
import re
from glob import escape
from pathlib import Path

from sapflux.errors import Fault, SiteError
from sapflux.site.guesses import guess_channel
from sapflux.site.sniff import sniff
from sapflux.site.starter import EXAMPLES, SITE_TOML
from sapflux.site.tables import TABLES, columns_of

DRAFT_HEAD = """\
# Drafted from the headers and first records of logger files. Lines marked QUESTION could not be
# known from them: answer each, and take the '#' away. `sapflux init` into another folder shows
# every key explained. A message of 'row 4' of a table means line 4 of its file, comments and the
# line of column names counted.

[site]
# QUESTION: where is the site, and how does it count time?
# name = ""
# latitude_deg =            # north positive
# longitude_deg =           # east positive
# elevation_m =             # above sea level
# utc_offset_h =            # the site's fixed standard time minus UTC, all year round
# water_year_start = "10-01"
common_step_min = 60        # a multiple of the intervals of the logs of sap-flow signals
"""


# Dates (with a time of day) in names of files, as year-month-day, year-month or day-month-year.
DATE = re.compile(
    r"(?<!\d)(?:"
    r"(?:19|20)\d\d[-_. ]?(?:0[1-9]|1[0-2])(?:[-_. ]?(?:0[1-9]|[12]\d|3[01])"
    r"(?:[-_. T]?\d\d[-_.h]?\d\d(?:[-_.m]?\d\d)?)?)?"
    r"|(?:0[1-9]|[12]\d|3[01])[-_. ](?:0[1-9]|1[0-2])[-_. ](?:19|20)?\d\d"
    r")(?!\d)"
)
ONE_LOGGER = """\
# QUESTION: are all these downloads of one logger? They have the same columns; if not, give each
# logger a section of its own, here and in channels.csv.
"""
# Rows closer than this are taken for temperature traces around heat pulses, until it is answered.
LONGEST_TRACE_STEP_S = 10
TRACES = """\
# QUESTION: are the rows, {step:g} s apart, temperature traces around heat pulses? If not, take
# trace_step_s away.
trace_step_s = {step:g}
# QUESTION: how many minutes from pulse to pulse, and does heating start at each whole interval?
# interval_min = 30
# pulse_starts_s = 0
"""


def write_starter(folder):
    """Write a commented, valid starter site. Returns the written paths.

    SiteError if the folder holds files already.
    """
    folder = _empty_folder(folder)
    texts = {"site.toml": SITE_TOML}
    for table, (comments, rows) in EXAMPLES.items():
        texts[f"{table}.csv"] = _table_text(table, comments, rows)
    return _write(folder, texts)


def draft_from_files(folder, files):
    """Write a site whose layouts, logs and channels are drafted from logger files.

    What the files do not tell is left out and asked for in a comment, so that `check` names it
    until it is answered. Returns the written paths. SiteError if the folder holds files already,
    or with every file that could not be made out; nothing is written then.
    """
    folder = _empty_folder(folder)
    paths = {path.resolve(): path for path in map(Path, files)}.values()  # each once
    found, faults = [], list(_same_names(paths))
    for path in paths:
        try:
            found.append((path, sniff(path)))
        except SiteError as error:
            faults += error.faults
    if faults or not found:
        raise SiteError(faults or Fault(str(folder), "no logger file is given", "Name some."))
    logs = _grouped(found)
    texts = {"site.toml": _draft_toml(logs)}
    for table, (comments, _) in EXAMPLES.items():
        texts[f"{table}.csv"] = _table_text(table, comments, ())
    texts["channels.csv"] += _draft_channels(logs)
    return _write(folder, texts)


def _same_names(paths):
    """Faults of files of one name: they could not lie in one folder."""
    first = {}
    for path in paths:
        other = first.setdefault(path.name, path)
        if other is not path:
            yield Fault(
                str(path),
                f"{other} has the same name",
                "All downloads go into one folder, raw/: give each a name of its own.",
            )


def _empty_folder(folder):
    folder = Path(folder)
    what = ""
    try:
        if folder.exists() and not folder.is_dir():
            what = "there is a file of that name"
        elif folder.exists() and any(folder.iterdir()):
            what = "the folder holds files already"
    except OSError as error:
        raise SiteError(_not_written(folder, error)) from None
    if what:
        raise SiteError(Fault(str(folder), what, "Name a folder that is new or empty."))
    return folder


def _write(folder, texts):
    path = folder
    try:
        folder.mkdir(parents=True, exist_ok=True)
        (folder / "raw").mkdir()
        for name, text in texts.items():
            path = folder / name
            path.write_text(text, encoding="utf-8", newline="\n")
    except OSError as error:
        raise SiteError(_not_written(path, error)) from None
    return [folder / name for name in texts]


def _not_written(path, error):
    return Fault(
        str(path),
        f"it cannot be written ({error.strerror})",
        "Name a folder where you may write.",
    )


def _table_text(table, comments, rows):
    columns = list(columns_of(TABLES[table]))
    lines = [f"# {comment}\n" for comment in comments]
    lines.append(_csv_line(columns))
    for row in rows:
        line = _csv_line([row.get(column, "") for column in columns])
        lines.append(f"# For example: {line}" if "#" in row else line)
    return "".join(lines)


def _csv_line(cells):
    out = io.StringIO()
    csv.writer(out, lineterminator="\n").writerow(cells)
    return out.getvalue()


def _grouped(found):
    """log name -> (layout name, paths, findings of the first): files laid out alike are one log.

    The order of columns does not matter: they are found by name.
    """
    groups = {}
    for path, finding in found:
        names = frozenset(filter(None, finding.names))
        groups.setdefault((finding.layout_key, names), []).append((path, finding))
    layouts, logs = {}, {}
    for (layout, _), members in groups.items():
        layout_name = layouts.setdefault(layout, f"layout{len(layouts) + 1}")
        paths = [path for path, _ in members]
        name = _log_name(paths, logs)
        logs[name] = (layout_name, paths, members[0][1])
    return logs


def _log_name(paths, taken):
    """A name for a log from what the names of its files begin with, dates left out."""
    stem = _beginning([DATE.sub("", path.stem) for path in paths])
    stem = "".join(c if c.isascii() and (c.isalnum() or c in "_-") else "_" for c in stem)
    stem = stem.strip("_-") or "log"
    name, number = stem, 2
    while name in taken:
        name, number = f"{stem}_{number}", number + 1
    return name


def _beginning(words):
    """The whole parts, divided by marks, that all words begin with.

    >>> _beginning(["T1_20260501", "T1_20260620"])
    'T1'
    """
    parts = [[part for part in re.split(r"[_\-. ]", word) if part] for word in words]
    shared = []
    for same in zip(*parts, strict=False):
        if len(set(same)) > 1:
            break
        shared.append(same[0])
    return "_".join(shared)


def _draft_toml(logs):
    parts, written = [DRAFT_HEAD], set()
    for layout_name, _, finding in logs.values():
        if layout_name in written:
            continue
        written.add(layout_name)
        lines = [f"\n[layouts.{layout_name}]\n"]
        lines += [f"# QUESTION: {question}\n" for question in finding.questions]
        lines += [f"{key} = {_toml(value)}\n" for key, value in finding.layout.items()]
        parts.append("".join(lines))
    for name, (layout_name, paths, finding) in logs.items():
        files = [f"raw/{escape(path.name)}" for path in dict.fromkeys(paths)]
        parts.append(
            f"\n[logs.{name}]\n"
            + (ONE_LOGGER if len(files) > 1 else "")
            + f"files = {_toml(files)}  # or a pattern that later downloads match, too\n"
            f"layout = {_toml(layout_name)}\n"
        )
        if finding.interval_min is not None and finding.interval_min * 60 <= LONGEST_TRACE_STEP_S:
            parts.append(TRACES.format(step=finding.interval_min * 60))
        elif finding.interval_min is None:
            parts.append(
                "# QUESTION: how many minutes from one record to the next?\n# interval_min =\n"
            )
        else:
            parts.append(f"interval_min = {finding.interval_min:g}\n")
        parts.append(
            "# QUESTION: does a stamp mark the end or the start of its interval?\n"
            '# stamp = "end"\n'
            "# QUESTION: which clock did the logger keep? A fixed offset, or civil time?\n"
            '# clock = "utc+1"  # or "civil:Europe/Vienna"\n'
        )
    return "".join(parts)


def _toml(value):
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{key} = {_toml(part)}" for key, part in value.items()) + " }"
    return json.dumps(list(value) if isinstance(value, tuple) else value, ensure_ascii=False)


def _draft_channels(logs):
    """A commented row for every data column, with the question it leaves open."""
    columns = list(columns_of(TABLES["channels"]))
    lines = [
        "# Every row below is a guess. Fill in what is blank, take the '#' away from those "
        "you keep.\n"
    ]
    for log, (_, _, finding) in logs.items():
        for column, unit_text in finding.data_columns.items():
            guess = guess_channel(column, unit_text)
            own = log if guess["kind"] == "log" else ""
            row = {"log": log, "column": column, "id": own, "point": "1", **guess}
            asked = f"{column!r} ({unit_text})" if unit_text else repr(column)
            perhaps = f" Perhaps {guess['quantity']}?" if guess["quantity"] else ""
            lines.append(f"# QUESTION: what is {asked} of log {log!r}?{perhaps}\n")
            lines.append("#" + _csv_line([row.get(name, "") for name in columns]))
    return "".join(lines)
