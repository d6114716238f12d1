"""Step "alerts": the change watch replayed over all evidence, and the alert log brought in step with it."""

from __future__ import annotations

import dataclasses
import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.alerts import Found, hints_for, reconcile
from rhovane.model import Alert, AlertEvent, EventKind
from rhovane.pipeline.context import Night, WatchedPair
from rhovane.pipeline.memory import Columns
from rhovane.pipeline.set_aside import Known, what_is_known
from rhovane.pipeline.sheet import Comparison, compare, witnesses_of
from rhovane.review import log_alerts, log_events, logged_alerts, logged_events
from rhovane.settings import PairSettings, Settings
from rhovane.stats.daily_scores import DailyScores
from rhovane.stats.watch import Incident, Watch, WatchMemory, watch
from rhovane.store import LATER_COLUMNS

STEP = "alerts"
DAY = dt.timedelta(days=1)
EPOCH = dt.date(1970, 1, 1)
SCORES = ("innovation", "innovation_hours", "shape", "shape_hours", "course", "course_hours")
DAYS_APART = 1_000_000  # more days than any evidence spans; keeps the pairs apart in one number
PROGRAM = "rhovane"
LONGEST_WITNESS_DAYS = (
    42  # days from the onset over which other pairs are asked; as far back as onsets are sought
)


def raise_alerts(night: Night) -> str:
    """Raise what is new, note what ended, and mark what revised readings no longer show."""
    newest = night.previous
    if newest is not None and newest.as_of > night.as_of:
        return f"the night of {newest.as_of} has judged later days; the log is left as it is"
    judged = [w for w in night.watched if w.pair.key not in night.counts.get("left", {})]
    first_day, scores = daily_scores(judged, all_evidence(night, judged), night.as_of)
    if first_day is None:
        return "no evidence yet"
    first_judged = first_day + night.settings.alerts.baseline_days * DAY
    if night.as_of < first_judged and not logged_alerts(night.store):
        return f"every pair still learns; the first day judged is {first_judged}"
    known = what_is_known(night, judged, first_day)
    seen = replay(night.settings, judged, scores, known, None if night.memory is None else night.memory.watch)
    aside = known.not_judged((night.as_of - first_day).days)
    night.counts["not judged"] = {judged[i].pair.key: reason for i, reason in sorted(aside.items())}
    silent = f"; {len(aside)} pairs not judged" if aside else ""
    replayed = Replayed(judged, first_day, seen)
    found = replayed.found()
    recipes = {w.pair.key: w.pair.recipe_hash for w in judged}
    if night.memory is not None and night.memory.same_findings((found, recipes)):
        return f"0 new, 0 changes of earlier ones{silent}"
    alerts, events = logged_alerts(night.store), logged_events(night.store)
    change = reconcile(
        found,
        alerts,
        events,
        at=night.now,
        night_as_of=night.as_of,
        judged=recipes,
    )
    next_id = max((a.id for a in alerts), default=0) + 1
    new = [alert_of(night, next_id + i, f, replayed) for i, f in enumerate(change.new)]
    if new:
        log_alerts(night.store, new)
    raised = [AlertEvent(a.id, EventKind.RAISED, night.now, PROGRAM, _headline(a)) for a in new]
    ended = _endings(new, change.new, night)
    if raised or change.events or ended:
        log_events(night.store, [*raised, *change.events, *ended])
    night.counts["alerts new"] = len(new)
    return f"{len(new)} new, {len(change.events) + len(ended)} changes of earlier ones{silent}"


