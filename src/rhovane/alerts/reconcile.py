"""What the change watch finds in the evidence, set against what the alert log already says.

The watch is replayed over the whole daily evidence each night. An episode it finds that the log does not
know is a new alert; one the log knows is the same alert, however often the evidence crosses the threshold
again; one that only the log knows was raised on readings that have since been revised.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from rhovane.alerts.lifecycle import standing_of
from rhovane.model import Alert, AlertEvent, EventKind

SAME_ALERT_DAYS = 10  # alarm days of one change may move by this much when readings are revised


@dataclass(frozen=True)
class Found:
    """A change episode in the evidence up to the night's last day.

    ``pair_key`` is the pair whose evidence crossed the threshold, ``members`` all pairs concerned;
    ``suspect`` names what is likeliest to have changed. ``end_day`` is None while it lasts; ``ending``
    says how it ended: "returned" or "new baseline". ``evidence`` and ``threshold`` are the chart's value
    and limit on the alarm day. ``onset_range`` holds the onset with a probability of 90 %; ``lag_steps``
    says by how many steps the suspect seems late.
    """

    pair_key: str
    recipe_hash: str
    alarm_day: dt.date
    onset_day: dt.date
    direction: str
    kind: str
    end_day: dt.date | None
    ending: str | None
    members: tuple[str, ...] = ()
    suspect: str = ""
    evidence: float = float("nan")
    threshold: float = float("nan")
    onset_range: tuple[dt.date, dt.date] | None = None
    lag_steps: int = 0


@dataclass(frozen=True)
class LogChange:
    """What the night has to write: episodes that are new alerts, and events on known ones."""

    new: tuple[Found, ...]
    events: tuple[AlertEvent, ...]
    matched: Mapping[int, Found]


ENDING_EVENT = {"returned": EventKind.RETURNED, "new baseline": EventKind.NEW_BASELINE}


def reconcile(
    found: Sequence[Found],
    alerts: Sequence[Alert],
    events: Mapping[int, Sequence[AlertEvent]],
    *,
    at: dt.datetime,
    night_as_of: dt.date,
    judged: Mapping[str, str],
) -> LogChange:
    """New alerts and events that bring the log in step with the evidence.

    Parameters
    ----------
    found : sequence of Found
        Episodes of the replay, all pairs.
    alerts, events
        The log so far: alerts, and by alert id their events in order.
    judged : mapping of str to str
        Pairs whose evidence could be replayed tonight, and their recipe. Alerts of other pairs, or of
        another recipe, are left alone: a pair that failed tonight is never taken for one that changed back.
    """
    known: dict[str, list[Alert]] = {}
    for alert in alerts:
        known.setdefault(alert.pair_key, []).append(alert)
    new: list[Found] = []
    matched: dict[int, Found] = {}
    for episode in sorted(found, key=lambda f: (f.alarm_day, f.pair_key)):
        candidates = [a for a in known.get(episode.pair_key, []) if a.id not in matched and _same(a, episode)]
        if candidates:
            best = min(candidates, key=lambda a: (abs((a.alarm_day - episode.alarm_day).days), a.id))
            matched[best.id] = episode
        else:
            new.append(episode)
    written: list[AlertEvent] = []
    for alert in alerts:
        if judged.get(alert.pair_key) != alert.recipe_hash:
            continue
        standing = standing_of(events[alert.id], at)
        last_of_night = {"night": night_as_of.isoformat()}
        match = matched.get(alert.id)
        if match is None:
            if not standing.superseded and alert.night_as_of < night_as_of:
                note = "the evidence as it stands now (readings revised or taken out since, or settings) no longer shows it"
                written.append(AlertEvent(alert.id, EventKind.SUPERSEDED, at, "rhovane", note, last_of_night))
            continue
        if standing.superseded:
            note = "the evidence as it stands now shows this change again"
            written.append(AlertEvent(alert.id, EventKind.CONFIRMED, at, "rhovane", note, last_of_night))
        ended = None if standing.superseded else standing.ended
        if match.ending is None and ended is not None:
            note = "the evidence as it stands now shows that the change lasts"
            written.append(AlertEvent(alert.id, EventKind.CONFIRMED, at, "rhovane", note, last_of_night))
        if match.ending is not None and ended is None:
            payload = {**last_of_night, "day": str(match.end_day)}
            note = _how_it_ended(match.ending, events[alert.id])
            written.append(AlertEvent(alert.id, ENDING_EVENT[match.ending], at, "rhovane", note, payload))
    return LogChange(tuple(new), tuple(written), matched)


def _how_it_ended(ending: str, events: Sequence[AlertEvent]) -> str:
    if ending == "returned":
        return "evidence is back at its earlier level"
    decided = [e for e in events if e.kind is EventKind.OUTCOME and e.payload.get("new_baseline")]
    if decided:
        return f"taken as the new level by decision of {decided[-1].who}; later days are compared with it"
    return "the change has lasted; later days are compared with the new level"


def _same(alert: Alert, episode: Found) -> bool:
    """Whether an episode of the replay is the change that an alert of the log was raised for."""
    if abs((alert.alarm_day - episode.alarm_day).days) <= SAME_ALERT_DAYS:
        return True
    last = episode.end_day or dt.date.max
    return episode.onset_day <= alert.alarm_day <= last
