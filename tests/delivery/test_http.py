"""HTTP receivers that accept, refuse, redirect, dawdle and hang up."""

from __future__ import annotations

import json
import time

import pytest

from delivery.receivers import HttpReceiver
from rhovane.delivery import Undelivered, as_cloudevent, channel_of


def channel(with_channels, port: int, more: str = "", scheme: str = "http", timeout_s: float = 10):
    return channel_of(
        with_channels(
            f'[delivery]\ntimeout_s = {timeout_s}\n[delivery.http]\nurl = "{scheme}://localhost:{port}/in?x=1"\n{more}'
        ),
        "http",
    )


def test_a_message_is_posted_in_structured_mode_and_a_repeat_is_the_same_event(message, with_channels):
    receiver = HttpReceiver(answers=[200, 202])
    with receiver.listen() as port:
        send = channel(with_channels, port)
        assert send(message) is None
        assert send(message) is None
    (path, head, body), (_, _, again) = receiver.requests
    assert path == "/in?x=1"
    assert head["Content-Type"] == "application/cloudevents+json; charset=utf-8"
    assert json.loads(body) == as_cloudevent(message, "/rhovane")
    assert body == again


@pytest.mark.parametrize(
    ("answer", "others"), [(500, False), (503, False), (404, False), (401, False), (422, True), (302, False)]
)
def test_an_answer_other_than_accepted_is_a_failure_that_names_it(message, with_channels, answer, others):
    receiver = HttpReceiver(answers=[answer])
    with receiver.listen() as port, pytest.raises(Undelivered, match=f"answered {answer}") as caught:
        channel(with_channels, port)(message)
    assert caught.value.others_may_go is others
    assert len(receiver.requests) == 1, "a redirect is not followed"


def test_a_receiver_that_talks_slowly_is_left_after_the_time_limit(message, with_channels):
    with HttpReceiver(answers=["drip"]).listen() as port:
        begun = time.monotonic()
        with pytest.raises(Undelivered, match=r"no answer within 0\.5 s"):
            channel(with_channels, port, timeout_s=0.5)(message)
        assert time.monotonic() - begun < 4  # the answer would take 10 s


def test_a_receiver_that_hangs_up_or_is_not_there_is_a_failure(message, with_channels):
    with HttpReceiver(answers=["hang up after reading"]).listen() as port:
        send = channel(with_channels, port)
        with pytest.raises(Undelivered, match=rf"http://localhost:{port}"):
            send(message)
    with pytest.raises(Undelivered, match="refused"):
        send(message)


def test_a_token_is_sent_encrypted_and_never_shown(message, with_channels, monkeypatch):
    monkeypatch.setenv("RHOVANE_TEST_TOKEN", "geheim-4711")
    receiver = HttpReceiver(answers=[204, 500], tls=True)
    trusting = 'token_env = "RHOVANE_TEST_TOKEN"\nca_file = "ca.pem"\n'
    with receiver.listen() as port:
        assert channel(with_channels, port, trusting, scheme="https")(message) is None
        with pytest.raises(Undelivered) as failed:
            channel(with_channels, port, trusting, scheme="https")(message)
        with pytest.raises(Undelivered, match="certificate") as distrusted:
            channel(with_channels, port, 'token_env = "RHOVANE_TEST_TOKEN"\n', scheme="https")(message)
    assert [head["Authorization"] for _, head, _ in receiver.requests] == ["Bearer geheim-4711"] * 2
    assert "geheim" not in f"{failed.value!r} {distrusted.value!r}"
