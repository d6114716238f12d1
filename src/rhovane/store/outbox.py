"""The outbox: messages with the channels they are to go to, kept until each has been delivered.

A message is written in the same transaction as what it tells, and sent after the commit. Its id belongs to one
content only: the same message posted again is the same entry, another content under a known id is refused.
"""

from __future__ import annotations

import json
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from datetime import datetime

from rhovane.model import Message, RhovaneError
from rhovane.store.clock import aware_utc, naive_utc
from rhovane.store.jsontext import json_text
from rhovane.store.session import Session


@dataclass(frozen=True)
class OutboxEntry:
    """A message for one channel; ``delivered_at`` is None while it waits, ``tried_at`` the last attempt."""

    message: Message
    channel: str
    created_at: datetime
    attempts: int
    tried_at: datetime | None
    delivered_at: datetime | None
    last_error: str | None


@dataclass(frozen=True)
class Attempt:
    """How one attempt at one entry ended; ``remark`` says why not, or what went amiss all the same."""

    message_id: str
    channel: str
    at: datetime
    delivered: bool
    remark: str | None = None


class Outbox(Session):
    """Writing and reading of the outbox."""

    def post(
        self, messages: Iterable[tuple[Message, Sequence[str]]], *, now: datetime, night_id: int | None = None
    ) -> int:
        """Put messages, each with its channels, into the outbox; how many entries were new.

        Raises
        ------
        RhovaneError
            An id is known with another content.
        """
        n_new = 0
        with self.transaction():
            for message, channels in messages:
                text = json_text(message.as_json())
                known = dict(
                    self.rows("select channel, payload::varchar from delivery where id = ?", [message.id])
                )
                if any(held != text for held in known.values()):
                    raise RhovaneError(
                        f"Message {message.id} is in the outbox with another content; an id is never used twice. "
                        "Nothing was posted. Run `rhovane verify`."
                    )
                for channel in channels:
                    if channel not in known:
                        n_new += 1
                        self.execute(
                            "insert into delivery (id, channel, night_id, payload, created_at, attempts) "
                            "values (?, ?, ?, ?, ?, 0)",
                            [message.id, channel, night_id, text, naive_utc(now)],
                        )
        return n_new

    def outbox(
        self, *, waiting: bool = False, kind: str | None = None, subject: str | None = None
    ) -> list[OutboxEntry]:
        """Entries in the order in which they were posted, only those of a kind or subject if given."""
        found = self.rows(
            """
            select payload, channel, created_at, attempts, tried_at, delivered_at, last_error from delivery
            where ($all or delivered_at is null) and ($kind is null or payload->>'kind' = $kind)
                and ($subject is null or payload->>'subject' = $subject)
            order by created_at, rowid
            """,
            {"all": not waiting, "kind": kind, "subject": subject},
        )
        return [
            OutboxEntry(
                Message.from_json(json.loads(payload)),
                channel,
                aware_utc(created),
                attempts,
                None if tried is None else aware_utc(tried),
                None if delivered is None else aware_utc(delivered),
                error,
            )
            for payload, channel, created, attempts, tried, delivered, error in found
        ]

    def record_attempts(self, attempts: Sequence[Attempt]) -> None:
        """Write down how attempts ended; an entry that was delivered stays delivered."""
        with self.transaction():
            for one in attempts:
                at = naive_utc(one.at)
                self.execute(
                    """
                    update delivery set attempts = attempts + 1, tried_at = ?, last_error = ?,
                        delivered_at = case when ? then ?::timestamp end
                    where id = ? and channel = ? and delivered_at is null
                    """,
                    [at, one.remark, one.delivered, at, one.message_id, one.channel],
                )
