"""Readings of the store as the arrays that a pair's recipe works on."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.prepare import Days, Grid, PairMask, days_of, kept_hours, to_grid
from rhovane.settings import PairSettings, Settings
from rhovane.store import Store


@dataclass(frozen=True)
class PairArrays:
    """One pair on the hourly grid: members and controls with NaN wherever the recipe keeps no hour."""

    x: NDArray[np.float64]
    y: NDArray[np.float64]
    controls: NDArray[np.float64] | None
    mask: PairMask

    def rows(self, wanted: slice) -> PairArrays:
        """Some of the rows."""
        mask = PairMask(self.mask.kept[wanted], self.mask.unknown[wanted])
        controls = None if self.controls is None else self.controls[wanted]
        return PairArrays(self.x[wanted], self.y[wanted], controls, mask)


def load_grid(
    settings: Settings,
    store: Store,
    keys: Iterable[str],
    first: dt.date,
    last: dt.date,
    *,
    max_ingest_id: int | None = None,
) -> Grid:
    """Observations of the series from the first to the last day, both included (standard time)."""
    days: Days = days_of(settings.network.standard_offset)
    start, end = days.start_of(first), days.end_of(last)
    wanted = set(keys)
    names = sorted(wanted | {speed for key in wanted if (speed := settings.speed_of(key))})
    found = store.read_readings(names, days.moment(start), days.moment(end), max_ingest_id=max_ingest_id)
    known = {s.key: s for s in settings.domain_series()}
    return to_grid(
        [known[name] for name in names],
        start,
        end,
        position=found.position,
        second=found.ts,
        value=found.value,
        flag=found.flag,
        accepted_flags=settings.accepted_flags(),
    )


def pair_arrays(settings: Settings, recipe: PairSettings, grid: Grid) -> PairArrays:
    """Members and controls of a pair, masked by its recipe."""
    mask = kept_hours(
        recipe, grid, civil_zone=settings.network.civil_zone, other_days=settings.calendar.dates
    )
    x, y = grid.column(recipe.first), grid.column(recipe.second)
    controls = None
    if recipe.adjusted_for:
        controls = np.column_stack([grid.column(k) for k in recipe.adjusted_for])
    if not mask.everything:
        x, y = np.where(mask.kept, x, np.nan), np.where(mask.kept, y, np.nan)
    return PairArrays(x, y, controls, mask)
