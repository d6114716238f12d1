"""Alert sheets and pair sheets gathered from the store: what the night saw, replayed, and the readings behind it."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass

import numpy as np
from scipy.stats import rankdata

from rhovane.model import CorrelationEstimate, NotFound
from rhovane.pipeline.arrays import PairArrays, load_grid, pair_arrays
from rhovane.pipeline.context import Night, WatchedPair
from rhovane.pipeline.memory import Columns
from rhovane.pipeline.raising import EPOCH, all_evidence, daily_scores, replay
from rhovane.pipeline.set_aside import Known, what_is_known
from rhovane.prepare import days_of
from rhovane.review import AlertEntry, WindowTrack, alert_entries, nearby_entries, provenance_of, window_track
from rhovane.review.sheets import (
    AlertSheetView,
    EvidenceTrack,
    HourlyReadings,
    Neighbour,
    PairPictures,
    PairSheetView,
    RankScatter,
)
from rhovane.settings import PairSettings, Settings
from rhovane.stats.watch import DayState, Watch
from rhovane.store import Store

DAY = dt.timedelta(days=1)
SHOWN_BEFORE_DAYS = 90  # days before the onset on an alert's charts: the length of the default reference
SHOWN_AFTER_DAYS = 60  # days after the alarm, or after the end of the change
RAW_BEFORE_DAYS, RAW_AFTER_DAYS = 14, 14  # days of readings around the onset
REFERENCE_SHARE = (0.05, 0.95)  # quantiles of the windows before the onset that make the reference band
NEIGHBOURS_SHOWN = 24


@dataclass(frozen=True)
class WatchTracks:
    """The watch replayed over all evidence up to the newest finished night, for every watched pair."""

    night_id: int
    keys: tuple[str, ...]
    first_day: dt.date
    watch: Watch

    def of(self, pair_key: str) -> EvidenceTrack | None:
        """The track of one pair; None for a pair that is not watched."""
        if pair_key not in self.keys:
            return None
        i = self.keys.index(pair_key)
        seen = self.watch
        day = np.datetime64(self.first_day) + seen.day
        return EvidenceTrack(day, seen.evidence[:, i], seen.threshold[:, i], seen.state[:, i], seen.recipe[i])

    def pairs_by_state(self, day: dt.date) -> dict[str, tuple[str, ...]] | None:
        """Pairs by what the watch did with them on a day: learning, watched, changed, not scored; None before or after."""
        row = (day - self.first_day).days
        if not 0 <= row < len(self.watch.state):
            return None
        states = self.watch.state[row]
        return {
            one.name.lower().replace("_", " "): tuple(
                k for k, s in zip(self.keys, states, strict=True) if s == one
            )
            for one in DayState
        }


@dataclass(frozen=True)
class StoredEvidence:
    """Everything that a replay of the watch needs, read from the store; :meth:`replayed` needs no store."""

    night_id: int
    as_of: dt.date
    watched: tuple[WatchedPair, ...]
    columns: Columns
    known: Known

    @property
    def size(self) -> int:
        """Pairs² × days: the work of a replay grows with it."""
        day = self.columns["day"]
        return len(self.watched) ** 2 * (int(day.max() - day.min()) + 1) if len(day) else 0

    def replayed(self, settings: Settings) -> WatchTracks | None:
        """The watch replayed as the night did it; None before the first evidence."""
        first_day, scores = daily_scores(self.watched, self.columns, self.as_of)
        if first_day is None:
            return None
        keys = tuple(w.pair.key for w in self.watched)
        return WatchTracks(self.night_id, keys, first_day, replay(settings, self.watched, scores, self.known))


def stored_evidence(settings: Settings, store: Store, now: dt.datetime) -> StoredEvidence | None:
    """The evidence of all watched pairs up to the newest finished night; None before the first night."""
    last = store.last_finished_night()
    if last is None:
        return None
    night = Night(settings, store, last.as_of, now, id=last.night_id)
    watched = tuple(WatchedPair(recipe, pair) for recipe, pair in settings.pairs)
    columns = all_evidence(night, watched)
    days = columns["day"]
    first_day = EPOCH + (int(days.min()) if len(days) else 0) * DAY
    known = what_is_known(night, watched, first_day)
    return StoredEvidence(last.night_id, last.as_of, watched, columns, known)


def alert_sheet(
    settings: Settings,
    store: Store,
    entry: AlertEntry,
    tracks: WatchTracks | None,
    *,
    until: dt.date | None = None,
) -> AlertSheetView:
    """Everything that is known about one alert, up to the newest finished night or up to an earlier day.

    Readings are those stored now: a value that was revised since is the revised one.
    """
    alert = entry.alert
    last = store.last_finished_night()
    night = store.night(alert.night_id)
    recipe = next((p for p in settings.pair if p.key == alert.pair_key), None)
    if recipe is None or last is None:
        return AlertSheetView(
            entry, None, None, None, None, (), nearby_entries(settings, store, alert), night
        )
    newest = last.as_of if until is None else min(until, last.as_of)
    first, end = _shown(entry, newest)
    windows = window_track(settings, store, recipe.key, alert.onset_day - 2 * SHOWN_BEFORE_DAYS * DAY, end)
    pictures = _pictures(settings, recipe, windows, tracks, alert.onset_day, first, end)
    days = days_of(settings.network.standard_offset)
    start = alert.before.first_day
    last_raw = min(newest, alert.onset_day + RAW_AFTER_DAYS * DAY)
    grid = load_grid(settings, store, settings.series_of(recipe), start, max(alert.after.last_day, last_raw))
    arrays = pair_arrays(settings, recipe, grid)
    hours = grid.hour_start
    around = (hours >= days.start_of(alert.onset_day - RAW_BEFORE_DAYS * DAY)) & (
        hours < days.end_of(last_raw)
    )
    readings = HourlyReadings(
        hours[around], grid.column(recipe.first)[around], grid.column(recipe.second)[around]
    )
    return AlertSheetView(
        entry,
        pictures,
        _scatter(arrays, hours, days.start_of(start), days.end_of(alert.before.last_day), alert.before),
        _scatter(
            arrays, hours, days.start_of(alert.onset_day), days.end_of(alert.after.last_day), alert.after
        ),
        readings,
        _neighbours(settings, store, entry, newest),
        nearby_entries(settings, store, alert),
        night,
        provenance_of(settings, store, alert),
    )


def pair_sheet(
    settings: Settings, store: Store, pair_key: str, now: dt.datetime, tracks: WatchTracks | None
) -> PairSheetView:
    """Everything that is known about one watched pair.

    Raises
    ------
    NotFound
        The settings watch no such pair.
    """
    recipe = next((p for p in settings.pair if p.key == pair_key), None)
    if recipe is None:
        raise NotFound(f"{pair_key}: no such pair in the settings.")
    windows = window_track(settings, store, pair_key)
    entries = tuple(e for e in alert_entries(store, now) if pair_key in (e.alert.pair_key, *e.alert.members))
    last = windows.day[-1].astype(dt.date) if len(windows) else None
    days = days_of(settings.network.standard_offset)
    end = days.moment(days.end_of(last or dt.date(1970, 1, 2)))
    newest = store.read_windows(pair_key, end - dt.timedelta(hours=1), end)
    pictures = _pictures(settings, recipe, windows, tracks, None, None, None)
    return PairSheetView(pictures, entries, newest)


def _shown(entry: AlertEntry, last: dt.date) -> tuple[dt.date, dt.date]:
    """First and last day of an alert's charts."""
    ended = entry.standing.ended
    day = None if ended is None else ended.payload.get("day")
    end = dt.date.fromisoformat(day) if day else entry.alert.alarm_day
    until = last if entry.standing.changed else end + SHOWN_AFTER_DAYS * DAY
    until = min(last, max(until, entry.alert.alarm_day + SHOWN_AFTER_DAYS * DAY))
    return entry.alert.onset_day - SHOWN_BEFORE_DAYS * DAY, until


