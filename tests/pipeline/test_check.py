"""What a check tells of the downloads before a run, and what a run tells of those it has read."""

from dataclasses import replace

import pytest
from log_by_hand import make_site

from sapflux.ingest.logs import read_log
from sapflux.pipeline.check import displaced_notes, header_faults, rejection_notes, silent_logs

HEAD = "TIMESTAMP,A,B\n"
RANDOM = bytes(range(128, 256)) * 40  # no text in any encoding that a layout names by default
UTF16 = (HEAD + "2031-06-01 00:10:00,1,2\n").encode("utf-16")


def rows(
    count, step_min=10, day=1, cells=",1.5,2", form="2031-06-{day:02} {hour:02}:{minute:02}:00"
):
    """Lines of records, one each `step_min`, from midnight."""
    times = [divmod(step_min * number, 60) for number in range(1, count + 1)]
    return "".join(
        form.format(day=day, hour=hour, minute=minute) + cells + "\n" for hour, minute in times
    )


GOOD = HEAD + rows(6)


def site_of(folder, files, layout=None, channels=(("A", None, None),), **log):
    inside = {f"raw/{name}": content for name, content in files.items()}
    site = make_site(folder, inside, layout, channels, **log)
    return replace(site, rows_at={"channels": tuple(range(2, 2 + len(channels)))})


def told(folder, files, **more):
    """(faults, notes) with the site folder as `site`."""
    faults, notes, _ = header_faults(site_of(folder, files, **more))
    return [[str(one).replace(str(folder), "site") for one in part] for part in (faults, notes)]


def test_a_log_that_reads_has_no_fault_and_no_note(tmp_path):
    assert told(tmp_path, {"a.dat": GOOD, "b.dat": HEAD}) == [[], []]


NO_NAMES = "holds the column names TIMESTAMP"
RIGHT = "Correct 'time_columns', 'delimiter' or 'encoding' of its layout."
ONE = "Log 'L' cannot be read: its one file has not column names that can be read"


def test_a_wrong_delimiter(tmp_path):
    assert told(tmp_path, {"a.dat": GOOD}, layout={"delimiter": ";"}) == [
        [
            f"site/raw/a.dat: no line {NO_NAMES}; line 1 is 'TIMESTAMP,A,B'. {ONE}. {RIGHT}",
        ],
        [],
    ]


def test_no_file_of_a_log_has_column_names(tmp_path):
    faults, notes = told(tmp_path, {"a.dat": "", "b.dat": "x\n", "c.dat": UTF16})
    assert faults == [
        f"site/raw/b.dat: no line {NO_NAMES}; line 1 is 'x'. Log 'L' cannot be read: none of its 3 "
        f"files has column names that can be read. {RIGHT}"
    ]
    assert notes == ["site/raw/a.dat: the file is empty: it holds nothing to read"]


@pytest.mark.parametrize("content", [RANDOM, UTF16], ids=["random bytes", "utf-16"])
def test_bytes_that_are_not_the_text_of_the_layout(tmp_path, content):
    (fault,), notes = told(tmp_path, {"a.dat": content})
    assert fault.startswith(f"site/raw/a.dat: no line {NO_NAMES}; line 1 is '")
    assert fault.endswith(f"'. {ONE}. {RIGHT}")
    assert notes == []


def test_all_files_of_a_log_are_empty(tmp_path):
    assert told(tmp_path, {"a.dat": "", "b.dat": "\n\0\n"}) == [
        [
            "site/raw/a.dat: the file is empty: it holds nothing to read. Log 'L' cannot be read: "
            "none of its 2 files has column names that can be read. Put its downloads there, or "
            "correct 'files' in site.toml."
        ],
        [],
    ]


def test_one_empty_file_is_a_note(tmp_path):
    assert told(tmp_path, {"a.dat": GOOD, "b.dat": ""}) == [
        [],
        ["site/raw/b.dat: the file is empty: it holds nothing to read"],
    ]


def test_one_file_without_column_names_is_a_fault(tmp_path):
    right = "Give it a log and layout of its own, or leave it out of 'files'."
    assert told(tmp_path, {"a.dat": GOOD, "b.dat": "1,2\n", "c.dat": "TIMESTAMP,A,A\n"}) == [
        [
            f"site/raw/b.dat: no line {NO_NAMES}; line 1 is '1,2'. The file would be rejected line "
            f"by line. {right}",
            "site/raw/c.dat: line 1: column 'A' stands twice. The file would be rejected line by "
            f"line. {right}",
        ],
        [],
    ]


