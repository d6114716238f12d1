"""The form of a message, and the file of JSON lines."""

from __future__ import annotations

import dataclasses
import json
from datetime import datetime

from hypothesis import given
from hypothesis import strategies as st

from delivery.conftest import AT
from rhovane.delivery import as_cloudevent, channel_of
from rhovane.delivery.to_mail import mail_of
from rhovane.model import Message, MessageKind


def test_a_cloudevent_has_the_required_attributes_and_the_time_in_rfc_3339(message):
    event = as_cloudevent(message, "/rhovane/test")
    assert {name: event[name] for name in ("specversion", "source", "type", "id")} == {
        "specversion": "1.0",
        "source": "/rhovane/test",
        "type": "rhovane.night.digest",
        "id": message.id,
    }
    assert event["time"] == "2025-03-02T03:40:00Z"
    assert datetime.fromisoformat(event["time"]) == AT
    assert event["data"]["silent"] == ["A.NO2: never seen"]
    assert all(name.isalnum() and name == name.lower() for name in event)  # CloudEvents 1.0, 3.1


@given(st.text(max_size=5), st.text(max_size=5), st.integers(0, 2), st.booleans())
def test_an_id_belongs_to_one_content(title, text, number, flag):
    one = Message(MessageKind.ALERT, "alert 1", AT, title, text, {"number": number, "flag": flag})
    assert Message.from_json(json.loads(json.dumps(one.as_json()))).id == one.id
    for other in (
        dataclasses.replace(one, title=title + "."),
        dataclasses.replace(one, text=title + "\n" + text + "."),
        dataclasses.replace(one, kind=MessageKind.NOTICE),
        dataclasses.replace(one, data={"number": number + 1, "flag": flag}),
    ):
        assert other.id != one.id


def test_a_file_takes_one_event_a_line_and_a_torn_line_spoils_nothing_else(message, with_channels):
    settings = with_channels('[delivery.file]\npath = "out.jsonl"\n')
    path = settings.work_folder / "out.jsonl"
    send = channel_of(settings, "file")
    send(message)
    with path.open("a", encoding="utf-8") as stream:
        stream.write('{"specversion": "1.0", "id": "cut in the mi')
    send(message)
    lines = path.read_text(encoding="utf-8").splitlines()
    assert len(lines) == 3
    assert json.loads(lines[0]) == json.loads(lines[2]) == as_cloudevent(message, "/rhovane")


def test_a_channel_that_the_settings_do_not_have_is_none(with_channels):
    settings = with_channels("")
    assert [channel_of(settings, name) for name in ("file", "http", "mail", "pigeon")] == [None] * 4


def test_a_mail_keeps_its_message_id_and_no_title_breaks_its_head(message, with_channels):
    settings = with_channels(
        '[delivery.mail]\nhost = "localhost"\nsender = "watch@example.org"\nto = ["a@example.org"]\n'
    ).delivery.mail
    bad = dataclasses.replace(message, title="Quiet\nBcc: everybody@example.org")
    mail = mail_of(settings, bad, "/rhovane")
    assert mail["Message-ID"] == f"<{bad.id}@example.org>" == mail_of(settings, bad, "/rhovane")["Message-ID"]
    assert mail["Bcc"] is None
    assert "Düsternbrook: 12 µg/m³" in mail.get_content()