def _pictures(
    settings: Settings,
    recipe: PairSettings,
    windows: WindowTrack,
    tracks: WatchTracks | None,
    onset: dt.date | None,
    first: dt.date | None,
    until: dt.date | None,
) -> PairPictures:
    by_key = settings.series_by_key()
    evidence = None if tracks is None else tracks.of(recipe.key)
    low = high = None
    if onset is not None:
        before = windows.between(onset - SHOWN_BEFORE_DAYS * DAY, onset - DAY).statistic
        before = before[np.isfinite(before)]
        if len(before) >= SHOWN_BEFORE_DAYS // 3:
            low, high = (float(q) for q in np.quantile(before, REFERENCE_SHARE))
    if first is not None and until is not None:
        windows = windows.between(first, until)
        if evidence is not None:
            keep = (evidence.day >= np.datetime64(first)) & (evidence.day <= np.datetime64(until))
            evidence = EvidenceTrack(
                evidence.day[keep],
                evidence.evidence[keep],
                evidence.threshold[keep],
                evidence.state[keep],
                evidence.score,
            )
    return PairPictures(recipe, by_key[recipe.first], by_key[recipe.second], windows, evidence, low, high)


def _scatter(
    arrays: PairArrays, hours: np.ndarray, start: int, end: int, estimate: CorrelationEstimate
) -> RankScatter:
    inside = (hours >= start) & (hours < end) & np.isfinite(arrays.x) & np.isfinite(arrays.y)
    x, y = arrays.x[inside], arrays.y[inside]
    n = max(len(x), 1)
    shares = [(rankdata(v) - 0.5) / n for v in (x, y)]
    return RankScatter(estimate.first_day, estimate.last_day, *shares)


