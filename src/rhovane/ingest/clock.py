"""Time labels → instants: the declared clock of a source, and the two nights on which a civil clock lies.

A label is the moment that the source's clock shows at the start or end of an interval. On a civil clock

- a label that the clock skips (spring) names no moment and is rejected;
- a label that the clock shows twice (autumn) is settled by the order of the rows. Within each series, take the
  unbroken stretch of rows whose labels lie in the repeated hour. If the labels step back (or repeat) exactly
  once in the stretch, the rows before that step are from before the clock change and the others from after
  it. If they never step back, order cannot tell; if they step back more than once, or if the rows next to the
  stretch are not before and after the repeated hour, order contradicts itself; the stretch is then rejected.

This is the only reading of the labels under which time runs forward through the series. A series that runs
mostly backwards in its file (newest first) is read from its end.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from functools import lru_cache
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

from rhovane.ingest.cells import Cell, Fault, distinct, is_empty, judged, quoted
from rhovane.ingest.plain_labels import plain_labels
from rhovane.settings import SourceSettings, parse_offset

EPOCH = datetime(1970, 1, 1)
EPOCH_ORDINAL = EPOCH.toordinal()
DAY_S = 86_400  # seconds

_DIRECTIVES = {
    "Y": r"(?P<Y>[0-9]{4})",
    "m": r"(?P<m>[0-9]{1,2})",
    "d": r"(?P<d>[0-9]{1,2})",
    "H": r"(?P<H>[0-9]{1,2})",
    "M": r"(?P<M>[0-9]{1,2})",
    "S": r"(?P<S>[0-9]{1,2})",
    "%": "%",
}


@dataclass(frozen=True)
class Instants:
    """A time column as instants.

    ``first`` int64, shape (n,): whole seconds since 1970-01-01 UTC. ``second``: the same, except where the
    civil clock shows the label twice; there ``first`` is the earlier instant and ``second`` the later one.
    ``faults`` lists (row, reason); the numbers of such rows mean nothing.
    """

    first: NDArray[np.int64]
    second: NDArray[np.int64]
    faults: list[tuple[int, str]]


def read_labels(cells: Sequence[Cell], source: SourceSettings) -> Instants:
    """The instants that time labels name: not yet moved to interval starts, repeated hours not yet settled.

    Parameters
    ----------
    cells : sequence of Cell, length n
        Texts in ``source.time_format``, or times of a typed file. A label that carries its own offset (``%z``)
        is an instant whatever the clock of the source.
    source : SourceSettings
        Gives clock, step and time format.

    Notes
    -----
    Labels must lie on the step, counted from midnight of the clock that they are written in. In
    formats of plain numbers the hour "24:00" is the midnight that ends its day (ISO 8601:2004, 4.2.3).
    """
    read_text = text_reader(source.time_format)
    clock = clock_of(source.clock)
    step_s = source.step_minutes * 60
    # A civil day has 23, 24 or 25 hours: its start is found on the clock, then moved to what the caller expects.
    day_s = step_s if source.step == "1d" and source.label == "end" else 0

    def verdict(cell: Cell) -> tuple[int, int] | Fault:
        if is_empty(cell):
            return Fault("There is no time label. Correct the line.")
        moment = _moment(cell, read_text)
        if isinstance(cell, (int, float)):
            return Fault(f"{quoted(cell)} is a number, not a time. Correct columns.time of this source.")
        if moment is None:
            return Fault(f"{quoted(cell)} is not a time written as time_format = {source.time_format!r}.")
        wall_s, offset_s, fraction = moment
        if fraction or wall_s % step_s:
            return Fault(
                f"{quoted(cell)} is not on the step of {source.step}. Correct the label, or the step of this source."
            )
        if offset_s is not None:
            return wall_s - offset_s, wall_s - offset_s
        found = clock(wall_s - day_s)
        if found is None:
            return Fault(
                f"{quoted(cell)} does not exist on the clock {source.clock!r}: it was put forward past this "
                "label. Correct the clock of this source, or the label."
            )
        return found[0] + day_s, found[1] + day_s

    column = distinct(cells)
    if not source.clock.startswith("civil "):
        wall = plain_labels(column.cells, source.time_format)
        if wall is not None and not (wall % step_s).any():
            offset_s = 0 if source.clock == "UTC" else round(parse_offset(source.clock).total_seconds())
            instant = (wall - offset_s)[column.index]
            return Instants(instant, instant, [])
    answers, faults = judged(column, verdict, (0, 0))
    both = np.array(answers, dtype=np.int64).reshape(-1, 2)[column.index]
    return Instants(both[:, 0], both[:, 1], faults)


def read_issue_times(cells: Sequence[Cell], source: SourceSettings, *, unsaid: int) -> Instants:
    """When values were issued, in whole seconds since 1970-01-01 UTC; ``unsaid`` where the cell is empty.

    Notes
    -----
    Texts are in ``source.time_format`` or ISO 8601, on the clock of the source unless they carry an offset. A
    time that the civil clock shows twice is taken as the later one: by then the value was issued.
    """
    read_text = text_reader(source.time_format)
    clock = clock_of(source.clock)

    def verdict(cell: Cell) -> tuple[int, int] | Fault:
        if is_empty(cell):
            return unsaid, unsaid
        moment = _moment(cell, read_text) or _moment(cell, _read_iso)
        if moment is None:
            return Fault(
                f"{quoted(cell)} is no time of issue: write it as time_format = {source.time_format!r} or ISO 8601."
            )
        wall_s, offset_s, _ = moment
        found = clock(wall_s) if offset_s is None else (wall_s - offset_s, wall_s - offset_s)
        if found is None:
            return Fault(
                f"{quoted(cell)} does not exist on the clock {source.clock!r}. Correct the time of issue."
            )
        return found[1], found[1]

    column = distinct(cells)
    answers, faults = judged(column, verdict, (0, 0))
    both = np.array(answers, dtype=np.int64).reshape(-1, 2)[column.index]
    return Instants(both[:, 1], both[:, 1], faults)


def settle_repeated_hours(
    instants: Instants, rows: NDArray[np.int64]
) -> tuple[NDArray[np.int64], list[tuple[int, str]]]:
    """The instants of one series, with the repeated civil hour settled by the order of its rows.

    Parameters
    ----------
    instants : Instants
        Of the whole file.
    rows : ndarray of int64, shape (m,)
        Rows of one series whose labels are without fault, in file order.

    Returns
    -------
    instant : ndarray of int64, shape (m,)
    faults : list of (row, reason)
        Rows for which order cannot tell, or contradicts itself.

    Notes
    -----
    The rule is stated at the top of this module.
    """
    instant = instants.first[rows].copy()
    second = instants.second[rows]
    faults: list[tuple[int, str]] = []
    if np.array_equal(instant, second):
        return instant, faults
    moves = np.sign(np.diff(instant))
    newest_first = moves.sum() < 0
    order = np.arange(len(rows))[::-1] if newest_first else np.arange(len(rows))
    first, later = instant[order], second[order]
    for begin, end in _stretches(first, later):
        stretch = first[begin:end]
        back = np.flatnonzero(np.diff(stretch) <= 0) + 1
        in_order = (begin == 0 or first[begin - 1] < stretch.min()) and (
            end == len(first) or first[end] > later[begin:end].max()
        )
        if in_order and len(back) == 1:
            after_change = order[begin + int(back[0]) : end]
            instant[after_change] = second[after_change]
            continue
        reason = _ONCE if in_order and len(back) == 0 else _CONTRADICTORY
        faults += [(int(rows[i]), reason) for i in order[begin:end]]
    return instant, sorted(faults)


_REMEDY = "Have this source deliver UTC, or labels with their offset (%z)."
_ONCE = (
    "The civil clock shows this label twice, the series has it once, and the order of the rows does not tell "
    f"which hour is meant. {_REMEDY}"
)
_CONTRADICTORY = (
    "The civil clock shows this label twice, and the rows of the series around it are not in order of time, so "
    f"it cannot be told which hour is meant. {_REMEDY}"
)


def _stretches(first: NDArray[np.int64], second: NDArray[np.int64]) -> list[tuple[int, int]]:
    """Unbroken runs [begin, end) of repeated labels that belong to one clock change."""
    doubtful = np.flatnonzero(first != second)
    # Labels of one repeated hour are less than its length apart; those of another year are not.
    apart = (np.diff(doubtful) > 1) | (np.abs(np.diff(first[doubtful])) >= (second - first)[doubtful][:-1])
    starts = np.concatenate([[0], np.flatnonzero(apart) + 1])
    ends = np.concatenate([starts[1:], [len(doubtful)]])
    return [(int(doubtful[b]), int(doubtful[e - 1]) + 1) for b, e in zip(starts, ends, strict=True)]


@lru_cache(maxsize=64)
def clock_of(name: str) -> Callable[[int], tuple[int, int] | None]:
    """How a clock reading becomes UTC.

    Parameters
    ----------
    name : str
        "UTC", a fixed offset "+01:00", or "civil ZONE".

    Returns
    -------
    callable
        Takes a clock reading, in seconds since 1970-01-01 00:00 on that clock; returns the earlier and later
        instant with that reading, in seconds since 1970-01-01 UTC (equal but for repeated hours), or None
        where the clock skips the reading.
    """
    if not name.startswith("civil "):
        offset_s = 0 if name == "UTC" else round(parse_offset(name).total_seconds())
        return lambda wall_s: (wall_s - offset_s, wall_s - offset_s)
    zone = ZoneInfo(name.removeprefix("civil "))

    def civil(wall_s: int) -> tuple[int, int] | None:
        reading = (EPOCH + timedelta(seconds=wall_s)).replace(tzinfo=zone)
        before, after = (_offset_s(reading.replace(fold=fold)) for fold in (0, 1))
        # PEP 495: in a gap the offset of fold 0 is the smaller one, in a repeated hour the larger one.
        if before < after:
            return None
        return wall_s - before, wall_s - after

    return civil


Moment = tuple[int, int | None, bool]
"""Clock reading in seconds since 1970-01-01, offset from UTC in seconds if known, whether a fraction was cut."""


@lru_cache(maxsize=64)
def text_reader(time_format: str) -> Callable[[str], Moment | None]:
    """How texts in a strptime pattern become clock readings; the reader gives None for other texts."""
    pattern = _numeric_pattern(time_format)
    if pattern is None:
        return lambda text: _read_strptime(text, time_format)

    position = {name: i - 1 for name, i in pattern.groupindex.items()}
    year, month, day, hour, minute, second = (position.get(name, -1) for name in "YmdHMS")

    def read(text: str) -> Moment | None:
        match = pattern.fullmatch(text)
        if match is None:
            return None
        part = [*map(int, match.groups()), 0]  # the last entry, at -1, stands for what the pattern lacks
        h, m, s = part[hour], part[minute], part[second]
        if m > 59 or s > 59 or h > 24 or (h == 24 and (m or s)):
            return None
        try:
            days = date(part[year], part[month], part[day]).toordinal() - EPOCH_ORDINAL
        except ValueError:
            return None
        return days * DAY_S + h * 3600 + m * 60 + s, None, False

    return read


def _numeric_pattern(time_format: str) -> re.Pattern[str] | None:
    """The pattern as a regular expression, if it is made of plain numbers and holds a whole date."""
    text, found = "", []
    pieces = re.split(r"%(.)", time_format)
    for i, piece in enumerate(pieces):
        if i % 2 == 0:
            text += re.sub(r"(?:\\?\s)+", r"\\s+", re.escape(piece))
        elif piece in _DIRECTIVES:
            text += _DIRECTIVES[piece]
            found.append(piece)
        else:
            return None
    names = [name for name in found if name != "%"]
    if len(set(names)) < len(names) or not {"Y", "m", "d"} <= set(names):
        return None
    return re.compile(text)


def _moment(cell: Cell, read_text: Callable[[str], Moment | None]) -> Moment | None:
    if isinstance(cell, datetime):
        return _split_datetime(cell)
    return read_text(cell.strip()) if isinstance(cell, str) else None


def _read_strptime(text: str, time_format: str) -> Moment | None:
    try:
        return _split_datetime(datetime.strptime(text, time_format))
    except ValueError:
        return None


def _read_iso(text: str) -> Moment | None:
    try:
        return _split_datetime(datetime.fromisoformat(text))
    except ValueError:
        return None


def _split_datetime(moment: datetime) -> Moment:
    span = moment.replace(tzinfo=None) - EPOCH
    wall_s = span.days * DAY_S + span.seconds
    return wall_s, None if moment.tzinfo is None else _offset_s(moment), span.microseconds > 0


def _offset_s(moment: datetime) -> int:
    offset = moment.utcoffset()
    return 0 if offset is None else round(offset.total_seconds())


def whole_seconds(moment: datetime) -> int:
    """An aware time as whole seconds since 1970-01-01 UTC, rounded down."""
    return (moment - EPOCH.replace(tzinfo=UTC)) // timedelta(seconds=1)
