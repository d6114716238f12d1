"""What an alert tells the analyst, computed when it is raised and again when somebody asks: never every night."""

from __future__ import annotations

import dataclasses
import datetime as dt
import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane import stats
from rhovane.model import AlertSheet, Bounded, CorrelationEstimate, EpisodeDays, SeriesLevel, Witness
from rhovane.pipeline.arrays import PairArrays, load_grid, pair_arrays
from rhovane.pipeline.context import WatchedPair
from rhovane.pipeline.unused import Unused
from rhovane.settings import PairSettings, Settings
from rhovane.stats.difference import Estimate, correlation_change
from rhovane.stats.episode import episode_of
from rhovane.stats.level import median_interval, median_ratio, spread_ratio, theil_sen_slope
from rhovane.stats.movement import movements_since
from rhovane.stats.watch import Watch
from rhovane.store import Store

DAY = dt.timedelta(days=1)
YEAR = dt.timedelta(days=364)  # whole weeks, so that working days meet working days
FEWEST_PAIRS = 8  # hours; fewest pairs for the correlation after an onset that is only days old
NEARER = 0.5  # "as a year earlier": at most this share of the distance that the value before had


@dataclass(frozen=True)
class Comparison:
    """An alert's two correlations, and its sheet."""

    before: CorrelationEstimate
    after: CorrelationEstimate
    sheet: AlertSheet


def compare(
    settings: Settings,
    store: Store,
    recipe: PairSettings,
    onset: dt.date,
    *,
    as_of: dt.date,
    data_version: int,
    unused: Unused | None,
    witnesses: tuple[Witness, ...],
) -> Comparison:
    """The pair in the window before the onset, and from the onset to ``as_of`` (at most a window).

    Readings are those known after ingest ``data_version``, without those taken out (``unused``; None: as of now).
    """
    span = settings.correlation.window_hours // 24
    first, last = onset - span * DAY, min(as_of, onset + (span - 1) * DAY)
    keys = settings.series_of(recipe)
    grid = load_grid(settings, store, keys, first, last, max_ingest_id=data_version, unused=unused)
    arrays, cut = pair_arrays(settings, recipe, grid), 24 * span
    earlier, later = arrays.rows(slice(0, cut)), arrays.rows(slice(cut, None))
    year_first = onset - YEAR
    year_last = year_first + (span - 1) * DAY
    year_grid = load_grid(
        settings, store, keys, year_first, year_last, max_ingest_id=data_version, unused=unused
    )
    method = settings.correlation.statistic
    before = _estimate(earlier, first, onset - DAY, method)
    after = _estimate(later, onset, last, method)
    year = _estimate(pair_arrays(settings, recipe, year_grid), year_first, year_last, method)
    if year.n_pairs == 0:
        year = dataclasses.replace(year, reason="no readings a year earlier")
    unit = {s.key: s.unit for s in settings.series}
    sheet = AlertSheet(
        as_of=as_of,
        data_version=data_version,
        change=_bounded(correlation_change(_as_estimate(after), _as_estimate(before))),
        levels=(
            _level(recipe.first, unit[recipe.first], earlier.x, later.x),
            _level(recipe.second, unit[recipe.second], earlier.y, later.y),
        ),
        slope_before=_bounded(theil_sen_slope(earlier.x, earlier.y)),
        slope_after=_bounded(theil_sen_slope(later.x, later.y)),
        year_earlier=year,
        as_year_earlier=_agrees(before, after, year),
        episode=_episode(later, onset, before, method),
        witnesses=witnesses,
    )
    return Comparison(before, after, sheet)


def _estimate(arrays: PairArrays, first: dt.date, last: dt.date, method: str) -> CorrelationEstimate:
    if arrays.controls is None:
        found = stats.rank_correlation_test(arrays.x, arrays.y, method=method)
        values = (found.statistic, found.n_effective, found.low, found.high)
        reasons = (found.reason, found.interval_reason)
        n_pairs = found.n_pairs
    else:
        scan = stats.partial_window(
            arrays.x, arrays.y, arrays.controls, window=len(arrays.x), min_pairs=FEWEST_PAIRS
        )
        values = (scan.statistic[0], scan.n_effective[0], scan.low[0], scan.high[0])
        reasons = (scan.reason[0], scan.reason[0] or "interval not assessable")
        n_pairs = int(scan.n_pairs[0])
    statistic, n_effective, low, high = (_known(v) for v in values)
    return CorrelationEstimate(
        first, last, statistic, int(n_pairs), n_effective, low, high, reasons[0],
        reasons[1] if low is None else None,
    )  # fmt: skip