def _neighbours(settings: Settings, store: Store, entry: AlertEntry, last: dt.date) -> tuple[Neighbour, ...]:
    """Other pairs that share a series with the alert's pair, before and after the onset."""
    alert = entry.alert
    own = next(p for p in settings.pair if p.key == alert.pair_key)
    concerned = {own.first, own.second}
    concerned |= {s for p in settings.pair if p.key in alert.members for s in (p.first, p.second)}
    span = settings.correlation.window_hours // 24
    before = _windows_on(settings, store, alert.onset_day - DAY)
    after = _windows_on(settings, store, min(last, alert.onset_day + (span - 1) * DAY))
    found = []
    for pair in settings.pair:
        shared = concerned & {pair.first, pair.second}
        if pair.key == own.key or not shared:
            continue
        b, a = before.get(pair.key), after.get(pair.key)
        found.append(
            Neighbour(
                pair.key,
                " and ".join(sorted(shared & {own.first, own.second})) or "a series of the alert",
                None if b is None else b[0],
                None if a is None else a[0],
                _apart(b, a),
                pair.key in alert.members,
            )
        )
    found.sort(key=lambda n: (not n.named, not n.apart, n.key))
    return tuple(found[:NEIGHBOURS_SHOWN])


def _windows_on(settings: Settings, store: Store, day: dt.date) -> dict[str, tuple[float, float, float]]:
    """Lag-0 correlation with its interval of every pair with one, in the window that ends with a day."""
    days = days_of(settings.network.standard_offset)
    end = days.moment(days.end_of(day))
    found = store.read_windows(start=end - dt.timedelta(hours=1), end=end, lag=0)
    rows = zip(found["pair_key"], found["statistic"], found["low"], found["high"], strict=True)
    return {str(key): (float(s), float(lo), float(hi)) for key, s, lo, hi in rows if np.isfinite(s)}


def _apart(
    before: tuple[float, float, float] | None, after: tuple[float, float, float] | None
) -> bool | None:
    if before is None or after is None or not np.isfinite([*before, *after]).all():
        return None
    return before[2] < after[1] or after[2] < before[1]
