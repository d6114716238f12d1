"""The watched pairs and series with their newest correlations: the pair matrix and the sheets behind it."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.model import Flag, NotFound
from rhovane.prepare import days_of
from rhovane.review.alert_list import AlertEntry
from rhovane.settings import PairSettings, SeriesSettings, Settings
from rhovane.store import Revision, Store
from rhovane.store.segments import StoredSegment

Floats = NDArray[np.float64]
NO_READING = "no reading"


@dataclass(frozen=True)
class WindowTrack:
    """Rolling correlations of one pair: arrays over days and, for ``map``, over days and lags.

    ``day`` (datetime64[D]) is the last day of each window; the others belong to lag 0: ``statistic``, ``low``,
    ``high``, ``n_effective``, ``p_value`` (NaN where not computable), ``n_pairs``, ``coverage``, ``reason``.
    """

    pair_key: str
    day: NDArray[np.datetime64]
    statistic: Floats
    low: Floats
    high: Floats
    n_pairs: NDArray[np.int64]
    n_effective: Floats
    p_value: Floats
    coverage: Floats
    reason: NDArray[np.object_]
    lags: NDArray[np.int64]
    map: Floats

    def __len__(self) -> int:
        return len(self.day)

    def between(self, first: dt.date, last: dt.date) -> WindowTrack:
        """The windows that end on these days, both included."""
        keep = (self.day >= np.datetime64(first)) & (self.day <= np.datetime64(last))
        columns = {
            name: getattr(self, name)[keep]
            for name in (
                "day", "statistic", "low", "high", "n_pairs", "n_effective", "p_value", "coverage", "reason", "map",
            )
        }  # fmt: skip
        return WindowTrack(pair_key=self.pair_key, lags=self.lags, **columns)

    def strongest_lag(self) -> Floats:
        """For each day the lag of the largest absolute correlation, in steps; NaN where none is computable."""
        out = np.full(len(self), np.nan)
        some = np.isfinite(self.map).any(axis=1)
        out[some] = self.lags[np.nanargmax(np.abs(self.map[some]), axis=1)]
        return out


def window_track(
    settings: Settings, store: Store, pair_key: str, first: dt.date | None = None, last: dt.date | None = None
) -> WindowTrack:
    """The rolling correlations of a pair, of windows that end on the days given (all, by default)."""
    days = days_of(settings.network.standard_offset)
    found = store.read_windows(
        pair_key,
        None if first is None else days.moment(days.start_of(first)),
        None if last is None else days.moment(days.end_of(last)),
    )
    day = ((found["window_end"] + days.offset_s) // 86_400).astype("datetime64[D]")
    lags, where = np.unique(found["lag"], return_inverse=True)
    ends, row = np.unique(day, return_inverse=True)
    table = np.full((len(ends), len(lags)), np.nan)
    table[row, where] = found["statistic"]
    zero = found["lag"] == 0
    names = ("statistic", "low", "high", "n_pairs", "n_effective", "p_value", "coverage", "reason")
    same_days = np.isin(ends, day[zero])
    return WindowTrack(
        pair_key=pair_key,
        day=ends[same_days],
        lags=lags.astype(np.int64),
        map=table[same_days],
        **{name: found[name][zero] for name in names},
    )


@dataclass(frozen=True)
class PairNow:
    """A watched pair with its newest window and whether an alert on it is open."""

    recipe: PairSettings
    statistic: float | None
    low: float | None
    high: float | None
    n_pairs: int
    n_effective: float | None
    reason: str | None
    open_alerts: tuple[int, ...]

    @property
    def key(self) -> str:
        """The pair's key."""
        return self.recipe.key


def pairs_now(settings: Settings, store: Store, entries: Sequence[AlertEntry]) -> tuple[PairNow, ...]:
    """Every watched pair as the newest finished night left it, in the order of the settings."""
    last = store.last_finished_night()
    rows: dict[str, dict[str, object]] = {}
    if last is not None:
        days = days_of(settings.network.standard_offset)
        end = days.moment(days.end_of(last.as_of))
        found = store.read_windows(start=end - dt.timedelta(hours=1), end=end, lag=0)
        rows = {str(k): {c: found[c][i] for c in found} for i, k in enumerate(found["pair_key"])}
    opened: dict[str, list[int]] = {}
    for entry in entries:
        if entry.standing.changed:
            for pair in entry.alert.members or (entry.alert.pair_key,):
                opened.setdefault(pair, []).append(entry.alert.id)
    return tuple(
        _pair_now(recipe, rows.get(recipe.key), opened.get(recipe.key, [])) for recipe in settings.pair
    )