def all_evidence(night: Night, watched: Sequence[WatchedPair]) -> Columns:
    """The evidence of the pairs up to the night's last day: from the store, or remembered with tonight's put in.

    The columns of the store, with ``pair`` (the position in ``watched``) in place of keys and recipes, and
    ``day`` as days since 1970.
    """
    recipes = [w.pair.recipe_hash for w in watched]
    place = {w.pair.key: i for i, w in enumerate(watched)}
    known = None if night.memory is None else night.memory.evidence(recipes)
    if known is None:
        found = night.store.read_evidence(pair_keys=list(place), recipe_hashes=recipes, end=night.as_of + DAY)
        known = numbered(found, place)
    elif night.scored:
        fresh = numbered(night.scored, place)
        keep = ~np.isin(_row_numbers(known), _row_numbers(fresh))
        known = {name: np.concatenate((known[name][keep], fresh[name])) for name in known}
    if night.memory is not None:
        night.memory.remember_evidence(recipes, known)
    return known


def numbered(columns: Columns, place: dict[str, int]) -> Columns:
    """Evidence as columns of numbers: the place of its pair, the day since 1970, the scores."""
    return {
        "pair": np.array([place[key] for key in columns["pair_key"]], dtype=np.int64),
        "day": columns["day"].astype("datetime64[D]").astype(np.int64),
        **{name: columns[name] for name in (*SCORES, *LATER_COLUMNS)},
    }


def _row_numbers(columns: Columns) -> NDArray[np.int64]:
    return columns["pair"].astype(np.int64) * DAYS_APART + columns["day"].astype(np.int64)


def daily_scores(
    watched: Sequence[WatchedPair], found: Columns, as_of: dt.date
) -> tuple[dt.date | None, list[DailyScores]]:
    """Daily scores of the pairs from their evidence, on common days from the first with evidence on."""
    if len(found["day"]) == 0:
        return None, []
    first = int(found["day"].min())
    n_days = (as_of - EPOCH).days - first + 1
    at = (found["pair"], found["day"] - first)

    def table(name: str, empty: float) -> NDArray[np.float64]:
        out = np.full((len(watched), n_days), empty)
        out[at] = found[name]
        return out

    tables = {name: table(name, 0.0 if name.endswith("_hours") else np.nan) for name in SCORES}
    lagged = np.stack([table(name, np.nan) for name in LATER_COLUMNS], axis=-1)
    day = np.arange(n_days, dtype=np.int64)
    scores = [
        DailyScores(day=day, lagged=lagged[i], **{name: values[i] for name, values in tables.items()})
        for i in range(len(watched))
    ]
    return EPOCH + first * DAY, scores


def replay(
    settings: Settings,
    watched: Sequence[WatchedPair],
    scores: Sequence[DailyScores],
    known: Known,
    memory: WatchMemory | None = None,
) -> Watch:
    """The change watch over the daily scores of all pairs, with the network's settings and what people know."""
    limits = settings.alerts
    return watch(
        scores,
        false_alarms_per_year=limits.false_alarms_per_year,
        members=[(w.pair.first, w.pair.second) for w in watched],
        classes=[_class_of(w) for w in watched],
        choice=[w.recipe.score for w in watched],
        baseline_days=limits.baseline_days,
        guard_days=limits.guard_days,
        rebaseline_days=limits.rebaseline_days,
        set_aside=known.set_aside,
        new_baselines=known.new_baselines,
        memory=memory,
    )


def _class_of(watched: WatchedPair) -> str:
    """Pairs of one class are moved together by weather and season: the same quantities and recipe."""
    quantities = sorted(key.partition(".")[2] for key in (watched.pair.first, watched.pair.second))
    return f"{'~'.join(quantities)}[{watched.recipe.variant}]"


def _found(incident: Incident, watched: Sequence[WatchedPair], first_day: dt.date) -> Found:
    lead = watched[incident.lead].pair
    kind, name = incident.suspect
    suspect = f"pair {watched[int(str(name))].pair.key}" if kind == "pair" else f"{kind} {name or ''}".strip()
    return Found(
        lead.key,
        lead.recipe_hash,
        first_day + incident.alarm_day * DAY,
        first_day + incident.onset_day * DAY,
        incident.direction,
        incident.kind,
        None if incident.end_day is None else first_day + incident.end_day * DAY,
        incident.ending,
        tuple(watched[i].pair.key for i in incident.pairs),
        suspect,
        incident.evidence,
        incident.threshold,
        (first_day + incident.onset_range[0] * DAY, first_day + incident.onset_range[1] * DAY),
        incident.lag_steps,
    )


