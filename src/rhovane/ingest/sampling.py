"""What sample files look like: evidence for a draft of the settings. Nothing here decides a clock or a label."""

from __future__ import annotations

import csv
import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import date, datetime, timedelta
from itertools import pairwise
from pathlib import Path

from rhovane.ingest.clock import text_reader
from rhovane.ingest.unpacking import unpacked
from rhovane.model import FeedError

SAMPLE_MB = 64  # MB; larger files are not looked at
MOST_LINES = 20_000  # lines of a file that are looked at
MOST_CODES = 200  # distinct texts up to which a column can be one of codes
DELIMITERS = (",", ";", "\t", "|")
TIME_FORMATS = (
    "%Y-%m-%d %H:%M",
    "%Y-%m-%d %H:%M:%S",
    "%Y-%m-%dT%H:%M",
    "%Y-%m-%dT%H:%M:%S",
    "%Y-%m-%dT%H:%MZ",
    "%Y-%m-%dT%H:%M:%SZ",
    "%Y-%m-%dT%H:%M%z",
    "%Y-%m-%dT%H:%M:%S%z",
    "%d.%m.%Y %H:%M",
    "%d.%m.%Y %H:%M:%S",
    "%d/%m/%Y %H:%M",
    "%m/%d/%Y %H:%M",
    "%Y/%m/%d %H:%M",
    "%Y%m%d%H%M",
    "%Y%m%d%H",
    "%Y%m%d %H%M",
    "%Y-%m-%d",
    "%d.%m.%Y",
)
_NUMBER = {".": re.compile(r"[+-]?\d+(\.\d*)?([eE][+-]?\d+)?"), ",": re.compile(r"[+-]?\d+(,\d*)?")}
_CODE = re.compile(r"-?9{2,}(\.9+|\.0+)?")
MISSING_WORDS = ("", "NA", "N/A", "n/a", "nan", "NaN", "null", "NULL", "-", "--", "---")


@dataclass
class Column:
    """One column of a sample: what its cells are."""

    name: str
    cells: list[str]
    time_formats: list[str] = field(default_factory=list)
    share_numbers: float = 0.0
    others: Counter[str] = field(default_factory=Counter)


@dataclass
class Sample:
    """One file as text in columns, with how it was cut and what its times say."""

    path: Path
    delimiter: str
    decimal: str
    encoding: str
    preamble_lines: int
    comment: str
    columns: list[Column]
    evidence: list[str] = field(default_factory=list)

    @property
    def times(self) -> list[Column]:
        """Columns in which nearly every cell is a time."""
        return [column for column in self.columns if column.time_formats]


def read_sample(path: Path) -> Sample:
    """Look at one delimited text file.

    Raises
    ------
    FeedError
        It cannot be read, is no text, or has no line that looks like a header over rows.
    """
    try:
        if path.stat().st_size > SAMPLE_MB * 1_000_000:
            raise FeedError(f"{path}: larger than {SAMPLE_MB} MB; leave a smaller sample beside it.")
        data = unpacked(path.read_bytes(), SAMPLE_MB)
    except OSError as error:
        raise FeedError(f"{path}: cannot be read ({error.strerror}).") from error
    encoding, text = _decoded(path, data)
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")[:MOST_LINES]
    comment = "#" if any(line.startswith("#") for line in lines[:50]) else ""
    delimiter, header_at, width = _cut(path, lines, comment)
    kept = [
        (i, line)
        for i, line in enumerate(lines)
        if i >= header_at and line.strip() and not (comment and line.startswith(comment))
    ]
    rows = [row for _, line in kept for row in csv.reader([line], delimiter=delimiter)]
    names, body = [name.strip() for name in rows[0]], [row for row in rows[1:] if len(row) == width]
    if not body:
        raise FeedError(f"{path}: a header and no rows under it.")
    columns = [Column(name, [row[j].strip() for row in body]) for j, name in enumerate(names)]
    decimal = _decimal(columns)
    for column in columns:
        _describe(column, decimal)
    preamble = (
        header_at
        if any(line.strip() and not (comment and line.startswith(comment)) for line in lines[:header_at])
        else 0
    )
    return Sample(path, delimiter, decimal, encoding, preamble, comment, columns)


