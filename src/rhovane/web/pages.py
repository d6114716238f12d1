"""Pages that look: each opens the store, asks review or pipeline one question, and fills a template."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from typing import Any

from starlette.requests import Request
from starlette.responses import RedirectResponse, Response

from rhovane.model import NotFound, Outcome, ReadingsUse, RhovaneError
from rhovane.pipeline.looking import alert_sheet, pair_sheet
from rhovane.report import alert_sections, pair_sections, series_sections
from rhovane.review import (
    AlertEntry,
    Morning,
    alert_entries,
    alert_entry,
    log_counts,
    morning_of,
    pairs_now,
    series_sheet,
)
from rhovane.store import Store
from rhovane.web.matrix import matrix_blocks
from rhovane.web.site import Site

NIGHTS_SHOWN = 60
SERIES_DAYS = 548  # days of the coverage calendar: a year and a half

Page = Callable[[Request], Response]


def pages(site: Site) -> dict[str, Page]:
    """All pages that look, by path."""

    def looking(answer: Callable[[Request, Store, dt.datetime], Response]) -> Page:
        def page(request: Request) -> Response:
            now = site.clock()
            try:
                with site.open() as store:
                    return answer(request, store, now)
            except NotFound as error:
                if not site.settings.store_path.exists():
                    return site.page(request, "no_store.html", 200, words=str(error))
                return site.trouble(request, error)
            except RhovaneError as error:
                return site.trouble(request, error)

        return page

    def morning(request: Request, store: Store, now: dt.datetime) -> Response:
        found = morning_of(site.settings, store, now, as_of=site.as_of)
        site.begin_replay(store, now)  # so that the sheets, opened next, have it
        return list_page(request, store, found)

    def night(request: Request, store: Store, now: dt.datetime) -> Response:
        day = day_of_text(request.path_params["day"])
        return list_page(request, store, morning_of(site.settings, store, now, as_of=site.as_of, night=day))

    def list_page(request: Request, store: Store, found: Morning) -> Response:
        last = store.last_finished_night()
        tracks = None if last is None else site.replayed.of(last.night_id, waiting=False)
        judged = None if tracks is None or found.night is None else tracks.pairs_by_state(found.night.as_of)
        return site.page(request, "morning.html", morning=found, judged=judged)

    def alert(request: Request, store: Store, now: dt.datetime) -> Response:
        entry = alert_entry(store, request.path_params["number"], now)
        return alert_page(site, request, store, entry, now)

    def pair(request: Request, store: Store, now: dt.datetime) -> Response:
        view = pair_sheet(site.settings, store, _key(request), now, site.tracks(store, now))
        return site.page(request, "pair.html", **pair_sections(site.settings, view))

    def one_series(request: Request, store: Store, now: dt.datetime) -> Response:
        last = store.last_finished_night()
        day = site.today(now) if last is None else min(site.today(now), last.as_of)
        entries = alert_entries(store, now)
        sheet = series_sheet(site.settings, store, _key(request), entries, last=day, n_days=SERIES_DAYS)
        return site.page(request, "one_series.html", **series_sections(site.settings, sheet))

    def all_series(request: Request, store: Store, now: dt.datetime) -> Response:
        last = store.last_hours(now + dt.timedelta(days=36_500))
        source = {key: s.name for s in site.settings.source for key in s.series.values()}
        return site.page(request, "series.html", last=last, source=source)

    def matrix(request: Request, store: Store, now: dt.datetime) -> Response:
        found = pairs_now(site.settings, store, alert_entries(store, now))
        newest = store.last_finished_night()
        return site.page(request, "pairs.html", blocks=matrix_blocks(found), pairs=found, newest=newest)

    def nights(request: Request, store: Store, now: dt.datetime) -> Response:
        raised: dict[int, list[AlertEntry]] = {}
        for entry in alert_entries(store, now):
            raised.setdefault(entry.alert.night_id, []).append(entry)
        return site.page(request, "nights.html", nights=store.nights(NIGHTS_SHOWN), raised=raised)

    def site_log(request: Request, store: Store, _now: dt.datetime) -> Response:
        return site.page(request, "site_log.html", **site_log_context(site, store))

    def statistics(request: Request, store: Store, now: dt.datetime) -> Response:
        entries = alert_entries(store, now)
        return site.page(request, "statistics.html", counts=log_counts(entries, now), entries=entries)

    def downloads(request: Request, store: Store, _now: dt.datetime) -> Response:
        last = store.last_finished_night()
        return site.page(request, "downloads.html", newest=last)

    return {
        "/": looking(morning),
        "/night/{day}": looking(night),
        "/alert/{number:int}": looking(alert),
        "/pairs": looking(matrix),
        "/pair": looking(pair),
        "/series": looking(all_series),
        "/one-series": looking(one_series),
        "/nights": looking(nights),
        "/sitelog": looking(site_log),
        "/statistics": looking(statistics),
        "/downloads": looking(downloads),
        "/enter": lambda request: _enter(site, request),
    }


def alert_page(
    site: Site,
    request: Request,
    store: Store,
    entry: AlertEntry,
    now: dt.datetime,
    *,
    status: int = 200,
    refused: str = "",
    given: dict[str, str] | None = None,
) -> Response:
    """The sheet of one alert with its form; ``given`` are fields to be shown again after a refusal."""
    view = alert_sheet(site.settings, store, entry, site.tracks(store, now))
    waiting = [e for e in alert_entries(store, now) if e.needs_review and e.alert.id != entry.alert.id]
    return site.page(
        request,
        "alert.html",
        status,
        outcomes=list(Outcome),
        waiting=waiting,
        refused=refused,
        given=given or {},
        recorded=request.query_params.get("recorded") == "1",
        tomorrow=now.date() + dt.timedelta(days=1),
        **alert_sections(site.settings, view),
    )


def site_log_context(site: Site, store: Store) -> dict[str, Any]:
    """What the page of the site log shows, the newest entry first."""
    series = [s.key for s in site.settings.series]
    return {
        "log": list(reversed(store.site_log())),
        "subjects": ["*", *sorted({key.partition(".")[0] for key in series}), *series],
        "uses": [use.value for use in ReadingsUse],
        "refused": "",
        "given": {},
    }


def _enter(site: Site, request: Request) -> Response:
    return site.page(request, "enter.html", wrong="wrong" in request.query_params)


def _key(request: Request) -> str:
    return request.query_params.get("key", "")


def day_of_text(text: str) -> dt.date:
    try:
        return dt.date.fromisoformat(text)
    except ValueError:
        raise NotFound(f"{text!r} is not a day; write it as 2025-10-09.") from None


def moved(_request: Request) -> Response:
    """Browsers ask for an icon; there is none."""
    return RedirectResponse("/static/icon.svg", 301)
