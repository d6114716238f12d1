"""Daily levels and steps of the nights before, so that a night judges only the days that are new to it.

Like all memory of a walk it changes no result: what is kept is what would be computed again.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.level_step import AFTER_DAYS, LOOKBACK_DAYS, StepTable, daily_levels, judge_steps

KEPT_DAYS = (
    180  # newest days that are remembered: a month's verified file reaches back 50, and a step 50 more
)

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class StepMemory:
    """Levels and steps of consecutive days, rows in order; ``begin`` is the day number of the first row."""

    begin: int
    levels: Floats
    table: StepTable

    def rows(self, first: int, stop: int) -> StepMemory | None:
        """The days from ``first`` up to ``stop`` (excluded), with what is known of them; None if a day is not known."""
        low, high = first - self.begin, stop - self.begin
        if low < 0 or high > len(self.levels) or high <= low:
            return None
        parts = {f.name: getattr(self.table, f.name)[low:high] for f in dataclasses.fields(StepTable)}
        return StepMemory(first, self.levels[low:high], StepTable(**parts))


def steps_of_days(
    values: Floats,
    begin: int,
    new_from: Sequence[int],
    groups: Sequence[Sequence[int]],
    ratio: Sequence[bool],
    *,
    strength: float,
    memory: StepMemory | None,
) -> StepMemory:
    """Levels and steps of whole days of hourly values.

    Parameters
    ----------
    values : ndarray of float64, shape (24 n_days, n_series)
    begin : int
        Day number of the first row.
    new_from : sequence of int, shape (n_series,)
        For each series the number of the first day that ``memory`` does not know, or does not know any more.
    memory : StepMemory or None
        Of the night before; it has to be of the same series, groups and strength.
    """
    stop = begin + len(values) // 24
    oldest = min(new_from)
    first = max(begin, oldest - AFTER_DAYS + 1 - LOOKBACK_DAYS)
    known = None if memory is None else memory.rows(first, oldest)
    if known is None:
        levels = daily_levels(values[24 * (first - begin) :])
        days = range(len(levels))
        table = judge_steps(levels, groups, ratio, strength=strength, days=days)
        return StepMemory(first, levels, table)
    assert memory is not None
    levels = np.concatenate((known.levels, daily_levels(values[24 * (oldest - begin) :])))
    remembered = memory.rows(first, min(memory.begin + len(memory.levels), stop))
    assert remembered is not None
    table = StepTable(
        *(
            np.concatenate((part, np.full((stop - first - len(part), levels.shape[1]), np.nan)))
            for part in (remembered.table.size, remembered.table.error, remembered.table.strength)
        )
    )
    by_day: dict[int, list[Sequence[int]]] = {}
    for group in groups:
        by_day.setdefault(min(new_from[i] for i in group), []).append(group)
    for day, some in by_day.items():
        days = range(max(0, day - AFTER_DAYS + 1 - first), stop - first)
        fresh = judge_steps(levels, some, ratio, strength=strength, days=days)
        columns = [i for group in some for i in group]
        for name in ("size", "error", "strength"):
            getattr(table, name)[days.start :, columns] = getattr(fresh, name)[:, columns]
    return StepMemory(first, levels, table)


def kept(now: StepMemory, before: StepMemory | None) -> StepMemory:
    """What the next night may need: the days of this night after those of the nights before."""
    older = None if before is None else before.rows(before.begin, now.begin)
    if older is None:
        return now
    drop = max(0, len(older.levels) + len(now.levels) - KEPT_DAYS)

    def joined(one: Floats, other: Floats) -> Floats:
        return np.concatenate((one[drop:], other))

    table = StepTable(
        *(
            joined(getattr(older.table, f.name), getattr(now.table, f.name))
            for f in dataclasses.fields(StepTable)
        )
    )
    return StepMemory(older.begin + drop, joined(older.levels, now.levels), table)
