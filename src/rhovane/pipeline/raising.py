"""Step "alerts": the change watch replayed over all evidence, and the alert log brought in step with it."""

from __future__ import annotations

import dataclasses
import datetime as dt
import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane import stats
from rhovane.alerts import Found, hints_for, reconcile
from rhovane.model import Alert, AlertEvent, CorrelationEstimate, EventKind
from rhovane.pipeline.arrays import PairArrays, load_grid, pair_arrays
from rhovane.pipeline.context import Night, WatchedPair
from rhovane.pipeline.memory import Columns
from rhovane.pipeline.set_aside import Known, what_is_known
from rhovane.review import log_alerts, log_events, logged_alerts, logged_events
from rhovane.settings import PairSettings, Settings
from rhovane.stats.daily_scores import DailyScores
from rhovane.stats.watch import Incident, Watch, WatchMemory, watch
from rhovane.store import LATER_COLUMNS, Store

STEP = "alerts"
DAY = dt.timedelta(days=1)
EPOCH = dt.date(1970, 1, 1)
SCORES = ("innovation", "innovation_hours", "shape", "shape_hours", "course", "course_hours")
DAYS_APART = 1_000_000  # more days than any evidence spans; keeps the pairs apart in one number
PROGRAM = "rhovane"
FEWEST_PAIRS = 8  # hours; fewest pairs for the correlation after an onset that is only days old


def raise_alerts(night: Night) -> str:
    """Raise what is new, note what ended, and mark what revised readings no longer show."""
    newest = night.previous
    if newest is not None and newest.as_of > night.as_of:
        return f"the night of {newest.as_of} has judged later days; the log is left as it is"
    judged = [w for w in night.watched if w.pair.key not in night.counts.get("left", {})]
    first_day, scores = daily_scores(judged, all_evidence(night, judged), night.as_of)
    if first_day is None:
        return "no evidence yet"
    known = what_is_known(night, judged, first_day)
    seen = replay(night.settings, judged, scores, known, None if night.memory is None else night.memory.watch)
    aside = known.not_judged((night.as_of - first_day).days)
    night.counts["not judged"] = {judged[i].pair.key: reason for i, reason in sorted(aside.items())}
    silent = f"; {len(aside)} pairs not judged" if aside else ""
    found = [_found(i, judged, first_day) for i in seen.incidents]
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
    recipe_of = {w.pair.key: w.recipe for w in judged}
    new = [_alert(night, next_id + i, f, recipe_of[f.pair_key]) for i, f in enumerate(change.new)]
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
        known = _numbered(found, place)
    elif night.scored:
        fresh = _numbered(night.scored, place)
        keep = ~np.isin(_row_numbers(known), _row_numbers(fresh))
        known = {name: np.concatenate((known[name][keep], fresh[name])) for name in known}
    if night.memory is not None:
        night.memory.remember_evidence(recipes, known)
    return known


def _numbered(columns: Columns, place: dict[str, int]) -> Columns:
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
    )


def _alert(night: Night, alert_id: int, found: Found, recipe: PairSettings) -> Alert:
    before, after = before_and_after(night.settings, night.store, recipe, found.onset_day, night.as_of)
    return Alert(
        id=alert_id,
        pair_key=found.pair_key,
        recipe_hash=found.recipe_hash,
        kind=found.kind,
        direction=found.direction,
        alarm_day=found.alarm_day,
        onset_day=found.onset_day,
        night_as_of=night.as_of,
        night_id=night.id,
        data_version=night.store.last_ingest_id(),
        settings_hash=night.settings.settings_hash,
        evidence=found.evidence,
        threshold=found.threshold,
        before=before,
        after=after,
        members=found.members,
        suspect=found.suspect,
        hints=hints_for(recipe.first, recipe.second, found.direction, suspect=found.suspect, kind=found.kind),
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


def before_and_after(
    settings: Settings, store: Store, recipe: PairSettings, onset: dt.date, as_of: dt.date
) -> tuple[CorrelationEstimate, CorrelationEstimate]:
    """Rank correlations of the readings in the window before the onset, and from the onset to ``as_of``.

    The later stretch is at most a window long.
    """
    span = settings.correlation.window_hours // 24
    first, last = onset - span * DAY, min(as_of, onset + (span - 1) * DAY)
    grid = load_grid(settings, store, settings.series_of(recipe), first, last)
    arrays = pair_arrays(settings, recipe, grid)
    cut = 24 * span
    method = settings.correlation.statistic
    return (
        _estimate(arrays, slice(0, cut), first, onset - DAY, method),
        _estimate(arrays, slice(cut, None), onset, last, method),
    )


@dataclass(frozen=True)
class _Estimate:
    """Lag 0 of a scan."""

    statistic: float
    n_pairs: int
    n_effective: float
    low: float
    high: float
    reason: str | None


def _estimate(
    arrays: PairArrays, rows: slice, first: dt.date, last: dt.date, method: str
) -> CorrelationEstimate:
    x, y = arrays.x[rows], arrays.y[rows]
    if arrays.controls is not None:
        controls = arrays.controls[rows]
        scan = stats.partial_window(x, y, controls, window=len(x), min_pairs=FEWEST_PAIRS)
        found = _Estimate(*(getattr(scan, f.name)[0] for f in dataclasses.fields(_Estimate)))
    else:
        found = stats.rank_correlation_test(x, y, method=method)

    def known(value: float) -> float | None:
        return None if math.isnan(value) else float(value)

    return CorrelationEstimate(
        first,
        last,
        known(found.statistic),
        int(found.n_pairs),
        known(found.n_effective),
        known(found.low),
        known(found.high),
        found.reason,
    )
