"""An alert computed again: from what its night had, or with what is known now."""

from __future__ import annotations

import dataclasses
import datetime as dt
from dataclasses import dataclass
from typing import Any

import rhovane
from rhovane.alerts import hints_for
from rhovane.model import Alert, NotFound, RhovaneError, plain_of
from rhovane.pipeline.context import Night, WatchedPair
from rhovane.pipeline.evidence import begin_hourly_scores, score_days
from rhovane.pipeline.raising import (
    Replayed,
    alert_of,
    all_evidence,
    daily_scores,
    numbered,
    replay,
    sheet_of,
)
from rhovane.pipeline.set_aside import what_is_known
from rhovane.pipeline.unused import unused_then
from rhovane.settings import Settings, hash_of, settings_of_text
from rhovane.store import Store


@dataclass(frozen=True)
class Reproduction:
    """An alert computed again from its stored inputs.

    ``computed`` is None where the evidence does not show the alert any more; ``differing`` names the facts that are
    not the same to the last bit; ``recorded_version`` is the program that raised it, ``this_version`` this one.
    """

    alert: Alert
    computed: Alert | None
    differing: tuple[str, ...]
    recorded_version: str
    this_version: str

    @property
    def matches(self) -> bool:
        """Whether every fact is the same, bit for bit."""
        return self.computed is not None and not self.differing

    def as_json(self) -> dict[str, Any]:
        """Plain values for ``--json``."""
        return {
            "alert": self.alert.id,
            "matches": self.matches,
            "differing": list(self.differing),
            "recorded_version": self.recorded_version,
            "this_version": self.this_version,
            "computed": plain_of(self.computed),
        }


def reproduce(settings: Settings, store: Store, alert: Alert, now: dt.datetime) -> Reproduction:
    """Compute an alert again from the readings and the settings of its night; writes nothing.

    Readings are those known after the alert's last ingest; the settings those kept under its hash (``settings`` only
    says where the folder is). Daily scores, watch and sheet are all computed anew.

    Raises
    ------
    NotFound
        The settings or the night were not kept.
    RhovaneError
        The settings kept are not those the hash was made of.
    """
    record = store.night(alert.night_id)
    text = store.settings_text(alert.settings_hash)
    if hash_of(text) != alert.settings_hash:
        raise RhovaneError(
            f"alert {alert.id}: the settings kept under {alert.settings_hash} have another hash ({hash_of(text)}): "
            "the store was changed by hand. Nothing can be reproduced from it; compare with a backup."
        )
    used = settings_of_text(text, settings.origin)
    night = Night(used, store, record.as_of, now, id=record.night_id, data_version=alert.data_version)
    night.unused = unused_then(record.counts, store)
    night.watched = _watched_then(used, night, record.counts)
    begin_hourly_scores(night)
    score_days(night)
    left = record.counts.get("left", {})
    judged = [w for w in night.watched if w.pair.key not in left]
    computed = None
    if night.scored:
        place = {w.pair.key: i for i, w in enumerate(judged)}
        first_day, scores = daily_scores(judged, numbered(night.scored, place), record.as_of)
        assert first_day is not None, "there are scores"
        replayed = Replayed(
            judged, first_day, replay(used, judged, scores, what_is_known(night, judged, first_day))
        )
        same = [f for f in replayed.found() if (f.pair_key, f.alarm_day) == (alert.pair_key, alert.alarm_day)]
        computed = alert_of(night, alert.id, same[0], replayed) if same else None
    differing = () if computed is None else _differing(alert.as_json(), computed.as_json())
    return Reproduction(alert, computed, differing, record.program_version, rhovane.__version__)


def _watched_then(settings: Settings, night: Night, counts: dict[str, Any]) -> list[WatchedPair]:
    """The pairs of a night, each from its first day on: everything is computed again."""
    first_hours = {k: dt.datetime.fromisoformat(v) for k, v in counts.get("first_hours", {}).items()}
    watched = []
    for recipe in settings.pair:
        pair = settings.pair_of(recipe)
        days = [
            night.days.day_of(int(first_hours[k].timestamp()))
            for k in (pair.first, pair.second)
            if k in first_hours
        ]
        begin = max(days, default=None)
        known = begin is not None and begin <= night.as_of and pair.key not in counts.get("left", {})
        watched.append(WatchedPair(recipe, pair, begin if known else None))
    return watched


def _differing(recorded: Any, computed: Any, where: str = "") -> tuple[str, ...]:
    """Places at which two plain values are not the same, as ``sheet.change.low``."""
    if isinstance(recorded, dict) and isinstance(computed, dict):
        names = dict.fromkeys([*recorded, *computed])
        return tuple(
            place
            for name in names
            for place in _differing(
                recorded.get(name), computed.get(name), f"{where}.{name}" if where else name
            )
        )
    if isinstance(recorded, list) and isinstance(computed, list) and len(recorded) == len(computed):
        return tuple(
            place
            for i, (one, other) in enumerate(zip(recorded, computed, strict=True))
            for place in _differing(one, other, f"{where}[{i}]")
        )
    return () if recorded == computed else (where,)


def as_seen_now(settings: Settings, store: Store, alert: Alert, now: dt.datetime) -> Alert:
    """The alert with before, after, sheet and hints from all nights and readings so far; its raising stays as it was.

    Raises
    ------
    NotFound
        No night has finished, or the settings have no pair of this recipe any more.
    """
    last = store.last_finished_night()
    watched = [WatchedPair(recipe, settings.pair_of(recipe)) for recipe in settings.pair]
    recipes = {w.pair.key: w.pair.recipe_hash for w in watched}
    if last is None or recipes.get(alert.pair_key) != alert.recipe_hash:
        raise NotFound(
            f"alert {alert.id}: {alert.pair_key} is not watched by this recipe any more, so it cannot be seen with "
            "today's readings. `rhovane alert ID` shows it as it was raised."
        )
    night = Night(settings, store, last.as_of, now, id=last.night_id, data_version=last.data_version)
    night.watched = watched
    first_day, scores = daily_scores(watched, all_evidence(night, watched), last.as_of)
    assert first_day is not None, "an alert rests on evidence"
    replayed = Replayed(
        watched, first_day, replay(settings, watched, scores, what_is_known(night, watched, first_day))
    )
    told = sheet_of(
        night, replayed, alert.pair_key, alert.onset_day, members=alert.members, suspect=alert.suspect
    )
    fresh = dataclasses.replace(alert, before=told.before, after=told.after, sheet=told.sheet)
    sector = replayed.recipe(alert.pair_key).sector is not None
    return dataclasses.replace(fresh, hints=hints_for(fresh, sector=sector))