def _decoded(path: Path, data: bytes) -> tuple[str, str]:
    tried = ("utf-16",) if data.startswith((b"\xff\xfe", b"\xfe\xff")) else ("utf-8", "latin-1")
    for encoding in tried:
        try:
            text = data.decode("utf-8-sig" if encoding == "utf-8" else encoding)
        except UnicodeDecodeError:
            continue
        if "\0" in text:
            break
        return encoding, text
    raise FeedError(f"{path}: no text in utf-8, utf-16 or latin-1.")


def _cut(path: Path, lines: list[str], comment: str) -> tuple[str, int, int]:
    """Delimiter, line of the header (from 0) and number of columns, by which most lines come out alike."""
    best = (0, ",", 0, 0)
    usable = [
        i for i, line in enumerate(lines) if line.strip() and not (comment and line.startswith(comment))
    ]
    for delimiter in DELIMITERS:
        widths = {i: lines[i].count(delimiter) + 1 for i in usable}
        if not widths:
            continue
        width, count = Counter(widths.values()).most_common(1)[0]
        header = next(i for i in usable if widths[i] == width)
        if width > 1 and count >= 2 and (count * width) > best[0]:
            best = (count * width, delimiter, header, width)
    if not best[0]:
        raise FeedError(f"{path}: no header over rows with the same number of columns (tried , ; tab and |).")
    return best[1], best[2], best[3]


def _decimal(columns: Sequence[Column]) -> str:
    cells = [cell for column in columns for cell in column.cells[:500]]
    commas = sum(bool(re.fullmatch(r"[+-]?\d+,\d+", cell)) for cell in cells)
    points = sum(bool(re.fullmatch(r"[+-]?\d+\.\d+", cell)) for cell in cells)
    return "," if commas > points else "."


def _describe(column: Column, decimal: str) -> None:
    cells = column.cells
    some = cells[:: max(1, len(cells) // 400)]
    for pattern in TIME_FORMATS:
        read = text_reader(pattern)
        if sum(read(cell) is not None for cell in some) >= 0.9 * len(some):
            column.time_formats.append(pattern)
    numbers = [bool(_NUMBER[decimal].fullmatch(cell)) for cell in cells]
    column.share_numbers = sum(numbers) / len(cells)
    column.others = Counter(
        cell for cell, number in zip(cells, numbers, strict=True) if not number or _CODE.fullmatch(cell)
    )


def clock_evidence(labels: Sequence[datetime], step: timedelta) -> list[str]:
    """What time labels of one series say about their clock, in words; empty when they say nothing.

    Parameters
    ----------
    labels : sequence of datetime
        Without offset, in file order, of one series.
    step : timedelta
        Between labels.
    """
    per_day = timedelta(days=1) // step
    counts: Counter[date] = Counter(label.date() for label in labels)
    days = sorted(counts)[1:-1]  # the first and last may be cut
    found = []
    hour = timedelta(hours=1) // step
    for day in days:
        extra = counts[day] - per_day
        if day.weekday() == 6 and extra in (hour, -hour) and hour:
            what = "again" if extra > 0 else "skipped"
            found.append(f"{counts[day]} rows on {day}, a Sunday: an hour comes {what}, as on a civil clock")
    changes = [day for day in days if day.weekday() == 6 and day.month in (3, 10) and day.day >= 25]
    if changes and not found:
        whole = [day for day in changes if counts[day] == per_day]
        if whole:
            found.append(
                f"{per_day} rows on {', '.join(map(str, whole))}, when European civil clocks change: no civil clock of Europe"
            )
    if any(label.hour == 0 and label.minute == 0 for label in labels[:1]):
        found.append(f"the file begins with {labels[0]:%H:%M}: usual for labels at the start of an hour")
    elif labels and labels[0] - labels[0].replace(hour=0, minute=0, second=0) == step:
        found.append(
            f"the file begins with {labels[0]:%H:%M}, one step after midnight: usual for labels at the end"
        )
    return found


def step_of(labels: Sequence[datetime]) -> timedelta | None:
    """The commonest distance between different labels that follow each other; None for a single label."""
    distinct = sorted(set(labels))
    gaps = Counter(b - a for a, b in pairwise(distinct))
    return gaps.most_common(1)[0][0] if gaps else None
