"""Sending what waits in the outbox: at least once, again with growing pauses, the store closed meanwhile."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

from rhovane.delivery import Undelivered, channel_of
from rhovane.model import Message
from rhovane.pipeline.telling import channels_for
from rhovane.settings import Settings
from rhovane.store import Attempt, OutboxEntry, Store

LONGEST_PAUSE = dt.timedelta(hours=6)
MOST_DOUBLINGS = 20  # the pause has reached its longest long before

OpenStore = Callable[[], Store]


@dataclass
class Sent:
    """What an attempt to send did; ``next_try`` is when the first of what still waits is due again."""

    delivered: int = 0
    failed: dict[str, str] = field(default_factory=dict)
    remarks: list[str] = field(default_factory=list)
    waiting: int = 0
    next_try: dt.datetime | None = None

    def as_json(self) -> dict[str, Any]:
        """Plain values for ``--json``."""
        return {
            "delivered": self.delivered,
            "failed": self.failed,
            "remarks": self.remarks,
            "waiting": self.waiting,
            "next_try": None if self.next_try is None else self.next_try.isoformat(),
        }


def post_notices(settings: Settings, store: Store, notices: list[Message], *, now: dt.datetime) -> int:
    """Put notices into the outbox for the channels that take them; how many entries were new."""
    wanted = [(message, channels) for message in notices if (channels := channels_for(message, settings))]
    return store.post(wanted, now=now) if wanted else 0


def due_at(entry: OutboxEntry, settings: Settings) -> dt.datetime:
    """When a waiting entry may be tried (again): at once, then after a pause that doubles each time."""
    if entry.tried_at is None:
        return entry.created_at
    pause = dt.timedelta(minutes=settings.delivery.retry_minutes)
    pause *= 2 ** min(max(entry.attempts - 1, 0), MOST_DOUBLINGS)
    return entry.tried_at + min(pause, LONGEST_PAUSE)


def send_waiting(
    settings: Settings,
    open_store: OpenStore,
    clock: Callable[[], dt.datetime],
    *,
    at_once: bool = False,
    stop: Callable[[], bool] = lambda: False,
) -> Sent:
    """Try what is due, oldest first, channel by channel.

    The store is open while the outbox is read and while the attempts are written down, never while a receiver is
    waited for. A process killed in between sends again what it had sent: with the same id. A channel that fails is left
    alone until its pause is over, unless the receiver refused only the one message.

    Parameters
    ----------
    open_store : callable
        Opens the store for writing; used in a ``with`` block.
    clock : callable
        The moment (aware, UTC).
    at_once : bool
        Try everything that waits, whatever its pause.
    stop : callable
        Asked between messages whether to stop there.
    """
    sent = Sent()
    with open_store() as store:
        waiting = left = store.outbox(waiting=True)
    now = clock()
    for channel in settings.delivery.channels:
        due = [
            e
            for e in waiting
            if e.channel == channel and (at_once or due_at(e, settings) <= now or _from_the_future(e, now))
        ]
        attempts = _try_channel(settings, channel, due, clock, stop, sent) if due else []
        if attempts:
            with open_store() as store:
                store.record_attempts(attempts)
                left = store.outbox(waiting=True)
    left = [e for e in left if e.channel in settings.delivery.channels]
    sent.waiting = len(left)
    sent.next_try = min((due_at(e, settings) for e in left), default=None)
    return sent


def _from_the_future(entry: OutboxEntry, now: dt.datetime) -> bool:
    """Whether the clock was set back since the entry was touched: then its pause means nothing."""
    return max(entry.created_at, entry.tried_at or entry.created_at) > now


def _try_channel(
    settings: Settings,
    channel: str,
    due: list[OutboxEntry],
    clock: Callable[[], dt.datetime],
    stop: Callable[[], bool],
    sent: Sent,
) -> list[Attempt]:
    send = channel_of(settings, channel)
    assert send is not None
    attempts = []
    for entry in due:
        if stop():
            break
        try:
            remark = send(entry.message)
        except Undelivered as failure:
            attempts.append(Attempt(entry.message.id, channel, clock(), False, str(failure)))
            sent.failed[channel] = str(failure)
            if failure.others_may_go:
                continue
            break
        attempts.append(Attempt(entry.message.id, channel, clock(), True, remark))
        sent.delivered += 1
        if remark is not None:
            sent.remarks.append(remark)
    return attempts
