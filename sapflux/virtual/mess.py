"""The mess that logger files pick up on their way: each function spoils a list of lines.

Line numbers are those of the file, from 1, so that a truth table can name them.
"""


def with_block(lines, at, block):
    """A block of lines (a header written again) put in before line `at`.

    >>> with_block(["h", "a", "b"], 3, ["h"])
    ['h', 'a', 'h', 'b']
    """
    return [*lines[: at - 1], *block, *lines[at - 1 :]]


def torn(lines, keep):
    """The last line cut after `keep` of its characters, share between 0 and 1.

    >>> torn(["a,b", "1,22"], 0.5)
    ['a,b', '1,']
    """
    last = lines[-1]
    return [*lines[:-1], last[: max(int(len(last) * keep), 1)]]


def open_quote(lines, at, delimiter, keep_cells):
    """Line `at` torn inside a quoted cell: a quote opens and nothing closes it.

    >>> open_quote(["h", "1,2,3"], 2, ",", 2)
    ['h', '1,2,"']
    """
    cells = lines[at - 1].split(delimiter)[:keep_cells]
    return [*lines[: at - 1], delimiter.join([*cells, '"']), *lines[at:]]


def nul_bytes(lines, at, count):
    """Line `at` overwritten with NUL bytes, as a memory card does after a power cut.

    >>> nul_bytes(["h", "1,2"], 2, 2) == ["h", "1" + chr(0) * 2]
    True
    """
    line = lines[at - 1]
    half = len(line) // 3
    return [*lines[: at - 1], line[:half] + "\0" * count, *lines[at:]]


def trailing_delimiters(lines, delimiter):
    """Every line with one delimiter too many at its end.

    >>> trailing_delimiters(["a;b"], ";")
    ['a;b;']
    """
    return [line + delimiter for line in lines]


def changed_cell(lines, at, delimiter, column, text):
    """Line `at` with another text in one cell (`column` from 0).

    >>> changed_cell(["h,i", "1,2"], 2, ",", 1, "9")
    ['h,i', '1,9']
    """
    cells = lines[at - 1].split(delimiter)
    cells[column] = text
    return [*lines[: at - 1], delimiter.join(cells), *lines[at:]]
