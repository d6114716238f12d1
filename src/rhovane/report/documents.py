"""Reports as single HTML files: no network, no script, the same sections and pictures as the page."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping, Sequence
from importlib.resources import files

import rhovane
from rhovane.report.rendering import Link, alert_sections, page_environment
from rhovane.review import Morning
from rhovane.review.sheets import AlertSheetView
from rhovane.settings import Settings


def night_document(
    settings: Settings,
    morning: Morning,
    sheets: Sequence[AlertSheetView],
    now: dt.datetime,
    *,
    judged: Mapping[str, Sequence[str]] | None = None,
) -> str:
    """The report of a night: the morning list, and the sheets given, as one HTML file.

    ``judged`` are the pairs by what the watch did with them: learning, watched, changed, not scored.
    """
    inside = {view.entry.alert.id for view in sheets}

    def link(kind: str, key: object) -> str | None:
        return f"#alert-{key}" if kind == "alert" and key in inside else None

    return _document(
        settings,
        "night_report.html",
        link,
        now,
        morning=morning,
        judged=judged,
        sheets=[alert_sections(settings, view) for view in sheets],
    )


def alert_document(settings: Settings, view: AlertSheetView, now: dt.datetime) -> str:
    """The handover sheet of one alert as one HTML file."""
    return _document(
        settings, "handover.html", lambda _kind, _key: None, now, **alert_sections(settings, view)
    )


def _document(settings: Settings, template: str, link: Link, now: dt.datetime, **context: object) -> str:
    environment = page_environment(settings, link, zooms=False)
    style = files("rhovane.report").joinpath("static", "rhovane.css").read_text("utf-8")
    return environment.get_template(template).render(
        style=style, now=now, program_version=rhovane.__version__, **context
    )
