"""A small file beside the store in which the service shows that it is alive, and what it noticed.

It is a file, not a table, so that a sign of life every half minute neither holds the store nor grows it,
and so that it can be read while a night runs.
"""

from __future__ import annotations

import json
import os
from dataclasses import asdict, dataclass, field
from datetime import datetime, timedelta
from pathlib import Path
from typing import Any

from rhovane.model import RhovaneError

EVENTS_KEPT = 50  # latest events that a sign of life tells
BEATS_MISSED = 4  # heartbeats without a sign of life after which the service counts as not alive


@dataclass(frozen=True)
class Noticed:
    """Something the service noticed: a word for the kind, and a sentence."""

    at: datetime
    kind: str
    text: str


@dataclass(frozen=True)
class Liveness:
    """The service's last sign of life.

    ``state`` is "running" or "stopped"; ``doing`` what it is at ("" when it waits). ``events`` are the latest things it
    noticed, oldest first.
    """

    pid: int
    started: datetime
    beat: datetime
    heartbeat_s: int
    state: str
    doing: str = ""
    next_night: datetime | None = None
    events: tuple[Noticed, ...] = field(default=())

    def alive(self, now: datetime) -> bool:
        """Whether the last sign of life is recent; one from the future counts as recent."""
        return self.state == "running" and now - self.beat <= timedelta(
            seconds=BEATS_MISSED * self.heartbeat_s
        )

    def as_json(self) -> dict[str, Any]:
        """Plain values."""
        return {
            **asdict(self),
            "started": self.started.isoformat(),
            "beat": self.beat.isoformat(),
            "next_night": None if self.next_night is None else self.next_night.isoformat(),
            "events": [{"at": e.at.isoformat(), "kind": e.kind, "text": e.text} for e in self.events],
        }


def liveness_path(store: Path) -> Path:
    """Where the sign of life is: ``<store>.service.json``."""
    return store.with_name(store.name + ".service.json")


def read_liveness(store: Path) -> Liveness | None:
    """The service's last sign of life; None where there never was a service, or its file cannot be understood."""
    try:
        held = json.loads(liveness_path(store).read_text(encoding="utf-8"))
        moment = datetime.fromisoformat
        return Liveness(
            **{
                **held,
                "started": moment(held["started"]),
                "beat": moment(held["beat"]),
                "next_night": None if held["next_night"] is None else moment(held["next_night"]),
                "events": tuple(Noticed(moment(e["at"]), e["kind"], e["text"]) for e in held["events"]),
            }
        )
    except (OSError, ValueError, KeyError, TypeError):
        return None


def write_liveness(store: Path, liveness: Liveness) -> None:
    """Replace the sign of life in one step.

    Raises
    ------
    RhovaneError
        The file cannot be written.
    """
    path = liveness_path(store)
    part = path.with_name(f"{path.name}.part-{os.getpid()}")
    try:
        part.write_text(json.dumps(liveness.as_json(), indent=1, ensure_ascii=False), encoding="utf-8")
        part.replace(path)
    except OSError as error:
        raise RhovaneError(
            f"{path} cannot be written ({error.strerror}). Free space or allow writing in this folder."
        ) from error
