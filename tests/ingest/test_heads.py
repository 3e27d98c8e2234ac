"""The head of a file: names, a sample of its records, the step between them, kinds of reasons."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sapflux.ingest.heads import commonest_step, read_head, sample, sampled_rejects
from sapflux.ingest.parse import parse
from sapflux.ingest.reasons import commonest
from sapflux.site.config import Layout

LAYOUT = Layout(time_format="%H:%M:%S %Y-%m-%d")


def records(*times):
    text = "".join(f"{time} 2031-06-01,1\n" for time in times)
    return parse(f"TIMESTAMP,A\n{text}".encode(), LAYOUT)


def test_the_commonest_step():
    one = records("00:10:00", "00:20:00", "00:30:00", "01:30:00", "02:30:00", "02:40:00")
    assert commonest_step([one], 600) == commonest_step([one], 3600) == 600
    assert commonest_step([], 600) is None


def test_steps_of_several_files_count_together_and_not_from_one_to_the_next():
    files = [records(f"0{hour}:00:00", f"0{hour}:10:00") for hour in range(3)]
    assert commonest_step(files, 600) == 600
    assert commonest_step(files[:2], 600) is None


def test_jitter_is_no_other_step():
    one = records("00:10:01", "00:20:00", "00:30:03", "00:40:01", "00:50:02")
    assert commonest_step([one], 600) == pytest.approx(600, abs=3)


def test_of_equally_common_steps_the_declared_one_is_given():
    one = records(
        "00:10:00", "00:20:00", "00:30:00", "00:40:00", "01:40:00", "02:40:00", "03:40:00"
    )
    assert (commonest_step([one], 600), commonest_step([one], 3600)) == (600, 3600)


def test_steps_back_and_repeats_are_no_steps():
    one = records("00:30:00", "00:30:00", "00:20:00", "00:20:00", "00:10:00", "00:10:00")
    assert commonest_step([one], 600) is None


def head_of(folder, text, layout=None):
    (folder / "a.dat").write_text(text, encoding="utf-8")
    return read_head(folder / "a.dat", layout or Layout(), "a.dat")


ROW = "2031-06-01 00:10:00,1\n"


def test_a_sample_holds_so_many_lines_below_the_header(tmp_path):
    layout = Layout(names_line=2, units_line=3)
    head = head_of(tmp_path, "TABLE\nTIMESTAMP,A\nTS,mV\n" + 5 * ROW + "x\n", layout)
    for count in (1, 3, 5):
        assert sample(head, layout, None, count).line.tolist() == list(range(3, 3 + count))
    assert sampled_rejects(head, sample(head, layout, None, 5)) == []
    assert sampled_rejects(head, sample(head, layout, None, 6)) == [
        ("a.dat", 9, "has 1 fields; its names line 2 has 2")
    ]


def test_lines_above_the_names_are_no_records(tmp_path):
    head = head_of(tmp_path, "one\ntwo\nTIMESTAMP,A\n")
    parsed = sample(head, Layout())
    assert len(parsed.sheet.reasons) == 2
    assert sampled_rejects(head, parsed) == []


def test_a_head_that_is_cut_is_not_the_whole_file(tmp_path):
    assert head_of(tmp_path, "TIMESTAMP,A\n" + ROW).whole
    long = head_of(tmp_path, "TIMESTAMP,A\n" + 5000 * ROW)
    assert not long.whole
    # 12 bytes of names and 22 of each record: (65536 - 12) // 22 whole records
    assert len(sample(long, Layout()).line) == 2978


@given(
    st.permutations(["time '1' does not read as 'x'"] * 2 + ["has 3 fields; its names line"] * 3)
)
def test_the_commonest_reason_does_not_hang_on_the_order(reasons):
    found = commonest([("a", at, why, "") for at, why in enumerate(reasons)], "L", "plain")
    assert (found.count, found.line) == (3, reasons.index("has 3 fields; its names line"))
    assert found.remedy == "Correct 'delimiter' or 'decimal' of [layouts.plain]."


REMEDIES = {
    "has 2 fields; its names line 1 has 3": "Correct 'delimiter' or 'decimal' of [layouts.plain].",
    "bytes that are not valid utf-8": "Correct 'encoding' of [layouts.plain].",
    "holds a NUL byte": "Correct 'encoding' of [layouts.plain].",
    "a quote is opened and not closed": "Correct 'quote' of [layouts.plain].",
    "column 'probe' is empty": "Correct 'name_columns' of [layouts.plain].",
    "column 'A': '-,5e-3' is not a number": "Correct 'decimal' of [layouts.plain].",
    "column 'A' stands twice in the names line 1": "Give each column its own name.",
    "stands before any line of column names (expected: T)": (
        "Correct 'time_columns' of [layouts.plain]."
    ),
    "the file ends inside this line: '1.' has lost decimals": "See rejected.csv.",
}


@pytest.mark.parametrize("reason", REMEDIES)
def test_each_reason_has_its_remedy(reason):
    assert commonest([("a", 1, reason)], "L", "plain").remedy == REMEDIES[reason]


def test_no_line_is_rejected():
    assert commonest([], "L", "plain") is None
