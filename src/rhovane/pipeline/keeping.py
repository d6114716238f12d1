"""After the night: is the store whole, and a copy of it for the case that it is not one day."""

from __future__ import annotations

import datetime as dt

from rhovane.settings import Settings
from rhovane.store import Store, back_up, copies_in, read_manifest


def copy_due(settings: Settings, store: Store, day: dt.date) -> bool:
    """Whether the copy of a day is missing or lacks a night that the store holds, because something came in between."""
    if not settings.service.backup:
        return False
    copy = copies_in(settings.backup_folder, settings.store_path).get(day)
    held = None if copy is None else read_manifest(copy)
    return held is None or held.nights < store.holds().nights


def keep_store(settings: Settings, store: Store, day: dt.date) -> list[str]:
    """Verify the store and, if it is whole, copy it, as the settings say; the faults found, in words.

    As many copies are kept as the settings say. A store with faults is not copied.

    Raises
    ------
    RhovaneError
        The store cannot be read, or the copy cannot be written.
    """
    faults = store.verify() if settings.service.verify else []
    if settings.service.backup and not faults:
        keep = settings.backup
        back_up(store, settings.backup_folder, day, daily=keep.daily, weekly=keep.weekly)
    return faults
