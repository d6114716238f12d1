"""CSV bytes → table.

A row is a line: a quoted field may hold delimiters but no line break, so that one forgotten quote costs one
line and not the rest of the file, and line numbers are exact.
"""

from __future__ import annotations

import csv
from collections.abc import Callable, Sequence
from itertools import islice

from rhovane.ingest.cells import Cell, quoted, shown
from rhovane.ingest.table import Table
from rhovane.model import FeedError, RejectedRow

LEAST_BYTES = 2_000_000  # of a file that is worth loading compiled code for
MOST_CODED = 64  # columns up to which each can have a table of its distinct cells; 30 MB each at the most
UTF8_MARK = b"\xef\xbb\xbf"
UTF16_MARKS = (b"\xff\xfe", b"\xfe\xff")


def read_csv_table(
    data: bytes,
    *,
    delimiter: str,
    encoding: str,
    preamble_lines: int = 0,
    comment: str = "",
    header_rows: int = 1,
) -> Table:
    """The rows of a CSV file; rows with too few or too many columns are set apart.

    Parameters
    ----------
    data : bytes
        The whole file. Line ends LF, CRLF and CR and a byte order mark are accepted; blank lines are ignored.
    delimiter : str
        One character.
    encoding : str
        "utf-8", "utf-16" or "latin-1". Bytes that are no text stay in their cells, marked, and are a fault
        of the rows that use these cells.
    preamble_lines : int
        Lines before the header that are passed over, whatever they hold.
    comment : str
        Lines that begin with this text are passed over, as blank lines are; "" for none.
    header_rows : int
        Rows that name the columns. The name of a column is its texts, joined by one space; with no such row
        the columns are called "1", "2" and so on.

    Raises
    ------
    FeedError
        The file is empty, or not even its header is text.
    """
    if not data.strip():
        raise FeedError("The file is empty. Ask the source to deliver it again, or remove it.")
    if len(data) >= LEAST_BYTES and not (preamble_lines or comment) and header_rows == 1:
        table = _large_table(data, delimiter, encoding)
        if table is not None:
            return table
    text = _decode(data, encoding)
    lines = text.split("\n")
    ends_whole = lines[-1] == ""
    if ends_whole:
        lines.pop()
    if preamble_lines or (comment and comment in text):
        # Blank lines are passed over, and keep their place in the count of lines.
        passed = preamble_lines
        lines = [
            "" if i < passed or (comment and line.startswith(comment)) else line
            for i, line in enumerate(lines)
        ]
    wanted = max(header_rows, 1)
    at = list(islice((i for i, line in enumerate(lines) if line.strip()), wanted))
    if len(at) < wanted:
        found = "blank lines only" if not at else f"{len(at)} lines, but {header_rows} name the columns"
        raise FeedError(f"The file holds {found}. Ask the source to deliver it again, or remove it.")
    header_texts = [lines[i] for i in at]
    header = _names([_header_fields(text, delimiter, data, encoding) for text in header_texts])
    begin = at[-1] + 1
    if header_rows == 0:
        header, header_texts, begin = tuple(str(j + 1) for j in range(len(header))), [], at[0]
    column, line, rejected = _split(
        lines[begin:], begin + 1, delimiter, len(header), header_texts, ends_whole
    )
    position = {name: i for i, name in enumerate(header)}
    return Table(
        header,
        line,
        lambda name: column(position[name]),
        lambda row: shown(lines[line[row] - 1]),
        tuple(rejected),
        "\n".join(header_texts),
    )


def _large_table(data: bytes, delimiter: str, encoding: str) -> Table | None:
    """The rows of a large file without quotes, cut by compiled code; None if it needs a closer look."""
    body = data.removeprefix(UTF8_MARK) if encoding == "utf-8" else data
    body = body.replace(b"\r\n", b"\n") if b"\r" in body else body
    head, _, body = body.partition(b"\n")
    plain = (
        encoding != "utf-16"
        and delimiter.isascii()
        and not any(mark in body for mark in (b'"', b"\0", b"\r"))
    )
    if not plain or not head.strip() or body.startswith(head + b"\n") or b"\n" + head + b"\n" in body:
        return None
    header_text = head.decode(encoding, "surrogateescape")
    header = _names([_header_fields(header_text, delimiter, data, encoding)])
    if not 2 <= len(header) <= MOST_CODED or not body:
        return None
    from rhovane.ingest.coded_csv import code_rows  # compiled code is loaded for large files only

    rows = code_rows(body, delimiter=delimiter, width=len(header), encoding=encoding)
    if rows is None:
        return None
    rejected = []
    for line in rows.bad.tolist():
        text = rows.text_of(line)
        cut = line == len(rows.begin) - 1 and not body.endswith(b"\n")
        reason = _fields(text, delimiter, len(header), [header_text], cut=cut) if text.strip() else []
        if isinstance(reason, str):
            rejected.append(RejectedRow(line + 2, "", shown(text), reason))
    position = {name: j for j, name in enumerate(header)}
    return Table(
        header,
        rows.line + 2,
        lambda name: rows.column(position[name]),
        lambda row: shown(rows.text_of(int(rows.line[row]))),
        tuple(rejected),
        header_text,
    )


