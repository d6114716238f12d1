"""The watch replayed once a night for the pictures of evidence, beside the requests that ask for it."""

from __future__ import annotations

import multiprocessing
import threading
from concurrent.futures import Future
from concurrent.futures import TimeoutError as NotYet
from multiprocessing.connection import Connection

from rhovane.pipeline.looking import StoredEvidence, WatchTracks
from rhovane.settings import Settings

SMALL = 1_000_000
"""Pairs² × days up to which a replay takes a second or two: 24 pairs over 18 months are 300,000."""


class ReplayedWatch:
    """Remembers the replay of the newest night; a new night is replayed beside the requests.

    500 pairs over three years take minutes: such a replay runs in a process of its own, because within the process
    of the page it would make every request twenty times slower (measured). A request waits for the replay only
    ``wait_s``, and shows its page without the picture of evidence otherwise.
    """

    def __init__(self, settings: Settings, *, wait_s: float, small: int = SMALL) -> None:
        self._settings = settings
        self._wait_s = wait_s
        self._small = small
        self._lock = threading.Lock()
        self._night: int | None = None
        self._replay: Future[WatchTracks | None] = Future()

    def knows(self, night_id: int) -> bool:
        """Whether the replay of a night is there or under way."""
        with self._lock:
            return self._night == night_id

    def begin(self, evidence: StoredEvidence) -> None:
        """Replay a night, once."""
        with self._lock:
            if self._night == evidence.night_id:
                return
            self._night, self._replay = evidence.night_id, Future()
            work = (evidence, self._replay)
        threading.Thread(target=self._work, args=work, name="rhovane-replay", daemon=True).start()

    def of(self, night_id: int, *, waiting: bool = True) -> WatchTracks | None:
        """The replay of a night; None while it is not there yet, or when its process was ended from outside."""
        with self._lock:
            if self._night != night_id:
                return None
            replay = self._replay
        try:
            return replay.result(self._wait_s if waiting else 0.0)
        except NotYet:
            return None

    def _work(self, evidence: StoredEvidence, replay: Future[WatchTracks | None]) -> None:
        if evidence.size <= self._small:
            replay.set_result(evidence.replayed(self._settings))
        else:
            replay.set_result(_in_own_process(evidence, self._settings))


def _in_own_process(evidence: StoredEvidence, settings: Settings) -> WatchTracks | None:
    """The replay, done in a process that ends with the page's; None when it was ended from outside."""
    spawn = multiprocessing.get_context("spawn")
    here, there = spawn.Pipe(duplex=False)
    process = spawn.Process(
        target=_send, args=(there, evidence, settings), name="rhovane-replay", daemon=True
    )
    process.start()
    there.close()
    try:
        tracks: WatchTracks | None = here.recv()
    except EOFError:
        tracks = None
    process.join()
    return tracks


def _send(there: Connection, evidence: StoredEvidence, settings: Settings) -> None:
    there.send(evidence.replayed(settings))
