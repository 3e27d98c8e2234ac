"""The account of every line as tables: ledger, rejected lines, conflicts."""

import pandas as pd

COUNTS = ["lines", "header", "kept", "duplicate", "conflicting", "rejected", "blank", "outside"]
LEDGER = ["file", "sha256", *COUNTS]
REJECTED = ["file", "line", "reason", "text"]
VALUES = ["value", "file", "line", "other_value", "other_file", "other_line"]
CONFLICTS = ["stamp", "log", "column", *VALUES]


def ledger_table(*series):
    """One row a file: how many of its lines went where. The classes sum to `lines`."""
    rows = [
        [record.path, *(getattr(record, name) for name in LEDGER[1:])]
        for one in series
        for record in one.files
    ]
    return _table(rows, LEDGER, ["file"])


def rejected_table(*series):
    """One row a line that gave no data: unreadable, or another record is nearer to its step."""
    rows = [
        list(row)  # file, line, reason, text
        for one in series
        for row in (*one.rejected, *one.displaced)
    ]
    return _table(rows, REJECTED, ["file", "line"])


def conflicts_table(*series):
    """One row a cell that two downloads give differently, with both values as they stand there."""
    rows = [list(row) for one in series for row in one.conflicts]
    return _table(rows, CONFLICTS, ["file", "line", "other_file", "other_line", "column"])


def _table(rows, columns, order):
    table = pd.DataFrame(rows, columns=columns)
    return table.sort_values(order, kind="stable", ignore_index=True)
