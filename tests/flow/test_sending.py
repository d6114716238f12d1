"""Sending what waits: channels fail each for itself, repeats keep their id, pauses grow."""

from __future__ import annotations

import datetime as dt
import json
import tomllib
from collections.abc import Callable
from pathlib import Path

import pytest

from delivery.receivers import HttpReceiver, MailReceiver
from flow.small_network import SETTINGS
from rhovane.model import Message, MessageKind, StoreLocked
from rhovane.pipeline import post_notices, send_waiting
from rhovane.pipeline.sending import due_at
from rhovane.pipeline.telling import channels_for
from rhovane.settings import Settings, settings_from
from rhovane.store import Attempt, OutboxEntry, Store, open_store

NOW = dt.datetime(2025, 3, 2, 3, 40, tzinfo=dt.UTC)
MINUTE = dt.timedelta(minutes=1)


@pytest.fixture
def network(tmp_path: Path) -> Callable[[str], Settings]:
    def make(lines: str) -> Settings:
        return settings_from(tomllib.loads(SETTINGS + lines), tmp_path / "monitor.toml")

    return make


def notices(n: int) -> list[Message]:
    return [Message(MessageKind.NOTICE, f"notice {i}", NOW, f"title {i}", "text", {"n": i}) for i in range(n)]


def post(settings: Settings, n: int) -> None:
    with open_store(settings.store_path) as store:
        post_notices(settings, store, notices(n), now=NOW)


def send(settings: Settings, now: dt.datetime = NOW, **more: object):
    return send_waiting(settings, lambda: open_store(settings.store_path), lambda: now, **more)


def received(settings: Settings) -> list[str]:
    path = settings.work_folder / "out.jsonl"
    return (
        [json.loads(line)["subject"] for line in path.read_text("utf-8").splitlines()]
        if path.exists()
        else []
    )


def test_a_channel_that_fails_holds_up_no_other_and_is_left_alone_after_the_first_failure(network):
    web, mail = HttpReceiver(answers=[500]), MailReceiver()
    with web.listen() as http_port, mail.listen() as mail_port:
        settings = network(
            f'[delivery.file]\npath = "out.jsonl"\n[delivery.http]\nurl = "http://localhost:{http_port}/"\n'
            f'[delivery.mail]\nhost = "localhost"\nport = {mail_port}\nsecurity = "none"\nsender = "a@example.org"\n'
            'to = ["b@example.org"]\n'
        )
        post(settings, 3)
        sent = send(settings)
    assert received(settings) == ["notice 0", "notice 1", "notice 2"]
    assert len(mail.mails) == 3
    assert len(web.requests) == 1
    assert (sent.delivered, sent.waiting, list(sent.failed)) == (6, 3, ["http"])


def test_a_message_that_a_receiver_refuses_for_itself_holds_up_no_other(network):
    receiver = HttpReceiver(answers=[204, 422, 204])
    with receiver.listen() as port:
        settings = network(f'[delivery.http]\nurl = "http://localhost:{port}/"\n')
        post(settings, 3)
        sent = send(settings)
    assert (sent.delivered, sent.waiting) == (2, 1)
    with open_store(settings.store_path) as store:
        assert [e.message.subject for e in store.outbox(waiting=True)] == ["notice 1"]


def test_what_was_sent_but_not_written_down_is_sent_again_with_the_same_id(network, monkeypatch):
    receiver = HttpReceiver()
    with receiver.listen() as port:
        settings = network(f'[delivery.http]\nurl = "http://localhost:{port}/"\n')
        post(settings, 2)

        def locked(_store: Store, _attempts: list[Attempt]) -> None:
            raise StoreLocked("in use")

        with monkeypatch.context() as patched:
            patched.setattr(Store, "record_attempts", locked)
            with pytest.raises(StoreLocked):
                send(settings)
        assert send(settings).delivered == 2
        assert send(settings).delivered == 0
    ids = [json.loads(body)["id"] for _, _, body in receiver.requests]
    assert ids == [m.id for m in notices(2)] * 2


def test_the_store_is_free_while_a_receiver_is_waited_for(network):
    settings = network('[delivery.file]\npath = "out.jsonl"\n')
    post(settings, 2)
    asked = []

    def stop() -> bool:
        with open_store(settings.store_path, lock_wait_s=0) as store:
            asked.append(len(store.outbox(waiting=True)))
        return False

    send(settings, stop=stop)
    assert asked == [2, 2]


def test_pauses_double_up_to_six_hours_and_mean_nothing_after_the_clock_was_set_back(network):
    settings = network('[delivery]\nretry_minutes = 5\n[delivery.file]\npath = "none/out.jsonl"\n')
    (message,) = notices(1)

    def pause(attempts: int) -> float:
        return (due_at(OutboxEntry(message, "file", NOW, attempts, NOW, None, "x"), settings) - NOW) / MINUTE

    assert [pause(n) for n in (1, 2, 3, 7, 8, 1000)] == [5, 10, 20, 320, 360, 360]
    post(settings, 1)
    assert "out.jsonl cannot be written" in send(settings).failed["file"]
    assert send(settings, NOW + 4 * MINUTE).failed == {}
    assert send(settings, NOW + 5 * MINUTE).failed != {}
    assert send(settings, NOW - 60 * MINUTE).failed != {}
    assert send(settings, NOW, at_once=True).next_try == NOW + 40 * MINUTE


def test_each_channel_gets_what_it_asks_for_and_a_flood_reaches_those_that_take_alerts(network):
    settings = network(
        '[delivery.file]\npath = "a"\n[delivery.http]\nurl = "http://localhost/"\nsend = ["alert"]\n'
        '[delivery.mail]\nhost = "h"\nsender = "a@example.org"\nto = ["b@example.org"]\nsend = ["notice"]\n'
    )

    def channels(kind: MessageKind, *, flood: bool = False) -> list[str]:
        return channels_for(Message(kind, "s", NOW, "t", "x", {}), settings, flood=flood)

    assert channels(MessageKind.ALERT) == ["file", "http"]
    assert channels(MessageKind.DIGEST) == ["file"]
    assert channels(MessageKind.DIGEST, flood=True) == ["file", "http"]
    assert channels(MessageKind.NOTICE, flood=True) == ["file", "mail"]


def test_messages_for_a_channel_that_is_no_longer_set_wait(network):
    post(network('[delivery.file]\npath = "out.jsonl"\n'), 1)
    silent = network("")
    assert (send(silent).delivered, send(silent).waiting) == (0, 0)
    with open_store(silent.store_path) as store:
        assert len(store.outbox(waiting=True)) == 1
