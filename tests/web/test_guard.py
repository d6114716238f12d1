"""Who may ask, and what leaves: host, form token, size, rate, entry token, headers."""

from __future__ import annotations

import datetime as dt
import logging

import pytest

from rhovane.web.guard import MAX_BODY_BYTES, TOKENS_A_MINUTE, WRITES_A_MINUTE
from web.forms import form_token, record

TOKEN = "a long token of the office"


@pytest.mark.parametrize(
    "host", ["evil.example", "127.0.0.1.evil.example", "127.0.0.1:9", "", "localhost@evil"]
)
def test_a_foreign_host_name_is_refused(browse, settings, host):
    response = browse(settings).get("/", headers={"host": host})
    assert response.status_code == 400
    assert "Morning" not in response.text


@pytest.mark.parametrize("host", ["127.0.0.1", "localhost", "LOCALHOST", "[::1]"])
def test_names_of_this_machine_are_answered(browse, settings, host):
    assert browse(settings).get("/downloads", headers={"host": host}).status_code == 200


def test_a_form_without_our_token_writes_nothing(browse, own):
    client = browse(own)
    data = {"who": "ana", "decision": "acknowledge", "note": ""}
    assert client.post("/alert/1/record", data=data).status_code == 403
    assert client.post("/alert/1/record", data={**data, "form_token": "0" * 64}).status_code == 403
    stranger = form_token(browse(own), "/alert/1")
    client.get("/alert/1")
    assert client.post("/alert/1/record", data={**data, "form_token": stranger}).status_code == 403
    assert "● unacknowledged" in client.get("/alert/1").text


@pytest.mark.parametrize(
    "headers",
    [{"origin": "https://evil.example"}, {"origin": "null"}, {"sec-fetch-site": "cross-site"}],
)
def test_a_form_of_another_site_is_refused_even_with_a_token(browse, own, headers):
    client = browse(own)
    token = form_token(client, "/alert/1")
    data = {"form_token": token, "who": "ana", "decision": "acknowledge", "note": ""}
    assert client.post("/alert/1/record", data=data, headers=headers).status_code == 403


def test_cookies_are_out_of_reach_of_scripts_and_other_sites(browse, own):
    client = browse(own)
    found = [
        client.get("/").headers["set-cookie"],
        record(client, decision="acknowledge").headers["set-cookie"],
    ]
    for one in found:
        assert "HttpOnly" in one
        assert "SameSite=Strict" in one


def test_other_kinds_of_bodies_and_methods_are_refused(browse, own):
    client = browse(own)
    token = form_token(client, "/alert/1")
    assert client.post("/alert/1/record", json={"form_token": token}).status_code == 415
    assert client.put("/alert/1/record").status_code == 405
    assert client.delete("/alert/1").status_code == 405
    many = "&".join(f"f{i}=1" for i in range(60))
    headers = {"content-type": "application/x-www-form-urlencoded"}
    assert client.post("/alert/1/record", content=many, headers=headers).status_code == 400
    assert client.post("/alert/1/record", content=b"\xff\xfe=%zz", headers=headers).status_code == 400


def test_a_body_that_is_too_long_is_refused_whether_or_not_it_says_so(browse, own):
    client = browse(own)
    headers = {"content-type": "application/x-www-form-urlencoded"}
    long = b"note=" + b"x" * MAX_BODY_BYTES
    assert client.post("/alert/1/record", content=long, headers=headers).status_code == 413
    chunks = (b"x" * 8192 for _ in range(MAX_BODY_BYTES // 8192 + 1))
    assert client.post("/alert/1/record", content=chunks, headers=headers).status_code == 413
    assert client.get("/downloads", headers={"content-length": "lots"}).status_code == 413


def test_too_many_forms_in_a_minute_wait(browse, own, clock):
    client = browse(own)
    answers = [client.post("/sitelog", data={"who": "x"}).status_code for _ in range(WRITES_A_MINUTE + 1)]
    assert answers == [403] * WRITES_A_MINUTE + [429]
    clock.now += dt.timedelta(minutes=1)
    assert client.post("/sitelog", data={"who": "x"}).status_code == 403


def test_every_answer_carries_the_policy_and_is_not_kept(browse, settings):
    client = browse(settings)
    for path in ("/", "/alert/99", "/static/zoom.js", "/download/alerts.csv", "/report/alert/1"):
        headers = client.get(path).headers
        policy = headers["content-security-policy"]
        assert "default-src 'none'" in policy, path
        assert "unsafe" not in policy, path
        assert headers["x-content-type-options"] == "nosniff"
        assert headers["x-frame-options"] == "DENY"
        assert "server" not in headers
    assert client.get("/").headers["cache-control"] == "no-store"


@pytest.mark.parametrize(
    "path",
    [
        "/static/../app.py", "/static/..%2fapp.py", "/static/%2e%2e/app.py", "/static/rhovane.css/../../app.py",
        "/download/..%2f..%2fmonitor.toml", "/download/readings.toml", "/download/night.csv", "/download/%2fetc%2fpasswd",
        "/report/night/..%2f..", "/report/alert/../../monitor.toml", "/static/", "/static/templates/alert.html",
    ],
)  # fmt: skip
def test_no_address_leads_out_of_the_files_listed(browse, settings, path):
    response = browse(settings).get(path)
    assert response.status_code == 404
    assert "[network]" not in response.text


def test_with_a_token_nothing_is_shown_before_it_is_entered(browse, settings):
    client = browse(settings, TOKEN)
    for path in ("/", "/alert/1", "/download/alerts.csv", "/report/alert/1.json"):
        response = client.get(path)
        assert response.status_code == 303
        assert response.headers["location"] == "/enter"
        assert "NO2" not in response.text
    assert client.post("/sitelog", data={}).status_code == 403


def test_entering_the_token_opens_the_page_for_this_browser_only(browse, settings, clock, caplog):
    caplog.set_level(logging.DEBUG)
    client = browse(settings, TOKEN)
    wrong = client.post("/enter", data={"form_token": form_token(client, "/enter"), "token": "guess"})
    assert wrong.headers["location"] == "/enter?wrong=1"
    assert client.get("/").status_code == 303
    right = client.post("/enter", data={"form_token": form_token(client, "/enter"), "token": TOKEN})
    assert right.headers["location"] == "/"
    assert TOKEN not in str(right.headers)
    page = client.get("/")
    assert page.status_code == 200
    assert TOKEN not in page.text
    assert TOKEN not in caplog.text
    assert browse(settings, TOKEN).get("/").status_code == 303
    clock.now += dt.timedelta(hours=13)
    assert client.get("/").status_code == 303


def test_a_program_may_send_the_token_with_each_request(browse, settings):
    client = browse(settings, TOKEN)
    assert client.get("/downloads", headers={"authorization": f"Bearer {TOKEN}"}).status_code == 200
    assert client.get("/downloads", headers={"authorization": "Bearer guess"}).status_code == 303
    assert client.get("/downloads", headers={"cookie": "rhovane_entry=99999999999-0"}).status_code == 303


def test_guessing_the_token_is_slow(browse, settings):
    client = browse(settings, TOKEN)
    token = form_token(client, "/enter")
    tries = [
        client.post("/enter", data={"form_token": token, "token": str(i)}).status_code
        for i in range(TOKENS_A_MINUTE + 1)
    ]
    assert tries == [303] * TOKENS_A_MINUTE + [429]
