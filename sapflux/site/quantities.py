"""The quantities that a logger column may be, as a table for people."""

from sapflux.schema import QUANTITIES
from sapflux.units import accepted

HEADER = ("quantity", "units it may be written in", "kinds it may belong to")


def quantity_table():
    """Rows (quantity, units, kinds) of text, in the order of the schema; HEADER names the columns.

    >>> quantity_table()[0]
    ('heated_emf', 'V, mV, uV', 'probe')
    """
    return [
        (name, ", ".join(accepted(name)), ", ".join(row.columns))
        for name, row in QUANTITIES.items()
    ]


def table_lines():
    """The table as lines of text in columns, its header first.

    >>> print(table_lines()[1])
    heated_emf                    | V, mV, uV                     | probe
    """
    rows = [HEADER, *quantity_table()]
    widths = [max(len(row[i]) for row in rows) for i in (0, 1)]
    return [f"{one:{widths[0]}} | {two:{widths[1]}} | {three}" for one, two, three in rows]
