"""After the night: is the store whole, and a copy of it for the case that it is not one day."""

from __future__ import annotations

import datetime as dt

from rhovane.settings import Settings
from rhovane.store import Store

BACKUP_FOLDER = "backup"


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
        folder = settings.work_folder / BACKUP_FOLDER
        folder.mkdir(exist_ok=True)
        store.backup(folder / f"{settings.store_path.stem}-{day.isoweekday()}.duckdb")
    return faults
