"""A small file beside the store that says how much the store must hold.

The write-ahead log of the database drops every later transaction, without a word, when one byte in its
middle is damaged. The manifest is written after each commit and compared when the store is opened: a
store that holds less than its manifest says has lost something. A store that holds more was cut off
between the commit and the writing of the manifest, which is harmless.
"""

from __future__ import annotations

import json
import os
from collections.abc import Callable, Collection
from dataclasses import asdict, dataclass, fields, replace
from pathlib import Path

from rhovane.model import RhovaneError, StoreDamaged

# What counts the fields of Manifest, by the fields that one query answers.
COUNTS_SQL = {
    ("last_ingest_id", "ingest_rows", "rows_read"): (
        "select coalesce(max(id), 0), count(*), coalesce(sum(rows_read), 0)::bigint from ingest"
    ),
    ("readings",): "select count(*) from reading",
    ("nights",): "select count(*) from night",
    ("alerts",): "select count(*) from alert",
    ("alert_events",): "select count(*) from alert_event",
}

# What each count is called in a message.
_WORDS = {
    "ingest_rows": "ingests in the ledger",
    "last_ingest_id": "as the number of the last ingest",
    "rows_read": "rows read by all ingests",
    "readings": "readings",
    "nights": "nights in the ledger",
    "alerts": "alerts",
    "alert_events": "events in the alert log",
}


COUNT_NAMES = tuple(_WORDS)


@dataclass(frozen=True)
class Manifest:
    """How much a store holds; every number only ever grows."""

    last_ingest_id: int = 0
    ingest_rows: int = 0
    rows_read: int = 0
    readings: int = 0
    nights: int = 0
    alerts: int = 0
    alert_events: int = 0

    @classmethod
    def counted(cls, row: Callable[[str], tuple[int, ...]]) -> Manifest:
        """What a store holds, from the only row of a counting query."""
        return cls().recounted(row, COUNT_NAMES)

    def recounted(self, row: Callable[[str], tuple[int, ...]], among: Collection[str]) -> Manifest:
        """The same manifest with the fields ``among`` (and those of the same query) counted anew."""
        asked = {n: sql for n, sql in COUNTS_SQL.items() if not set(n).isdisjoint(among)}
        # One statement for all counts: each statement costs more than what it counts.
        found = row("select * from " + ", ".join(f"({sql})" for sql in asked.values()))
        return replace(self, **dict(zip((name for n in asked for name in n), found, strict=True)))


def manifest_path(store: Path) -> Path:
    """Where the manifest of a store is: ``<store>.manifest.json``."""
    return store.with_name(store.name + ".manifest.json")


def read_manifest(store: Path) -> Manifest | None:
    """The manifest of a store, or None where there is none.

    Raises
    ------
    StoreDamaged
        There is one, but it cannot be understood.
    """
    path = manifest_path(store)
    try:
        held = json.loads(path.read_text(encoding="utf-8"))
        return Manifest(**{f.name: int(held[f.name]) for f in fields(Manifest)})
    except (FileNotFoundError, NotADirectoryError):
        return None
    except (ValueError, KeyError, TypeError) as error:
        raise StoreDamaged(
            f"{path} is damaged ({error!r}), so it cannot be told whether {store} is whole. Compare the store "
            "with a backup; when it is whole, delete the manifest: it is written anew."
        ) from error


def write_manifest(store: Path, manifest: Manifest, *, durable: bool = True) -> None:
    """Replace the manifest of a store in one step; a reader sees the old one or the new one.

    Not ``durable``, it is not forced to the disk: a loss of power may leave the old one, which is harmless.

    Raises
    ------
    RhovaneError
        The file cannot be written.
    """
    path = manifest_path(store)
    part = path.with_name(path.name + ".part")
    try:
        with part.open("w", encoding="utf-8") as stream:
            json.dump(asdict(manifest), stream, indent=1)
            if durable:
                stream.flush()
                os.fsync(stream.fileno())
        part.replace(path)
    except OSError as error:
        raise RhovaneError(
            f"{path} cannot be written ({error.strerror}). What the store was given is kept. Free space or allow "
            "writing in this folder; the next opening of the store writes the manifest anew."
        ) from error


def losses(held: Manifest, expected: Manifest) -> list[str]:
    """What ``held`` has less of than ``expected``, in words; empty when nothing is missing."""
    return [
        f"{getattr(expected, name) - getattr(held, name)} lost: "
        f"{getattr(held, name)} {words}, the manifest says {getattr(expected, name)}"
        for name, words in _WORDS.items()
        if getattr(held, name) < getattr(expected, name)
    ]
