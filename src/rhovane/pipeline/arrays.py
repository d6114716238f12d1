"""Readings of the store as the arrays that a pair's recipe works on."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.pipeline.checks import LOOKBACK_DAYS, neighbours_of, without_left_out
from rhovane.pipeline.unused import Unused, unused_now
from rhovane.prepare import Days, Grid, PairMask, days_of, kept_hours, to_grid
from rhovane.settings import PairSettings, Settings
from rhovane.store import Store

HOUR_S = 3600
DAY = dt.timedelta(days=1)


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
    unused: Unused | None = None,
    checked: bool = True,
) -> Grid:
    """Observations of the series from the first to the last day, both included (standard time).

    Hours of maintenance, and those that the site log takes out, have none: ``unused``, default as they stand now.
    With ``checked`` they have passed the own checks of the settings, where there are any.
    """
    if unused is None:
        unused = unused_now(settings, store)
    if checked and settings.check:
        wanted = set(keys)
        before = dt.timedelta(days=LOOKBACK_DAYS)
        grid = load_grid(
            settings,
            store,
            wanted | neighbours_of(settings, wanted),
            first - before,
            last,
            max_ingest_id=max_ingest_id,
            unused=unused,
            checked=False,
        )
        return without_left_out(settings, grid, 24 * LOOKBACK_DAYS).of(sorted(wanted))
    days: Days = days_of(settings.network.standard_offset)
    start, end = days.start_of(first), days.end_of(last)
    names = sorted(set(keys))
    found = store.read_readings(names, days.moment(start), days.moment(end), max_ingest_id=max_ingest_id)
    known = {s.key: s for s in settings.domain_series()}
    grid = to_grid(
        [known[name] for name in names],
        start,
        end,
        position=found.position,
        second=found.ts,
        value=found.value,
        flag=found.flag,
        accepted_flags=settings.accepted_flags(),
    )
    if unused:
        for column, key in enumerate(grid.keys):
            hours = unused.hours(key, grid.hour_start, settings.network.civil_zone)
            grid.values[hours, column] = np.nan
    return grid


def pair_arrays(settings: Settings, recipe: PairSettings, grid: Grid) -> PairArrays:
    """Members and controls of a pair, masked by its recipe."""
    days: Days = days_of(settings.network.standard_offset)
    first, last = days.day_of(grid.start), days.day_of(grid.start + HOUR_S * grid.n_hours)
    other_days = settings.other_days(first - DAY, last + DAY) if recipe.working_days_only else frozenset()
    mask = kept_hours(recipe, grid, civil_zone=settings.network.civil_zone, other_days=other_days)
    x, y = grid.column(recipe.first), grid.column(recipe.second)
    controls = None
    if recipe.adjusted_for:
        controls = np.column_stack([grid.column(k) for k in recipe.adjusted_for])
    if not mask.everything:
        x, y = np.where(mask.kept, x, np.nan), np.where(mask.kept, y, np.nan)
    return PairArrays(x, y, controls, mask)
