"""What a night tells: its messages, put into the outbox in the transaction of its results."""

from __future__ import annotations

import datetime as dt

from rhovane.alerts import NightNews, night_messages, night_subject
from rhovane.model import Message, MessageKind
from rhovane.pipeline.context import Night
from rhovane.review import (
    falling_coverage,
    logged_alerts,
    logged_events,
    silent_pairs,
    silent_series,
    unreviewed,
)
from rhovane.review.exporting import CAUTION
from rhovane.settings import Settings


def count_failing(night: Night) -> None:
    """Note in the night's counts for how many nights running each part that failed has done so.

    A night that is run again for the same date counts once.
    """
    if not night.troubles:
        return
    before = night.store.newest_ended_night()
    known = {} if before is None else before.counts.get("failing", {})
    again = before is not None and before.as_of == night.as_of
    night.counts["failing"] = {
        t.part: max(1, known.get(t.part, 0) + (0 if again else 1)) for t in night.troubles
    }


def post_news(night: Night, outcome: str) -> None:
    """Put the night's messages into the outbox; nothing when no channel is set.

    A night run again for a date that was told already is told again only when it ends otherwise or raises
    something new.
    """
    channels = night.settings.delivery.channels
    if not channels:
        return
    told = night.store.outbox(kind=MessageKind.DIGEST, subject=night_subject(night.as_of))
    if told and not night.counts.get("alerts new") and told[-1].message.data["outcome"] == outcome:
        return
    news = _news(night, outcome)
    flood_above = night.settings.delivery.flood_above
    night.store.post(
        [
            (message, channels_for(message, night.settings, flood=len(news.new) > flood_above))
            for message in night_messages(news, flood_above=flood_above)
        ],
        now=night.now,
        night_id=night.id,
    )


def channels_for(message: Message, settings: Settings, *, flood: bool = False) -> list[str]:
    """The channels a message goes to; the digest of a flood goes also to those that take alerts."""
    wanted = {message.kind.value}
    if flood and message.kind is MessageKind.DIGEST:
        wanted.add(MessageKind.ALERT.value)
    return [name for name, kinds in settings.delivery.channels.items() if wanted.intersection(kinds)]


def _news(night: Night, outcome: str) -> NightNews:
    settings, store, counts = night.settings, night.store, night.counts
    new = []
    if outcome != "failed" and counts.get("alerts new"):
        events = logged_events(store)
        new = [(a, events[a.id][0].note) for a in logged_alerts(store) if a.night_id == night.id]
    silent = silent_series(settings, store, night.as_of)
    silent += silent_pairs(settings, store, night.as_of) if outcome != "failed" else []
    arrived = store.arrived_since(0 if night.previous is None else night.previous.data_version)
    return NightNews(
        settings.network.name,
        night.as_of,
        planned_moment(settings, night.as_of),
        outcome,
        new,
        [(t.part, t.reason) for t in night.troubles],
        counts.get("failing", {}),
        [one.in_words() for one in silent],
        [one.in_words() for one in falling_coverage(settings, store, night.as_of)],
        unreviewed(store, night.now),
        *arrived,
        f"rhovane {counts['next']}" if "next" in counts else "",
        CAUTION,
    )


def planned_moment(settings: Settings, as_of: dt.date) -> dt.datetime:
    """When the night of a date is planned to run: the day after, at ``night.at`` of standard time."""
    midnight = dt.datetime.combine(as_of + dt.timedelta(days=1), dt.time(), dt.UTC)
    return midnight - settings.network.standard_offset + settings.night.after_midnight
