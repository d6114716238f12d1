"""The page on a port of this machine: where it may listen, and that it can be started and stopped in a thread."""

from __future__ import annotations

import threading
import urllib.request

import pytest

from rhovane.model import RhovaneError
from rhovane.web import PageServer


@pytest.mark.parametrize("host", ["0.0.0.0", "::", "192.0.2.7", "example.org"])
def test_other_addresses_need_a_token(settings, clock, host):
    with pytest.raises(RhovaneError, match="needs a token"):
        PageServer(settings, host=host, port=0, token=None, clock=clock)


def test_a_short_token_is_refused_without_being_shown(settings, clock):
    with pytest.raises(RhovaneError, match="5 characters") as refused:
        PageServer(settings, port=0, token="short", clock=clock)
    assert "short" not in str(refused.value).replace("is short", "")


def test_a_taken_port_is_told(settings, clock):
    first = PageServer(settings, port=0, token=None, clock=clock)
    try:
        with pytest.raises(RhovaneError, match="choose another with --port"):
            PageServer(settings, port=first.port, token=None, clock=clock)
    finally:
        first.close()


def test_the_page_runs_in_a_thread_and_stops_when_told(settings, clock):
    server = PageServer(settings, port=0, token=None, clock=clock)
    thread = threading.Thread(target=server.run)
    thread.start()
    try:
        with urllib.request.urlopen(server.address + "downloads", timeout=30) as answer:
            assert answer.status == 200
            assert b"Downloads" in answer.read()
    finally:
        server.stop()
        thread.join(30)
    assert not thread.is_alive()
