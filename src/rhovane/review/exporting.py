"""Readings, windows and alerts as files for other programs."""

from __future__ import annotations

import datetime as dt
import json
from pathlib import Path

from rhovane.model import CAUTION, RhovaneError
from rhovane.review.alert_list import alert_entries
from rhovane.settings import Settings
from rhovane.store import Store


def export_table(settings: Settings, store: Store, what: str, path: Path, now: dt.datetime) -> int:
    """Write one kind of content to a file, and return the number of rows.

    ``what`` is "readings", "windows" or "alerts"; the ending of the name decides the form: .csv and
    .parquet for all, .json for alerts.

    Raises
    ------
    RhovaneError
        The ending is not known, or the folder does not exist.
    """
    if path.suffix.lower() == ".json":
        if what != "alerts":
            raise RhovaneError(f"{path}: {what} are written as .csv or .parquet. Nothing was written.")
        if not path.parent.is_dir():
            raise RhovaneError(f"{path.parent}: no such folder; create it, or name another file.")
        entries = alert_entries(store, now)
        content = {
            "network": settings.network.name,
            "written_at": now.isoformat(),
            "caution": CAUTION,
            "alerts": [e.as_json() for e in entries],
        }
        part = path.with_name(f".{path.name}.part")
        part.write_text(json.dumps(content, indent=2, ensure_ascii=False), encoding="utf-8")
        part.replace(path)
        return len(entries)
    about = f"{settings.network.name}, written {now:%Y-%m-%dT%H:%MZ}. Times are UTC.\n{CAUTION}"
    match what:
        case "readings":
            return store.export_readings(path, about=about)
        case "windows":
            return store.export_windows(path, about=about)
        case _:
            return store.export_alerts(path, about=about)
