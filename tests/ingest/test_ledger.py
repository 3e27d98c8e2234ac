"""The tables of the account: columns as promised, sorted, texts as they stand in the files."""

from log_by_hand import HEAD, read

from sapflux.ingest.ledger import conflicts_table, ledger_table, rejected_table

ROW = "2031-06-01 00:10:00,1.5,2\n"


def test_ledger():
    table = ledger_table(read({"b.dat": HEAD + ROW, "a.dat": HEAD + "x\n"}))
    assert ",".join(table.columns) == (
        "file,sha256,lines,header,kept,duplicate,conflicting,rejected,blank,outside"
    )
    assert table["file"].tolist() == ["raw/a.dat", "raw/b.dat"]
    assert table["rejected"].tolist() == [1, 0]
    assert (table.iloc[:, 3:].sum(axis=1) == table["lines"]).all()


def test_rejected_lines_hold_what_a_record_has_displaced():
    rows = "2031-06-01 00:11:00,1,2\n=HYPERLINK(1),2,3\n" + ROW
    table = rejected_table(read({"b.dat": HEAD + rows, "a.dat": HEAD + "@x\n"}))
    assert list(table.columns) == ["file", "line", "reason", "text"]
    assert table.values.tolist() == [
        ["raw/a.dat", 2, "has 1 fields; its names line 1 has 3", "@x"],
        ["raw/b.dat", 2, "raw/b.dat, line 4 is nearer to the same step", "2031-06-01 00:11:00,1,2"],
        [
            "raw/b.dat",
            3,
            "time '=HYPERLINK(1)' does not read as '%Y-%m-%d %H:%M:%S'",
            "=HYPERLINK(1),2,3",
        ],
    ]


def test_conflicts():
    table = conflicts_table(read([HEAD + ROW, HEAD + "\n" + ROW.replace("1.5", "-1.7")]))
    assert ",".join(table.columns) == (
        "stamp,log,column,value,file,line,other_value,other_file,other_line"
    )
    row = table.iloc[0]
    given = {row[f"{of}value"]: (row[f"{of}file"], row[f"{of}line"]) for of in ("", "other_")}
    assert given == {"1.5": ("raw/0.dat", 2), "-1.7": ("raw/1.dat", 3)}
    assert str(row["stamp"]) == "2031-06-01 00:10:00"


def test_tables_without_a_row_keep_their_columns():
    series = read(HEAD + ROW)
    assert len(rejected_table(series)) == len(conflicts_table(series)) == 0
    assert list(conflicts_table()) == list(conflicts_table(series))