def none_of(count, line, reason, right):
    return [
        f"site/raw/a.dat, line {line}: none of the {count} records of log 'L' that a check reads "
        f"can be read: {reason}. {right}"
    ]


def test_a_wrong_time_format(tmp_path):
    text = HEAD + rows(60, day=18, form="{day:02}.06.2031 {hour:02}:{minute:02}")
    faults, _ = told(tmp_path, {"a.dat": text, "b.dat": HEAD})
    assert faults == none_of(
        60, 2, "time '18.06.2031 00:10' does not read as '%Y-%m-%d %H:%M:%S'",
        "Correct 'time_format' of [layouts.plain].",
    )  # fmt: skip


def test_month_and_day_the_other_way_round(tmp_path):
    text = HEAD + rows(20, day=18, form="06/{day:02}/2031 {hour:02}:{minute:02}")
    faults, _ = told(tmp_path, {"a.dat": text}, layout={"time_format": "%d/%m/%Y %H:%M"})
    assert faults == none_of(
        20, 2, "time '06/18/2031 00:10' does not read as '%d/%m/%Y %H:%M'",
        "Correct 'time_format' of [layouts.plain].",
    )  # fmt: skip


def test_decimal_commas(tmp_path):
    text = "TIMESTAMP;A;B\ntorn\n" + rows(20, cells=";1,5;2")
    faults, _ = told(tmp_path, {"a.dat": text}, layout={"delimiter": ";"})
    assert faults == none_of(
        21, 3, "column 'A': '1,5' is not a number", "Correct 'decimal' of [layouts.plain]."
    )  # fmt: skip


def test_decimal_commas_between_commas(tmp_path):
    faults, _ = told(tmp_path, {"a.dat": HEAD + rows(20, cells=",1,5,2")})
    assert faults == none_of(
        20, 2, "has 4 fields; its names line 1 has 3",
        "Correct 'delimiter' or 'decimal' of [layouts.plain].",
    )  # fmt: skip


def test_the_one_record_of_a_log_cannot_be_read(tmp_path):
    assert told(tmp_path, {"a.dat": HEAD + "1970-01-01 00:10:00,1,2\n"}) == [
        [
            "site/raw/a.dat, line 2: the one record of log 'L' that a check reads cannot be read: "
            "time '1970-01-01 00:10:00' lies outside the years 1990 to 2100. Correct 'time_format' "
            "of [layouts.plain], or see when the logger's clock was lost."
        ],
        [],
    ]


def test_a_channel_of_words(tmp_path):
    faults, _ = told(tmp_path, {"a.dat": HEAD + rows(20, cells=",closed,2")})
    assert faults == none_of(
        20, 2, "column 'A': 'closed' is not a number",
        "Correct the column in channels.csv, or 'decimal' of [layouts.plain]; name a word that "
        "stands for no value in its 'missing_text'.",
    )  # fmt: skip


def test_a_log_is_readable_if_one_of_its_files_is(tmp_path):
    assert told(tmp_path, {"a.dat": HEAD + rows(5, cells=",closed,2"), "b.dat": GOOD}) == [[], []]


def test_a_file_that_reads_in_part_is_noted_in_a_check(tmp_path):
    # Day and month the other way round: only the days to the twelfth have a month to fit.
    form = "{day:02}.09.2031 {hour:02}:{minute:02}"
    files = {f"{day}.dat": HEAD + rows(60, day=day, form=form) for day in (3, 17)}
    site = site_of(tmp_path, files, layout={"time_format": "%m.%d.%Y %H:%M"})
    assert header_faults(site) == ([], [], 2)
    assert header_faults(site, sampled=True) == (
        [],
        [
            f"{tmp_path}/raw/17.dat: 50 of the 50 records that a check reads would be rejected, "
            "most often (first in line 2): time '17.09.2031 00:10' does not read as "
            "'%m.%d.%Y %H:%M'. Correct 'time_format' of [layouts.plain]."
        ],
        2,
    )


