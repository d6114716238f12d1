"""Decisions and site log entries from the page: each lands in the log with a name, or says why not."""

from __future__ import annotations

import datetime as dt

import pytest

from rhovane.review import alert_entry
from rhovane.store import open_store
from web.forms import form_token, record
from web.morning_network import MORNING


def events_of(settings):
    """Kind, person, note and facts of the events of alert 1, without the raising."""
    with open_store(settings.store_path, read_only=True) as store:
        entry = alert_entry(store, 1, MORNING)
        assert store.verify_alert_chain() is None
    return [(e.kind.value, e.who, e.note, dict(e.payload)) for e in entry.events[1:]]


def test_acknowledge_note_outcome_and_shelve_are_added_in_order(browse, own):
    client = browse(own)
    for fields in (
        {"decision": "acknowledge", "note": "seen"},
        {"decision": "note", "note": "belt torn"},
        {"decision": "outcome", "outcome": "instrument", "note": "replaced", "fault_until": ""},
        {"decision": "shelve", "until": "2025-07-01"},
    ):
        response = record(client, **fields)
        assert response.status_code == 303
        assert response.headers["location"] == "/alert/1?recorded=1#log-1"
    assert events_of(own) == [
        ("acknowledged", "ana", "seen", {}),
        ("note", "ana", "belt torn", {}),
        ("outcome", "ana", "replaced", {"outcome": "instrument", "acts_from": "2025-06-20"}),
        ("shelved", "ana", "", {"until": "2025-07-01"}),
    ]
    text = client.get("/alert/1?recorded=1").text
    assert "Recorded in the alert log" in text
    assert "shelved until 2025-07-01" in text
    assert 'value="ana"' in text  # the name is remembered


@pytest.mark.parametrize(
    ("fields", "why"),
    [
        ({"decision": "acknowledge", "who": "  "}, "needs a name"),
        ({"decision": "shelve", "until": ""}, "Shelving needs an end"),
        ({"decision": "shelve", "until": "2025-06-20"}, "not in the future"),
        ({"decision": "shelve", "until": "soon"}, "is not a day"),
        ({"decision": "outcome", "outcome": "sabotage"}, "Choose an outcome"),
        ({"decision": "outcome", "outcome": "instrument", "fault_until": "May"}, "last day at fault"),
        ({"decision": "outcome", "outcome": "false", "new_baseline": "yes"}, "alert 1:"),
        ({"decision": "note", "note": " "}, "The note is empty"),
        ({"decision": "note", "note": "x" * 8001}, "at most 8000 are kept"),
        ({"decision": "delete"}, "is no decision"),
        ({}, "is no decision"),
    ],
)
def test_a_wrong_decision_says_why_and_writes_nothing(browse, own, fields, why):
    response = record(browse(own), **fields)
    assert response.status_code == 409
    assert why in response.text
    assert events_of(own) == []


def test_what_was_typed_is_shown_again_after_a_refusal(browse, own):
    text = record(browse(own), decision="shelve", until="", note="wait for <the> part", who="bo").text
    assert "wait for &lt;the&gt; part</textarea>" in text
    assert 'value="bo"' in text


def test_a_second_acknowledgement_is_refused_with_the_first(browse, own):
    client = browse(own)
    record(client, decision="acknowledge")
    response = record(client, decision="acknowledge", who="bo")
    assert response.status_code == 409
    assert "already acknowledged by ana" in response.text
    assert "I have seen it" not in client.get("/alert/1").text


def test_a_hostile_name_and_note_are_kept_as_written_and_shown_as_text(browse, own):
    client = browse(own)
    assert (
        record(client, decision="note", note="<img src=x onerror=alert(2)>", who="<b>&'\"").status_code == 303
    )
    assert events_of(own) == [("note", "<b>&'\"", "<img src=x onerror=alert(2)>", {})]
    text = client.get("/alert/1").text
    assert "<img" not in text
    assert "<b>" not in text
    assert "&lt;img src=x onerror=alert(2)&gt;" in text


def test_an_alert_that_is_not_there_cannot_be_decided(browse, own):
    client = browse(own)
    token = form_token(client, "/alert/1")
    data = {"form_token": token, "who": "ana", "decision": "acknowledge"}
    assert client.post("/alert/7/record", data=data).status_code == 404


def test_site_log_entries_are_added_and_shown_near_an_alert(browse, own):
    client = browse(own)
    token = form_token(client, "/sitelog")
    entry = {"subject": "A", "from": "2025-05-20 14:00", "to": "", "what": "inlet <cleaned>", "who": "bo"}
    assert client.post("/sitelog", data={"form_token": token, **entry}).status_code == 303
    assert "inlet &lt;cleaned&gt;" in client.get("/sitelog").text
    sheet = client.get("/alert/1").text
    assert "2025-05-20 14:00 to (still), A: inlet &lt;cleaned&gt;" in sheet
    with open_store(own.store_path, read_only=True) as store:
        (stored,) = store.site_log()
    assert stored.entry.start == dt.datetime(2025, 5, 20, 14, tzinfo=dt.UTC)
    assert (stored.who, stored.entry.end) == ("bo", None)


def test_a_wrong_site_log_entry_tells_every_mistake(browse, own):
    client = browse(own)
    token = form_token(client, "/sitelog")
    entry = {"subject": "Z", "from": "May", "to": "June", "what": " ", "who": ""}
    response = client.post("/sitelog", data={"form_token": token, **entry})
    assert response.status_code == 409
    for word in ("subject:", "from:", "to:", "what:", "who:"):
        assert word in response.text, word
    with open_store(own.store_path, read_only=True) as store:
        assert store.site_log() == []