@dataclass(frozen=True)
class Replayed:
    """The watch over the evidence of some pairs; row 0 of its arrays is ``first_day``."""

    watched: Sequence[WatchedPair]
    first_day: dt.date
    seen: Watch

    def found(self) -> list[Found]:
        """The episodes, in order of their alarm day."""
        return [_found(i, self.watched, self.first_day) for i in self.seen.incidents]

    def recipe(self, pair_key: str) -> PairSettings:
        """The recipe of one of the pairs."""
        return next(w.recipe for w in self.watched if w.pair.key == pair_key)


def sheet_of(
    night: Night,
    replayed: Replayed,
    pair_key: str,
    onset: dt.date,
    *,
    members: Sequence[str],
    suspect: str,
) -> Comparison:
    """The pair before and after the onset as this night sees it, and what the other pairs did since."""
    first = (onset - replayed.first_day).days
    newest = (night.as_of - replayed.first_day).days
    last = min(newest, first + LONGEST_WITNESS_DAYS - 1)
    witnesses = witnesses_of(
        replayed.watched, replayed.seen, members=members, suspect=suspect, onset=first, last=last
    )
    return compare(
        night.settings,
        night.store,
        replayed.recipe(pair_key),
        onset,
        as_of=night.as_of,
        data_version=data_version_of(night),
        unused=night.unused,
        witnesses=witnesses,
    )


def data_version_of(night: Night) -> int:
    """The last ingest whose readings a night rests on."""
    return night.store.last_ingest_id() if night.data_version is None else night.data_version


def alert_of(night: Night, alert_id: int, found: Found, replayed: Replayed) -> Alert:
    """The alert that a night raises for an episode, with its sheet."""
    told = sheet_of(
        night, replayed, found.pair_key, found.onset_day, members=found.members, suspect=found.suspect
    )
    first, last = found.onset_range or (None, None)
    bare = Alert(
        id=alert_id,
        pair_key=found.pair_key,
        recipe_hash=found.recipe_hash,
        kind=found.kind,
        direction=found.direction,
        alarm_day=found.alarm_day,
        onset_day=found.onset_day,
        night_as_of=night.as_of,
        night_id=night.id,
        data_version=told.sheet.data_version,
        settings_hash=night.settings.settings_hash,
        evidence=found.evidence,
        threshold=found.threshold,
        before=told.before,
        after=told.after,
        members=found.members,
        suspect=found.suspect,
        onset_first=first,
        onset_last=last,
        lag_steps=found.lag_steps,
        sheet=told.sheet,
    )
    return dataclasses.replace(
        bare, hints=hints_for(bare, sector=replayed.recipe(found.pair_key).sector is not None)
    )


def _headline(alert: Alert) -> str:
    lead = "" if alert.suspect.startswith("pair ") else f"{alert.suspect}: "
    return (
        f"{lead}{alert.pair_key} became {alert.direction} from about {alert.onset_day}: "
        f"evidence {alert.evidence:.2f} crossed {alert.threshold:.2f} on {alert.alarm_day}"
    )


def _endings(new: Sequence[Alert], found: Sequence[Found], night: Night) -> list[AlertEvent]:
    """Events for changes that had already ended when a night first saw them (a history read at once)."""
    kinds = {"returned": EventKind.RETURNED, "new baseline": EventKind.NEW_BASELINE}
    return [
        AlertEvent(
            alert.id,
            kinds[episode.ending],
            night.now,
            PROGRAM,
            "had already ended when the readings were first seen",
            {"night": night.as_of.isoformat(), "day": str(episode.end_day)},
        )
        for alert, episode in zip(new, found, strict=True)
        if episode.ending is not None
    ]
