"""The template engine with the words that every page uses, and the pictures that belong to each sheet."""

from __future__ import annotations

import functools
import json
from collections.abc import Callable
from importlib.resources import files
from typing import Any

from jinja2 import Environment, FunctionLoader, StrictUndefined
from markupsafe import Markup

from rhovane.model import CAUTIONS, DEMO_CAUTION
from rhovane.report import words
from rhovane.report.figures import (
    evidence_figure,
    lag_figure,
    readings_figures,
    rolling_figure,
    scatter_figure,
)
from rhovane.report.small_pictures import change_bar, coverage_figure
from rhovane.review import SeriesSheet, note_state, note_words
from rhovane.review.sheets import AlertSheetView, PairSheetView
from rhovane.settings import Settings

DEMO_MARK = "demo-world.txt"
Link = Callable[[str, object], str | None]


def page_environment(
    settings: Settings, link: Link, *, zooms: bool, packages: tuple[str, ...] = ("rhovane.report",)
) -> Environment:
    """Templates of the packages named, the first one first.

    ``link`` gives the address of ("alert" | "pair" | "series" | "night", key), or None where there is none;
    ``zooms`` says whether charts carry their numbers for zooming in a browser. Every value is escaped.
    """
    environment = Environment(
        loader=FunctionLoader(functools.partial(_source, packages)),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters |= {
        "signed": words.signed,
        "unit": words.unit_words,
        "local": lambda moment, pattern="%Y-%m-%d %H:%M": words.local(settings, moment, pattern),
        "state": words.state_words,
        "lasting": words.lasting_words,
        "headline": words.headline,
        "suspect": words.suspect_words,
        "svg": Markup,
        "data_json": data_json,
        "thousands": lambda n: f"{n:,}".replace(",", "\u202f"),
    }
    environment.globals |= {
        "link": link,
        "zooms": zooms,
        "settings": settings,
        "network": settings.network.name,
        "clock": words.clock_words(settings),
        "statistic": words.statistic_name(settings),
        "interval": words.interval,
        "change_bar": lambda alert: Markup(change_bar(alert.before, alert.after)),
        "estimate": lambda one: words.estimate_words(one, words.statistic_name(settings)),
        "recipe_words": lambda recipe: words.recipe_words(settings, recipe),
        "apart": intervals_apart,
        "note_words": note_words,
        "note_state": note_state,
        "cautions": demo_cautions(settings) + CAUTIONS,
        "is_demo": is_demo(settings),
        "series_label": {s.key: s.label for s in settings.series},
    }
    return environment


def _source(packages: tuple[str, ...], name: str) -> tuple[str, str, Callable[[], bool]] | None:
    for package in packages:
        found = files(package).joinpath("templates", name)
        if found.is_file():
            return found.read_text("utf-8"), name, lambda: True
    return None


def is_demo(settings: Settings) -> bool:
    """Whether the working folder was made by the demo."""
    return (settings.work_folder / DEMO_MARK).is_file()


def demo_cautions(settings: Settings) -> tuple[str, ...]:
    """What must be said of demo data; nothing of others."""
    return (DEMO_CAUTION,) if is_demo(settings) else ()


def data_json(value: Any) -> Markup:
    """Plain values as JSON that is safe inside a script element of data."""
    text = json.dumps(value, allow_nan=False, separators=(",", ":"))
    return Markup(text.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026"))


def intervals_apart(before: Any, after: Any) -> str:
    """Whether the two 95 % intervals of an alert touch, in words."""
    ends = (before.low, before.high, after.low, after.high)
    if any(end is None for end in ends):
        return "one side has no interval"
    return (
        "the intervals are apart"
        if before.high < after.low or after.high < before.low
        else "the intervals overlap"
    )


def alert_sections(settings: Settings, view: AlertSheetView) -> dict[str, Any]:
    """What the sections of an alert sheet need: the view and its pictures."""
    figures = []
    if view.pictures is not None:
        name, entries = f"alert-{view.entry.alert.id}", (view.entry,)
        found = [rolling_figure(settings, view.pictures, entries, f"{name}-rolling")]
        if view.before is not None and view.after is not None:
            found.append(scatter_figure(settings, view.pictures, view.before, view.after, view.entry))
        found.append(evidence_figure(settings, view.pictures, entries, f"{name}-evidence"))
        found.append(lag_figure(settings, view.pictures, entries, f"{name}-lags"))
        if view.readings is not None:
            found += readings_figures(
                settings, view.pictures, view.readings, view.entry.alert.onset_day, f"{name}-readings"
            )
        figures = [one for one in found if one is not None]
    evidence_known = view.pictures is None or view.pictures.evidence is not None
    return {
        "view": view,
        "entry": view.entry,
        "alert": view.entry.alert,
        "figures": figures,
        "evidence_known": evidence_known,
    }


def pair_sections(settings: Settings, view: PairSheetView) -> dict[str, Any]:
    """What the sections of a pair sheet need."""
    found = [
        rolling_figure(settings, view.pictures, view.entries, "pair-rolling"),
        evidence_figure(settings, view.pictures, view.entries, "pair-evidence"),
        lag_figure(settings, view.pictures, view.entries, "pair-lags"),
    ]
    return {
        "view": view,
        "recipe": view.pictures.recipe,
        "figures": [one for one in found if one is not None],
        "evidence_known": view.pictures.evidence is not None,
    }


def series_sections(settings: Settings, sheet: SeriesSheet) -> dict[str, Any]:
    """What the sections of a series sheet need."""
    return {"sheet": sheet, "figures": [coverage_figure(sheet.days, settings.correlation.accepted_flags)]}