def test_bad_records_at_the_top_do_not_hide_the_good_ones_of_the_head(tmp_path):
    assert told(tmp_path, {"a.dat": HEAD + "torn\n" * 80 + rows(5)}) == [[], []]


def test_a_wrong_interval(tmp_path):
    steps = "Give the minutes from one record to the next; records at another step are another log."
    assert told(tmp_path, {"a.dat": GOOD}, interval_min=20.0) == [
        [
            "site/site.toml, [logs.L]: steps of 10 min are commonest between the records of its "
            f"files, and interval_min is 20. {steps}"
        ],
        [],
    ]


def test_a_wrong_interval_of_a_long_table(tmp_path):
    layout = {"long": {"name_columns": ("what",), "value_column": "value"}}
    pairs = [rows(8, cells=f",{name},1.5").splitlines(True) for name in "AB"]
    text = "TIMESTAMP,what,value\n" + "".join("".join(pair) for pair in zip(*pairs, strict=True))
    assert told(tmp_path, {"a.dat": text}, layout=layout) == [[], []]
    (fault,), _ = told(tmp_path, {"a.dat": text}, layout=layout, interval_min=5.0)
    assert "steps of 10 min are commonest" in fault and "interval_min is 5." in fault


def test_trial_records_at_the_top_are_not_the_interval_of_the_log(tmp_path):
    trial = rows(59, step_min=1)
    assert told(tmp_path, {"a.dat": HEAD + trial + "".join(rows(140, day=d) for d in (2, 3))}) == [
        [],
        [],
    ]


def test_too_few_records_tell_no_interval(tmp_path):
    assert told(tmp_path, {"a.dat": HEAD + rows(3)}, interval_min=20.0) == [[], []]


def test_files_that_lack_a_column_of_others_are_named(tmp_path):
    channels = [("A", None, None), ("B", None, None), ("C", None, None)]
    fewer = "TIMESTAMP,A\n" + rows(6, day=2, cells=",1.5")
    files = {"a.dat": HEAD.replace("B", "B,C") + rows(6, cells=",1,2,3"), "b.dat": fewer}
    assert told(tmp_path, files, channels=channels) == [
        [],
        ["site/raw/b.dat has no column B (channels.csv row 3), C (channels.csv row 4)"],
    ]


def test_a_column_is_not_missed_outside_the_span_of_its_channel(tmp_path):
    # Standard time is UTC+1: the file runs from 2 June 01:00 to 02:00.
    files = {"a.dat": GOOD, "b.dat": "TIMESTAMP,A\n" + rows(6, day=2, cells=",1.5")}
    for span, missed in [
        ((None, "2031-06-02T01:00"), False),
        ((None, "2031-06-02T01:10"), True),
        (("2031-06-02T02:00", None), False),
        (("2031-06-02T01:50", None), True),
    ]:
        _, notes = told(tmp_path, files, channels=[("A", None, None), ("B", *span)])
        assert notes == ["site/raw/b.dat has no column B (channels.csv row 3)"] * missed


def test_a_column_that_comes_with_a_later_names_line_is_known(tmp_path):
    text = "TIMESTAMP,A\n" + rows(3, cells=",1") + HEAD + rows(3, day=2)
    assert told(tmp_path, {"a.dat": text}, channels=[("B", None, None)]) == [[], []]


def test_folders_and_links_to_nothing_are_noted(tmp_path):
    site = site_of(tmp_path, {"a.dat": GOOD})
    (tmp_path / "raw" / "old").mkdir()
    (tmp_path / "raw" / "z.dat").symlink_to(tmp_path / "gone.dat")
    assert header_faults(site) == (
        [],
        [
            f"{tmp_path}/raw/old: 'files' of log 'L' matches it, but it is a folder: nothing is "
            "read from it",
            f"{tmp_path}/raw/z.dat: 'files' of log 'L' matches it, but it is a link that leads to "
            "nothing: nothing is read from it",
        ],
        1,
    )


def run(folder, files, **more):
    site = site_of(folder, files, **more)
    return site, {"L": read_log(site, "L")}


def silent(folder, files, **more):
    return [
        str(fault).replace(str(folder), "site")
        for fault in silent_logs(*run(folder, files, **more))
    ]


