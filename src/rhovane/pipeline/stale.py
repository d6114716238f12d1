"""Step "stale": which pairs have results that are not up to date, and since which day.

A pair is stale from the first hour of any of its series that is new, revised, or taken out of the
statistics (or back in) since the last finished night; from the day after that night; from the day it was
left at when it failed then; and from its first reading where its recipe has changed since.
"""

from __future__ import annotations

import datetime as dt

from rhovane.pipeline.context import Night, WatchedPair
from rhovane.pipeline.unused import first_differences, unused_now, unused_then
from rhovane.prepare import Days

DAY = dt.timedelta(days=1)


def find_stale(night: Night) -> str:
    """Fill ``night.watched``: every pair with its first stale day."""
    settings, store, days = night.settings, night.store, night.days
    last = night.previous
    recipes = {} if last is None else dict(last.counts.get("recipes", {}))
    left = {} if last is None else dict(last.counts.get("left", {}))
    windows_left = {} if last is None else dict(last.counts.get("windows left", {}))
    changed = store.changed_since(0 if last is None else last.data_version)
    night.changed = changed
    known = {} if last is None else last.counts.get("first_hours", {})
    first_hours = {k: dt.datetime.fromisoformat(v) for k, v in known.items()}
    for key, moment in changed.items():
        first_hours[key] = min(moment, first_hours.get(key, moment))
    unused = unused_now(settings, store)
    then = unused_then({} if last is None else last.counts, store)
    end = days.end_of(night.as_of)
    for key, moment in first_differences(unused, then, first_hours, end, settings.network.civil_zone).items():
        changed[key] = min(moment, changed.get(key, moment))
    night.watched = []
    for recipe, pair in settings.pairs:
        keys = settings.series_of(recipe)
        begin = max((_day(days, first_hours[k]) for k in keys[:2] if k in first_hours), default=None)
        if begin is None:
            night.watched.append(WatchedPair(recipe, pair, None))
            continue
        if recipes.get(pair.key) != pair.recipe_hash:
            since = begin
        else:
            assert last is not None
            touched = [_day(days, changed[k]) for k in keys if k in changed]
            since = min([*touched, last.as_of + DAY])
            if pair.key in left:
                since = min(since, dt.date.fromisoformat(left[pair.key]))
        if night.recompute_from is not None:
            since = min(since, night.recompute_from)
        since = max(since, begin)
        windows_since = max(
            begin, min(since, dt.date.fromisoformat(windows_left.get(pair.key, "9999-12-31")))
        )
        night.watched.append(
            WatchedPair(
                recipe, pair, *(day if day <= night.as_of else None for day in (since, windows_since))
            )
        )
    stale = [w for w in night.watched if w.stale_from is not None]
    night.counts["first_hours"] = {k: v.isoformat() for k, v in sorted(first_hours.items())}
    night.counts["not used"] = unused.as_counts()
    night.counts["recipes"] = {w.pair.key: w.pair.recipe_hash for w in night.watched}
    oldest = min((w.stale_from for w in stale if w.stale_from), default=None)
    return f"{len(stale)} of {len(night.watched)} pairs" + (f", from {oldest}" if oldest else "")


def _day(days: Days, moment: dt.datetime) -> dt.date:
    return days.day_of(int(moment.timestamp()))
