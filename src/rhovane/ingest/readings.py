"""Readings as columns, and rows of one file that speak of the same hour."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.model import RejectedRow


@dataclass(frozen=True)
class Readings:
    """Good rows as columns of equal length, in file order; bad rows with reasons; and how many were read.

    ``series`` holds positions in ``keys``; the other columns mean what they mean in
    :class:`rhovane.model.ParsedFile`.
    """

    keys: Sequence[str]
    series: NDArray[np.int64]
    hour_start: NDArray[np.int64]
    value: NDArray[np.float64]
    flag: NDArray[np.int8]
    stage: NDArray[np.int8]
    result_time: NDArray[np.int64]
    line: NDArray[np.int64]
    rejected: tuple[RejectedRow, ...] = ()
    rows_read: int = 0

    @classmethod
    def none(cls) -> Readings:
        """No readings at all."""
        whole = np.empty(0, dtype=np.int64)
        small = np.empty(0, dtype=np.int8)
        return cls((), whole, whole, np.empty(0), small, small, whole, whole)

    @property
    def series_key(self) -> NDArray[np.object_]:
        """Series keys as texts."""
        return np.array(self.keys, dtype=object)[self.series]

    def only(self, kept: NDArray[np.bool_], rejected: Sequence[RejectedRow], rows_read: int) -> Readings:
        """The readings kept, with the final list of rejected rows in order of line."""
        selected = slice(None) if kept.all() else kept
        return Readings(
            self.keys,
            self.series[selected],
            self.hour_start[selected],
            self.value[selected],
            self.flag[selected],
            self.stage[selected],
            self.result_time[selected],
            self.line[selected],
            tuple(sorted(rejected, key=lambda row: row.line)),
            rows_read,
        )


def find_repeats(readings: Readings) -> list[tuple[int, str]]:
    """Readings that another line of the same file replaces, as (position, reason).

    Notes
    -----
    Of two different readings for the same series and hour the higher stage stands, then the later time of issue,
    then the later line: the precedence that also holds between files. Of two equal readings the first stands.
    """
    if len(readings.series) < 2:
        return []
    span = readings.hour_start - readings.hour_start.min()
    if _all_apart(readings.series, span):
        return []
    slot = readings.series * (int(span.max()) + 1) + span
    order = np.argsort(slot, kind="stable")
    same = slot[order[1:]] == slot[order[:-1]]
    if not same.any():
        return []
    in_group = np.zeros(len(slot), dtype=bool)
    in_group[1:] |= same
    in_group[:-1] |= same
    standing: dict[int, int] = {}
    replaced: list[tuple[int, str]] = []
    for position in np.sort(order[in_group]).tolist():
        earlier = standing.setdefault(int(slot[position]), position)
        if earlier == position:
            continue
        if _content(readings, earlier) == _content(readings, position):
            replaced.append((position, f"Repeats line {readings.line[earlier]}. Nothing is lost."))
            continue
        winner, loser = position, earlier
        if _rank(readings, earlier) > _rank(readings, position):
            winner, loser = earlier, position
        standing[int(slot[position])] = winner
        replaced.append((loser, _another(readings, winner, loser)))
    return sorted(replaced)


def _all_apart(series: NDArray[np.int64], span: NDArray[np.int64]) -> bool:
    """Whether no two readings share series and time; False also where looking would take too much memory."""
    unit = max(int(np.gcd.reduce(span)), 1)
    n_times = int(span.max()) // unit + 1
    size = n_times * (int(series.max()) + 1)
    if size > 4 * len(span) + 1000:
        return False
    seen = np.zeros(size, dtype=bool)
    seen[series * n_times + span // unit] = True
    return int(np.count_nonzero(seen)) == len(span)


def _another(readings: Readings, winner: int, loser: int) -> str:
    line = readings.line[winner]
    value, other = readings.value[loser], readings.value[winner]
    what = (
        "another value" if value != other and not (np.isnan(value) and np.isnan(other)) else "another status"
    )
    why = "is the later line"
    if readings.stage[winner] > readings.stage[loser]:
        why = "has the higher stage"
    elif readings.result_time[winner] > readings.result_time[loser]:
        why = "was issued later"
    return f"Line {line} gives {what} for the same hour and stands, as it {why}. Have the source deliver one."


def _content(readings: Readings, i: int) -> tuple[bytes, int, int, int]:
    # Bytes, so that a missing value (NaN) equals a missing value; + 0.0 makes one zero of two.
    value = readings.value[i] + 0.0
    return (
        value.tobytes() if value == value else b"",
        int(readings.flag[i]),
        int(readings.stage[i]),
        int(readings.result_time[i]),
    )


def _rank(readings: Readings, i: int) -> tuple[int, int]:
    return int(readings.stage[i]), int(readings.result_time[i])