def test_a_log_whose_lines_are_all_rejected(tmp_path):
    text = HEAD + "torn\n" + rows(5, cells=",1;5,2")
    assert silent(tmp_path, {"a.dat": HEAD, "b.dat": text}) == [
        "site/raw/b.dat, line 3: log 'L' gives no record: 5 of 6 data lines are rejected: "
        "column 'A': '1;5' is not a number. Correct the column in channels.csv, or 'decimal' of "
        "[layouts.plain]; name a word that stands for no value in its 'missing_text'."
    ]


def test_a_log_whose_hours_do_not_exist(tmp_path):
    text = HEAD + "2031-03-30 02:10:00,1,2\n"
    assert silent(tmp_path, {"a.dat": text}, clock="civil:Europe/Berlin") == [
        "site/raw/a.dat, line 2: log 'L' gives no record: 1 of 1 data lines are rejected: "
        "2031-03-30 02:10:00 does not exist in Europe/Berlin: clocks skip from 02:00 to 03:00. If "
        'the logger does not follow daylight saving, set a fixed clock such as "utc+1" for this '
        "log. Correct 'clock' of [logs.L]."
    ]


def test_a_log_outside_the_span_of_its_channels(tmp_path):
    channels = [("A", "2032-01-01T00:00", None)]
    assert silent(tmp_path, {"a.dat": GOOD + "torn\n"}, channels=channels) == [
        "site/site.toml, [logs.L]: log 'L' gives no record: 6 of 7 data lines lie outside from and "
        "to of all its channels. Correct from and to in channels.csv, or 'clock' and 'time_format' "
        "of the log."
    ]


def test_a_log_of_headers_alone(tmp_path):
    assert silent(tmp_path, {"a.dat": HEAD}) == [
        "site/site.toml, [logs.L]: log 'L' gives no record: its files hold no line of data. Put "
        "its downloads there."
    ]


def test_a_log_with_a_record_is_not_silent(tmp_path):
    assert silent(tmp_path, {"a.dat": GOOD}) == []


def test_records_that_share_a_step_are_told(tmp_path):
    # Of 00:10 to 01:00 on steps of 20 min, 00:10, 00:30 and 00:50 round to the next step.
    files = {"a.dat": GOOD, "copy.dat": GOOD, "again.dat": GOOD + "\n"}
    assert displaced_notes(*run(tmp_path, files, interval_min=20.0)) == [
        "3 records of log 'L' fell on a step that another record is nearer to: see rejected.csv; "
        "is interval_min (20) right?"
    ]


def test_one_record_that_shares_a_step(tmp_path):
    text = GOOD + "2031-06-01 00:10:30,1,2\n"
    assert displaced_notes(*run(tmp_path, {"a.dat": text})) == [
        "1 record of log 'L' fell on a step that another record is nearer to: see rejected.csv; "
        "is interval_min (10) right?"
    ]


def test_a_download_written_again_with_other_stamps_is_a_repeat(tmp_path):
    again = GOOD.replace(":00,", ":03,")
    site, logs = run(tmp_path, {"a.dat": GOOD, "b.dat": again})
    assert len(logs["L"].displaced) == 6
    assert displaced_notes(site, logs) == []


def test_other_values_a_few_seconds_off_are_no_repeat(tmp_path):
    other = GOOD.replace(":00,1.5", ":03,1.6")
    assert displaced_notes(*run(tmp_path, {"a.dat": GOOD, "b.dat": other})) == [
        "6 records of log 'L' fell on a step that another record is nearer to: see rejected.csv; "
        "is interval_min (10) right?"
    ]


def test_files_of_which_much_is_rejected_are_told(tmp_path):
    files = {"a.dat": GOOD + "torn\n2031\n\n", "b.dat": GOOD + "torn\n"}
    site, logs = run(tmp_path, files)
    assert rejection_notes(site, logs) == [
        f"{tmp_path}/raw/a.dat: 25 % of its 8 data lines are rejected, most often (first in line "
        "8): has 1 fields; its names line 1 has 3. Correct 'delimiter' or 'decimal' of "
        "[layouts.plain]."
    ]


def test_a_fifth_of_the_lines_may_be_rejected(tmp_path):
    assert rejection_notes(*run(tmp_path, {"a.dat": HEAD + rows(4) + "torn\n"})) == []
