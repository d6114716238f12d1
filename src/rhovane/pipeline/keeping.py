"""After the night: is the store whole, and a copy of it for the case that it is not one day."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

from rhovane.settings import Settings
from rhovane.store import Store
from rhovane.store.manifest import read_manifest

BACKUP_FOLDER = "backup"


def copy_due(settings: Settings, store: Store, day: dt.date) -> bool:
    """Whether the copy of a day is missing or lacks a night that the store holds, because something came in between."""
    held = read_manifest(_copy_of(settings, day))
    return settings.service.backup and (held is None or held.nights < store.holds().nights)


def keep_store(settings: Settings, store: Store, day: dt.date) -> list[str]:
    """Verify the store and, if it is whole, copy it, as the settings say; the faults found, in words.

    Copies take turns by the day of the week, so that there are seven. A store with faults is not copied over
    a good copy.

    Raises
    ------
    RhovaneError
        The store cannot be read, or the copy cannot be written.
    """
    faults = store.verify() if settings.service.verify else []
    if settings.service.backup and not faults:
        copy = _copy_of(settings, day)
        copy.parent.mkdir(exist_ok=True)
        store.backup(copy)
    return faults


def _copy_of(settings: Settings, day: dt.date) -> Path:
    return settings.work_folder / BACKUP_FOLDER / f"{settings.store_path.stem}-{day.isoweekday()}.duckdb"