def _correlation(arrays: PairArrays, method: str) -> float:
    """The statistic alone; NaN where there is none."""
    if arrays.controls is None:
        return stats.rank_correlation_test(arrays.x, arrays.y, method=method, adjust="none").statistic
    scan = stats.partial_window(
        arrays.x, arrays.y, arrays.controls, window=len(arrays.x), min_pairs=FEWEST_PAIRS, interval=False
    )
    return float(scan.statistic[0])


def _episode(later: PairArrays, onset: dt.date, before: CorrelationEstimate, method: str) -> EpisodeDays:
    n_days = len(later.x) // 24
    joint = np.isfinite(later.x) & np.isfinite(later.y)

    def correlate(kept: NDArray[np.bool_]) -> float:
        x = np.where(np.repeat(kept, 24), later.x, np.nan)
        return _correlation(dataclasses.replace(later, x=x), method)

    if before.statistic is None:
        return EpisodeDays((), None, "no correlation before")
    found = episode_of(correlate, joint.reshape(n_days, 24).any(axis=1), before.statistic)
    return EpisodeDays(tuple(onset + d * DAY for d in found.days), _known(found.without), found.reason)


def _agrees(before: CorrelationEstimate, after: CorrelationEstimate, year: CorrelationEstimate) -> bool:
    """Whether the value after is that of a year earlier, and the value before was not."""
    now = correlation_change(_as_estimate(after), _as_estimate(year))
    then = correlation_change(_as_estimate(before), _as_estimate(year))
    if now.reason is not None or not math.isfinite(then.value):
        return False
    return now.low <= 0.0 <= now.high and abs(now.value) < NEARER * abs(then.value)


def _level(key: str, unit: str, before: NDArray[np.float64], after: NDArray[np.float64]) -> SeriesLevel:
    return SeriesLevel(
        key,
        unit,
        _bounded(median_interval(before)),
        _bounded(median_interval(after)),
        _bounded(median_ratio(before, after)),
        _known(spread_ratio(before, after)),
    )


def _known(value: float) -> float | None:
    return None if math.isnan(value) else float(value)


def _bounded(one: Estimate) -> Bounded:
    return Bounded(_known(one.value), _known(one.low), _known(one.high), one.reason)


def _as_estimate(one: CorrelationEstimate) -> Estimate:
    value, low, high = (float("nan") if v is None else v for v in (one.statistic, one.low, one.high))
    reason = None
    if one.low is None:
        reason = one.interval_reason or one.reason or "interval not assessable"
    return Estimate(value, low, high, reason)


def witnesses_of(
    watched: Sequence[WatchedPair],
    seen: Watch,
    *,
    members: Sequence[str],
    suspect: str,
    onset: int,
    last: int,
) -> tuple[Witness, ...]:
    """The pairs that speak for or against a suspect, with their movement from day ``onset`` to day ``last``.

    Days are rows of ``seen``. In order of relation (own, partner, alike), then as in the settings; pairs with no
    relation to the suspect are left out.
    """
    mine = [w.pair for w in watched if w.pair.key in members]
    what, _, name = suspect.partition(" ")
    own = {k for p in mine for k in (p.first, p.second) if _belongs(k, what, name)}
    partners = {k for p in mine for k in (p.first, p.second)} - own
    alike = {_quantities(p.first, p.second) for p in mine}
    moved = movements_since(seen.score, seen.weight, seen.reference_mean, seen.reference_sd, onset, last)
    found: dict[str, list[Witness]] = {"own": [], "partner": [], "alike": []}
    for one, move in zip(watched, moved, strict=True):
        sides = {one.pair.first, one.pair.second}
        if one.pair.key in members or sides & own:
            relation = "own"
        elif sides & partners:
            relation = "partner"
        elif _quantities(one.pair.first, one.pair.second) in alike:
            relation = "alike"
        else:
            continue
        numbers = (_known(move.before), _known(move.after), _known(move.z))
        found[relation].append(Witness(one.pair.key, relation, *numbers, move.n_days, move.moved))
    return tuple(w for group in found.values() for w in group)


def _belongs(key: str, what: str, name: str) -> bool:
    return (what == "series" and key == name) or (what == "station" and key.partition(".")[0] == name)


def _quantities(first: str, second: str) -> frozenset[str]:
    return frozenset((first.partition(".")[2], second.partition(".")[2]))
