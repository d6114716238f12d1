"""Readings, windows and alerts as files for other programs, now or as a past night saw them."""

from __future__ import annotations

import datetime as dt
import json
from pathlib import Path

from rhovane.model import CAUTION, RhovaneError
from rhovane.review.alert_list import alert_entries, alert_entries_of
from rhovane.settings import Settings
from rhovane.store import NightRecord, Store


def export_table(
    settings: Settings,
    store: Store,
    what: str,
    path: Path,
    now: dt.datetime,
    *,
    as_of: dt.date | None = None,
    plain: bool = False,
) -> int:
    """Write one kind of content to a file, and return the number of rows.

    Parameters
    ----------
    what : "readings", "windows" or "alerts"
    path : the ending of the name decides the form: .csv, .parquet or .json
    as_of : the night (by the last day it covers) as whose store the content is written; default: as it is now
    plain : leave out network, night, segments and cautions

    Raises
    ------
    RhovaneError
        The ending is not known, or the folder does not exist.
    NotFound
        No night of ``as_of`` has finished.
    """
    night = None if as_of is None else store.night_of(as_of)
    if what == "alerts" and path.suffix.lower() == ".json":
        return _alert_list(settings, store, path, now, night)
    about = "" if plain else "\n".join(_about(settings, store, what, now, night))
    match what:
        case "readings":
            return store.export_readings(path, night=night, about=about)
        case "windows":
            return store.export_windows(path, night=night, about=about)
        case _:
            return store.export_alerts(path, night=night, about=about)


def _about(
    settings: Settings, store: Store, what: str, now: dt.datetime, night: NightRecord | None
) -> list[str]:
    """What stands above a table: whose data, as of when, segments of the series, cautions."""
    lines = [f"{settings.network.name}, written {now:%Y-%m-%dT%H:%MZ}. Times are UTC."]
    if night is not None:
        lines.append(
            f"As the night of {night.as_of} left it (ledger {night.night_id}, readings up to ingest "
            f"{night.data_version}); nothing that came later."
        )
    if what == "readings":
        in_force = store.segments(at=now if night is None else night.finished)
        lines += [f"Segment: {g.key} from {g.first_day} (standard time): {g.what}" for g in in_force]
    return [*lines, CAUTION]


def _alert_list(
    settings: Settings, store: Store, path: Path, now: dt.datetime, night: NightRecord | None
) -> int:
    """Write the alerts with their events and states, as the list shows them."""
    if not path.parent.is_dir():
        raise RhovaneError(f"{path.parent}: no such folder; create it, or name another file.")
    entries = alert_entries(store, now) if night is None else alert_entries_of(store, night)
    content = {
        "network": settings.network.name,
        "written_at": now.isoformat(),
        "as_of_night": None if night is None else night.as_of.isoformat(),
        "caution": CAUTION,
        "alerts": [e.as_json() for e in entries],
    }
    part = path.with_name(f".{path.name}.part")
    part.write_text(json.dumps(content, indent=2, ensure_ascii=False), encoding="utf-8")
    part.replace(path)
    return len(entries)
