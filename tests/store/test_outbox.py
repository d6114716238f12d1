"""The outbox: an id has one content, a repeat adds nothing, and nothing waits that was not committed."""

from __future__ import annotations

import datetime as dt
import json

import pytest

from rhovane.model import Message, MessageKind, RhovaneError
from rhovane.store import Attempt, open_store

NOW = dt.datetime(2025, 3, 2, 3, 40, tzinfo=dt.UTC)
MINUTE = dt.timedelta(minutes=1)


def message(number: int, kind: MessageKind = MessageKind.ALERT) -> Message:
    return Message(kind, f"alert {number}", NOW, f"alert {number}", "text", {"number": number})


def test_a_repeat_adds_nothing_and_order_is_that_of_posting(store):
    one, two = message(1), message(2)
    assert store.post([(two, ["file", "mail"]), (one, ["file"])], now=NOW, night_id=7) == 3
    assert store.post([(one, ["file", "http"])], now=NOW + MINUTE) == 1
    found = [(e.message, e.channel, e.attempts, e.delivered_at) for e in store.outbox()]
    assert found == [
        (two, "file", 0, None),
        (two, "mail", 0, None),
        (one, "file", 0, None),
        (one, "http", 0, None),
    ]
    assert [e.message for e in store.outbox(subject="alert 1")] == [one, one]
    assert store.outbox(kind="digest") == []


def test_another_content_under_a_known_id_is_refused(store):
    one = message(1)
    store.post([(one, ["file"])], now=NOW)
    other = json.dumps({**one.as_json(), "title": "another"})
    store.execute("update delivery set payload = ?", [other])
    with pytest.raises(RhovaneError, match=r"another content.*never used twice"):
        store.post([(message(2), ["file"]), (one, ["http"])], now=NOW)
    assert len(store.outbox()) == 1, "nothing of the refused posting is kept"


def test_attempts_are_counted_and_what_is_delivered_stays_delivered(store, path):
    one = message(1)
    store.post([(one, ["file", "mail"])], now=NOW)
    store.record_attempts([Attempt(one.id, "file", NOW, True), Attempt(one.id, "mail", NOW, False, "down")])
    store.record_attempts([Attempt(one.id, "file", NOW + MINUTE, False, "late news")])
    store.record_attempts([Attempt(one.id, "mail", NOW + MINUTE, False, "still down")])
    store.close()
    with open_store(path, read_only=True) as again:
        file, mail = again.outbox()
        assert (file.delivered_at, file.attempts, file.last_error) == (NOW, 1, None)
        assert (mail.delivered_at, mail.attempts, mail.last_error) == (None, 2, "still down")
        assert mail.tried_at == NOW + MINUTE
        assert again.outbox(waiting=True) == [mail]


def test_a_message_of_a_transaction_that_fails_is_never_sent(store):
    def fail_after_posting() -> None:
        with store.transaction():
            store.post([(message(1), ["file"])], now=NOW)
            raise RuntimeError("the night fails")

    with pytest.raises(RuntimeError, match="the night fails"):
        fail_after_posting()
    assert store.outbox() == []
