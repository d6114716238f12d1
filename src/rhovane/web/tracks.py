"""The watch replayed once a night for the pictures of evidence, beside the requests that ask for it."""

from __future__ import annotations

import threading

from rhovane.pipeline.looking import StoredEvidence, WatchTracks
from rhovane.settings import Settings


class ReplayedWatch:
    """Remembers the replay of the newest night; a new night is replayed in a thread of its own.

    Replaying takes from a second to minutes with the number of pairs, so a request waits for it only
    ``wait_s`` and shows its page without the picture of evidence otherwise.
    """

    def __init__(self, settings: Settings, *, wait_s: float) -> None:
        self._settings = settings
        self._wait_s = wait_s
        self._lock = threading.Lock()
        self._night: int | None = None
        self._tracks: WatchTracks | None = None
        self._working: threading.Thread | None = None

    def knows(self, night_id: int) -> bool:
        """Whether the replay of a night is there or under way."""
        with self._lock:
            return self._night == night_id

    def begin(self, evidence: StoredEvidence) -> None:
        """Replay a night in the background, once."""
        with self._lock:
            if self._night == evidence.night_id:
                return
            self._night, self._tracks = evidence.night_id, None
            self._working = threading.Thread(
                target=self._replay, args=(evidence,), name="rhovane-replay", daemon=True
            )
            self._working.start()

    def of(self, night_id: int) -> WatchTracks | None:
        """The replay of a night; None while it is not there yet."""
        with self._lock:
            working = self._working if self._night == night_id else None
        if working is not None:
            working.join(self._wait_s)
        with self._lock:
            return self._tracks if self._night == night_id else None

    def _replay(self, evidence: StoredEvidence) -> None:
        tracks = evidence.replayed(self._settings)
        with self._lock:
            if self._night == evidence.night_id:
                self._tracks = tracks