def _names(rows: list[list[str]]) -> tuple[str, ...]:
    """Names of the columns from the rows of a header."""
    if len({len(row) for row in rows}) > 1:
        counts = ", ".join(str(len(row)) for row in rows)
        raise FeedError(
            f"The {len(rows)} header rows have different numbers of columns ({counts}). Correct header_rows or "
            "preamble_lines of this source, or the file."
        )
    return tuple(
        " ".join(filter(None, (text.strip() for text in texts))) for texts in zip(*rows, strict=True)
    )


def _decode(data: bytes, encoding: str) -> str:
    try:
        text = data.decode(encoding)
    except UnicodeDecodeError:
        text = data.decode(encoding, "surrogateescape" if encoding == "utf-8" else "replace")
    text = text.removeprefix("\ufeff")
    if "\r" in text:
        text = text.replace("\r\n", "\n")
        if "\n" not in text:
            text = text.replace("\r", "\n")
    return text


def _header_fields(header_text: str, delimiter: str, data: bytes, encoding: str) -> list[str]:
    found = None
    if encoding != "utf-16" and data.startswith(UTF16_MARKS):
        found = "utf-16"
    elif encoding != "utf-8" and data.startswith(UTF8_MARK):
        found = "utf-8"
    if found:
        raise FeedError(
            f'The file is not written in {encoding}. It looks like {found}: set encoding = "{found}".'
        )
    if "\0" in header_text:
        raise FeedError(
            "The header holds NUL bytes: the file is damaged or written in utf-16. Deliver it again, "
            'or set encoding = "utf-16".'
        )
    try:
        return next(csv.reader([header_text], delimiter=delimiter, strict=True))
    except csv.Error as error:
        raise FeedError(
            f"The header {quoted(header_text)} cannot be split ({error}). Correct its quotes."
        ) from None


def _split(
    body: list[str],
    first_line: int,
    delimiter: str,
    width: int,
    header_texts: list[str],
    ends_whole: bool,
) -> tuple[Callable[[int], list[Cell]], Sequence[int], list[RejectedRow]]:
    """The cells of a column by its position, the line of each row, and the rejected lines."""
    joined = delimiter.join(body)
    whole = range(first_line, first_line + len(body))
    if (
        width > 1
        and "\0" not in joined
        and "\r" not in joined
        and not any(text in body for text in header_texts)
    ):
        if '"' in joined:
            found = _quoted_rows(body, delimiter, width)
            if found is not None:
                return lambda j: [row[j] for row in found], whole, []
        elif {line.count(delimiter) for line in body} == {width - 1}:
            # Every line has the right number of plain fields: one cut serves all lines.
            cells: list[Cell] = list(joined.split(delimiter))
            return lambda j: cells[j::width], whole, []
    rows: list[list[str]] = []
    lines: list[int] = []
    rejected: list[RejectedRow] = []
    for i, text in enumerate(body):
        if not text.strip():
            continue
        cut = i == len(body) - 1 and not ends_whole
        fields = _fields(text, delimiter, width, header_texts, cut=cut)
        if isinstance(fields, str):
            rejected.append(RejectedRow(first_line + i, "", shown(text), fields))
        else:
            rows.append(fields)
            lines.append(first_line + i)
    return lambda j: [row[j] for row in rows], lines, rejected


def _quoted_rows(body: list[str], delimiter: str, width: int) -> list[list[str]] | None:
    """The fields of every line, if each line is one row of the right width; None if some need a closer look."""
    try:
        rows = list(csv.reader(body, delimiter=delimiter, strict=True))
    except csv.Error:
        return None
    # A field that ran on into the next line would leave fewer rows than lines.
    return rows if len(rows) == len(body) and set(map(len, rows)) == {width} else None


def _fields(text: str, delimiter: str, width: int, header_texts: list[str], *, cut: bool) -> list[str] | str:
    """The fields of one line, or why it is rejected."""
    if "\0" in text:
        return (
            "The line holds NUL bytes, as after a crash or a failed copy. Ask the source to deliver it again."
        )
    if text in header_texts:
        return "The line repeats the header, as in files joined together. Remove the line."
    try:
        # The csv module decides where there are quotes; without them it would only take longer.
        plain = '"' not in text and "\r" not in text
        fields = (
            text.split(delimiter) if plain else next(csv.reader([text], delimiter=delimiter, strict=True))
        )
    except csv.Error as error:
        if cut:
            return (
                "The file seems cut: its last line ends inside a quoted field. Deliver the whole file again."
            )
        return (
            f"The line cannot be split into columns ({error}). Correct its quotes; a field ends on its line."
        )
    if len(fields) == width:
        return fields
    if cut and len(fields) < width:
        return (
            f"The file seems cut: its last line has {len(fields)} of {width} columns and no line end. "
            "Deliver the whole file again."
        )
    many = "few" if len(fields) < width else "many"
    return f"Too {many} columns: {len(fields)} instead of {width}. Correct the line; quote a text that holds {delimiter!r}."