def _pair_now(recipe: PairSettings, row: dict[str, object] | None, opened: Sequence[int]) -> PairNow:
    if row is None:
        return PairNow(recipe, None, None, None, 0, None, "not computed", tuple(opened))
    numbers = {name: _known(row[name]) for name in ("statistic", "low", "high", "n_effective")}
    return PairNow(
        recipe,
        n_pairs=int(str(row["n_pairs"])),
        reason=None if row["reason"] is None else str(row["reason"]),
        open_alerts=tuple(opened),
        **numbers,
    )


def _known(value: object) -> float | None:
    number = float(str(value))
    return None if np.isnan(number) else number


@dataclass(frozen=True)
class SeriesDays:
    """Readings of one series day by day: ``day``, and by flag word the number of readings (int64, one a day).

    ``expected`` is the number of readings of a whole day.
    """

    day: NDArray[np.datetime64]
    expected: int
    by_flag: dict[str, NDArray[np.int64]]

    def observations(self, accepted: Sequence[str]) -> NDArray[np.int64]:
        """Readings a day that enter statistics."""
        none = np.zeros(len(self.day), np.int64)
        return sum((self.by_flag.get(word, none) for word in accepted), none)


@dataclass(frozen=True)
class SeriesSheet:
    """One series: its days, its revisions, the pairs that rest on it and the alerts that name it."""

    series: SeriesSettings
    source: str
    clock: str
    label: str
    days: SeriesDays
    revisions: tuple[Revision, ...]
    pairs: tuple[PairNow, ...]
    entries: tuple[AlertEntry, ...]
    segments: tuple[StoredSegment, ...]


def series_sheet(
    settings: Settings, store: Store, key: str, entries: Sequence[AlertEntry], *, last: dt.date, n_days: int
) -> SeriesSheet:
    """What is known about one series over the ``n_days`` up to ``last``.

    Raises
    ------
    NotFound
        The settings have no such series.
    """
    series = settings.series_by_key().get(key)
    if series is None:
        raise NotFound(f"{key}: no such series in the settings.")
    source = next(s for s in settings.source if key in s.series.values())
    touching = [p for p in settings.pair if key in settings.series_of(p)]
    keys = {p.key for p in touching}
    now = {p.key: p for p in pairs_now(settings, store, entries)}
    return SeriesSheet(
        series,
        source.name,
        source.clock,
        source.label,
        _series_days(settings, store, key, 1440 // source.step_minutes, last, n_days),
        tuple(store.revisions_of(key)),
        tuple(now[p.key] for p in touching),
        tuple(e for e in entries if keys & {e.alert.pair_key, *e.alert.members}),
        tuple(s for s in store.segments() if s.key == key),
    )


def _series_days(
    settings: Settings, store: Store, key: str, expected: int, last: dt.date, n_days: int
) -> SeriesDays:
    days = days_of(settings.network.standard_offset)
    first = last - dt.timedelta(days=n_days - 1)
    found = store.readings_by_day(
        key,
        settings.network.standard_offset,
        days.moment(days.start_of(first)),
        days.moment(days.end_of(last)),
    )
    day = np.datetime64(first) + np.arange(n_days)
    by_flag: dict[str, NDArray[np.int64]] = {}
    for flag in Flag:
        mine = found["flag"] == int(flag)
        counts = np.zeros(n_days, np.int64)
        counts[(found["day"][mine] - np.datetime64(first)).astype(int)] = found["n"][mine]
        by_flag[flag.name.lower().replace("_", " ")] = counts
    by_flag[NO_READING] = np.maximum(expected - sum(by_flag.values(), np.zeros(n_days, np.int64)), 0)
    return SeriesDays(day, expected, by_flag)
