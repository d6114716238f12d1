"""What the pages say in the states in which a network may be found in the morning."""

from __future__ import annotations

import datetime as dt
import re
from html import unescape
from pathlib import Path

import pytest
from starlette.testclient import TestClient

from rhovane.web import make_app
from web.forms import form_token
from web.morning_network import (
    HOSTILE,
    LAST_DAY,
    MORNING,
    hold_store,
    large_network,
    network_of_a_failed_night,
    network_of_one_night,
    processes,
    settings_in,
)

PATHS = (
    "/", "/alert/1", "/pairs", "/pair?key=A.NO2~B.NO2", "/series", "/one-series?key=A.NO2", "/nights", "/sitelog",
    "/statistics", "/downloads", f"/night/{LAST_DAY}",
)  # fmt: skip


def words(html: str) -> str:
    """The text of a page, spaces squeezed."""
    return " ".join(
        unescape(re.sub(r"<script.*?</script>|<style.*?</style>|<[^>]+>", " ", html, flags=re.S)).split()
    )


@pytest.mark.parametrize("path", PATHS)
def test_every_page_answers_with_network_clock_and_cautions(reader, path):
    response = reader.get(path)
    assert response.status_code == 200
    said = words(response.text)
    for part in (
        "Two stations",
        "standard time, UTC+00:00",
        "Association is not cause",
        "licensed, professional",
    ):
        assert part in said, path
    assert "Demo data" not in said


@pytest.mark.parametrize("path", PATHS)
def test_names_from_outside_never_become_markup(reader, path):
    text = reader.get(path).text
    assert HOSTILE not in text
    assert "alert(1)" not in "".join(re.findall(r"<script[^>]*>(.*?)</script>", text, flags=re.S))


@pytest.mark.parametrize("path", PATHS)
def test_pages_run_no_script_and_no_style_but_files_of_ours(reader, path):
    text = reader.get(path).text
    assert not re.search(r"<script(?![^>]*(src=\"/static/|type=\"application/json\"))", text)
    assert not re.search(r"\sstyle=|<style|\son[a-z]+=|javascript:", text)
    assert not re.search(r"(src|href)=\"(https?:)?//", text)


def test_the_morning_list_tells_night_alert_arrivals_and_silence(reader):
    said = words(reader.get("/").text)
    assert f"Morning list after the night of {LAST_DAY}" in said
    assert "✓ complete" in said
    assert "1 new alert" in said
    assert "A.NO2 and B.NO2 move together less closely" in said
    assert "8 160 readings" in said  # readings that arrived
    assert "C.NO2 no reading has ever arrived" in said
    assert "C.NO2~A.NO2 too few pairs" in said
    assert "all.csv:8162" in said  # the row in quarantine, with file and line


def test_an_alert_sheet_shows_size_evidence_neighbours_and_what_it_rests_on(reader):
    text = reader.get("/alert/1").text
    said = words(text)
    for part in (
        "before", "independent hours", "crossed its threshold", "Rolling ρ over 168 hours", "Ranks before and after",
        "Evidence and its threshold", "ρ by lag and time", "Who else moved", "up to ingest 1", "raised , rhovane",
    ):  # fmt: skip
        assert part in said, part
    assert text.count("<svg") > 8
    assert "µg/m³" in text


def test_every_picture_has_words_for_those_who_cannot_see_it(reader):
    text = reader.get("/alert/1").text
    for svg in re.findall(r"<svg[^>]*>", text):
        assert 'aria-hidden="true"' in svg or re.search(r'role="img" aria-label="[^"]{20,}"', svg), svg


def test_missing_nights_are_said_loudly(settings):
    app = make_app(settings, token=None, clock=lambda: MORNING + dt.timedelta(days=5))
    said = words(TestClient(app, base_url="http://127.0.0.1").get("/").text)
    assert "5 missed" in said
    assert "Silence since then means no data, not no change" in said


def test_a_past_night_is_shown_as_it_stood(reader):
    said = words(reader.get(f"/night/{LAST_DAY}").text)
    assert "1 new alert" in said
    assert reader.get("/night/2024-01-01").status_code == 404
    assert reader.get("/night/yesterday").status_code == 404


def test_without_a_store_the_page_says_what_to_run(browse, tmp_path: Path):
    response = browse(settings_in(tmp_path)).get("/")
    assert response.status_code == 200
    assert "Nothing is stored yet" in response.text
    assert "silence here means nothing" in response.text


def test_after_one_night_nothing_is_taken_for_no_change(browse, tmp_path: Path):
    said = words(browse(network_of_one_night(tmp_path)).get("/").text)
    assert "0 new alerts" in said
    assert "No data is not no change" in said
    assert "A.NO2~B.NO2" in said


def test_a_failed_night_shows_step_and_reason(browse, tmp_path: Path):
    response = browse(network_of_a_failed_night(tmp_path)).get("/")
    said = words(response.text)
    assert "✕ failed" in said
    assert f"the disk said {HOSTILE}" in said
    assert HOSTILE not in response.text


def test_a_locked_store_says_who_holds_it_and_keeps_what_was_typed(browse, own):
    impatient = own.store.model_copy(update={"lock_wait_s": 0.3})
    own = own.model_copy(update={"store": impatient})
    client = browse(own)
    token = form_token(client, "/alert/1")
    held, release = processes.Event(), processes.Event()
    holder = processes.Process(target=hold_store, args=(own.store_path, held, release))
    holder.start()
    try:
        assert held.wait(60)
        response = client.get("/")
        assert response.status_code == 503
        assert response.headers["retry-after"] == "5"
        assert f"process {holder.pid}" in response.text
        data = {"form_token": token, "who": "ana", "decision": "note", "note": "belt torn at seven"}
        refused = client.post("/alert/1/record", data=data)
        assert refused.status_code == 503
        assert "belt torn at seven" in refused.text
    finally:
        release.set()
        holder.join(60)


def test_unknown_things_are_not_found(reader):
    for path in ("/alert/99", "/pair?key=A~B", "/one-series?key=..%2F..", "/nothing", "/pair"):
        assert reader.get(path).status_code == 404, path


def test_five_hundred_pairs_are_laid_out(browse, tmp_path: Path):
    client = browse(large_network(tmp_path, 3))
    matrix = client.get("/pairs").text
    assert matrix.count("/pair?key=") == 500
    assert client.get("/").status_code == 200
    assert "Rolling" in client.get("/pair?key=S00.NO2~S01.NO2").text
