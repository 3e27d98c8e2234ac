"""The text of logger files: encodings, line ends, the fields of one line, text for messages."""

import codecs
import re

import numpy as np


def shown(text, longest=40):
    """Text as one short line with control characters escaped."""
    plain = "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in text)
    return plain if len(plain) <= longest else plain[: longest - 3] + "..."


def as_utf8(raw, encoding):
    """The bytes of a file as UTF-8 without byte order mark.

    What is not valid in `encoding` becomes the byte 0xFF, which no UTF-8 text holds.
    LookupError if Python knows no such encoding.
    """
    name = codecs.lookup(encoding).name
    if name not in ("utf-8", "utf-8-sig") and not (raw.isascii() and _extends_ascii(name)):
        text = raw.decode(name, "replace")
        raw = text.encode("utf-8", "replace").replace(b"\xef\xbf\xbd", b"\xff")
    return raw.removeprefix(codecs.BOM_UTF8)


def _extends_ascii(name):
    """Whether every ASCII byte stands for itself, whatever precedes it."""
    plain = bytes(range(128))
    try:
        return plain.decode(name) == plain.decode("ascii")
    except UnicodeError:
        return False


def squeezed(data):
    """Runs of blanks as one blank, none at the ends of a line: for blank-delimited tables."""
    return re.sub(rb"(?<![^\r\n]) +| +(?![^\r\n])|(?<= ) +", b"", data)


def line_bounds(data):
    """Start and stop of every line, without line ends, and whether the last has no line end.

    >>> [a.tolist() for a in line_bounds(b"a\\r\\nbc\\rd")[:2]]
    [[0, 3, 6], [1, 5, 7]]
    """
    array = np.frombuffer(data, dtype=np.uint8)
    ends = np.flatnonzero(array == 10)
    stops = ends
    if b"\r" in data:
        returns = np.flatnonzero(array == 13)
        paired = np.zeros(len(returns), dtype=bool)
        inner = returns + 1 < len(array)
        paired[inner] = array[returns[inner] + 1] == 10
        ends = np.sort(np.concatenate([ends, returns[~paired]]))
        before = np.where(ends > 0, ends - 1, 0)
        stops = ends - ((array[ends] == 10) & (array[before] == 13) & (ends > 0))
    start = np.concatenate([[0], ends + 1])
    stop = np.concatenate([stops, [len(array)]])
    open_end = bool(start[-1] < len(array))
    if not open_end:
        start, stop = start[:-1], stop[:-1]
    return start.astype(np.int64), stop.astype(np.int64), open_end


def split_line(line, layout):
    """The fields of one line as text, stripped; None if a quote is opened and not closed.

    A quote opens a field only at its beginning; two quotes inside a quoted field are one.
    Where a field goes on after its closing quote, the quotes are plain characters.

    >>> from sapflux.site.config import Layout
    >>> split_line(b'"a, b", 1,"x ""y"" z"', Layout())
    ['a, b', '1', 'x "y" z']
    """
    text = line.decode("utf-8", "backslashreplace")
    quote, separator = layout.quote, layout.separator
    if not quote or quote not in text:
        return [field.strip() for field in text.split(separator)]
    if text.count(quote) % 2:
        return None
    fields, position = [], 0
    while True:
        match = _quoted(quote, separator).match(text, position)
        if match:
            fields.append(match[1].replace(quote * 2, quote).strip())
            position = match.end()
        else:
            stop = text.find(separator, position)
            stop = len(text) if stop < 0 else stop
            fields.append(text[position:stop].strip())
            position = stop
        if position >= len(text):
            return fields
        position += 1


def _quoted(quote, separator):
    q, s = re.escape(quote), re.escape(separator)
    return re.compile(rf"[^\S{s}]*{q}((?:[^{q}]|{q}{q})*){q}[^\S{s}]*(?={s}|$)")
