"""Daily scores of the demo world's pairs, made as a night makes them, for the studies in this folder."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from rhovane.prepare import kept_hours
from rhovane.prepare.grid import Grid
from rhovane.settings import Settings, load_settings
from rhovane.stats.daily_scores import DailyScores, pair_scores
from rhovane.stats.hourly_scores import series_scores
from rhovane_demo.clocks import FIRST_DAY, LAST_DAY
from rhovane_demo.world import make_world

CONFIG = Path(__file__).parents[3] / "config" / "monitor.toml"
HOUR_S = 3600
PPB_CHANGE = "TIV.NO2"


@dataclass(frozen=True)
class WorldScores:
    """Daily scores of one seed of the demo world: keys, members and scores of each pair; first day."""

    keys: tuple[str, ...]
    members: tuple[tuple[str, str], ...]
    choice: tuple[str, ...]
    scores: tuple[DailyScores, ...]
    first_day: np.datetime64


def score_world(seed: int, events: bool, settings: Settings | None = None) -> WorldScores:
    """Daily scores of the pairs of ``config/monitor.toml`` in one seed of the demo world."""
    settings = settings or load_settings(CONFIG)
    world = make_world(seed, events)
    offset = int(settings.network.standard_offset.total_seconds())
    second = world.hour_start.astype("datetime64[s]").astype(np.int64)
    begin = int(np.flatnonzero((second + offset) % 86_400 == 0)[0])
    good = np.isin(world.quality, (1, 2))
    values = np.where(good, world.values, np.nan)[begin:]
    grid = Grid(int(second[begin]), world.keys, values)
    n_days = grid.n_hours // 24
    other_days = settings.other_days(FIRST_DAY, LAST_DAY + dt.timedelta(days=1))
    shared = {key: series_scores(grid.column(key)) for key in world.keys}
    keys, members, choice, scores = [], [], [], []
    for pair in settings.pair:
        mask = kept_hours(pair, grid, civil_zone=settings.network.civil_zone, other_days=other_days)
        keys.append(pair.key)
        members.append((pair.first, pair.second))
        choice.append(pair.score)
        scores.append(
            pair_scores(
                shared[pair.first],
                shared[pair.second],
                days=range(n_days),
                controls=[shared[c] for c in pair.adjusted_for],
                keep=None if mask.everything else mask.kept,
            )
        )
    first = np.datetime64(int(second[begin]) + offset, "s").astype("datetime64[D]")
    return WorldScores(tuple(keys), tuple(members), tuple(choice), tuple(scores), first)
