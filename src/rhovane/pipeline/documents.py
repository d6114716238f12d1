"""Reports written to files: a night with the sheets of its alerts, or one alert to be handed over."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

from rhovane.model import RhovaneError
from rhovane.pipeline.looking import WatchTracks, alert_sheet, stored_evidence
from rhovane.report import alert_document, night_document
from rhovane.review import alert_entry, morning_of
from rhovane.settings import Settings
from rhovane.store import Store

FOLDER = "reports"  # of the work folder


def night_report(
    settings: Settings,
    store: Store,
    now: dt.datetime,
    night: dt.date | None,
    tracks: WatchTracks | None,
    *,
    as_of: dt.date | None = None,
) -> tuple[dt.date | None, str]:
    """The night's last day, and its report: the morning list and the sheets of the alerts it raised."""
    morning = morning_of(settings, store, now, as_of=as_of, night=night)
    day = None if morning.night is None else morning.night.as_of
    raised = [entry for group in morning.raised for entry in group.entries]
    sheets = [alert_sheet(settings, store, entry, tracks, until=day) for entry in raised]
    judged = None if tracks is None or day is None else tracks.pairs_by_state(day)
    return day, night_document(settings, morning, sheets, now, judged=judged)


def night_file(
    settings: Settings, store: Store, now: dt.datetime, night: dt.date | None, out: Path | None
) -> Path:
    """Write the report of a night (by default the newest), and return the file.

    Raises
    ------
    NotFound
        No night covers up to that day.
    RhovaneError
        No night has run, or the file cannot be written.
    """
    day, text = night_report(settings, store, now, night, _tracks(settings, store, now))
    if day is None:
        raise RhovaneError("No night has run, so there is nothing to report. Run `rhovane nightly`.")
    return _write(settings, out, f"night-{day}.html", text)


def alert_file(settings: Settings, store: Store, alert_id: int, now: dt.datetime, out: Path | None) -> Path:
    """Write the handover sheet of an alert, and return the file.

    Raises
    ------
    NotFound
        There is no such alert.
    RhovaneError
        The file cannot be written.
    """
    entry = alert_entry(store, alert_id, now)
    view = alert_sheet(settings, store, entry, _tracks(settings, store, now))
    return _write(settings, out, f"alert-{alert_id}.html", alert_document(settings, view, now))


def _tracks(settings: Settings, store: Store, now: dt.datetime) -> WatchTracks | None:
    evidence = stored_evidence(settings, store, now)
    return None if evidence is None else evidence.replayed(settings)


def _write(settings: Settings, out: Path | None, name: str, text: str) -> Path:
    """Write a file in one step; a failure leaves an earlier one as it was."""
    path = out or settings.work_folder / FOLDER / name
    part = path.with_name(f".{path.name}.part")
    try:
        if out is None:
            path.parent.mkdir(exist_ok=True)
        part.write_text(text, encoding="utf-8")
        part.replace(path)
    except OSError as error:
        raise RhovaneError(
            f"{path} cannot be written ({error.strerror}); name another file with --out."
        ) from error
    return path
