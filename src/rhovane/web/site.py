"""What all pages share: settings, clock, templates, the store opened for one request, and errors as pages."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any
from urllib.parse import quote, unquote

from jinja2 import Environment
from starlette.requests import Request
from starlette.responses import HTMLResponse, Response

import rhovane
from rhovane.model import NotFound, RhovaneError, StoreDamaged, StoreLocked
from rhovane.pipeline.looking import WatchTracks, stored_evidence
from rhovane.prepare import days_of
from rhovane.report import page_environment
from rhovane.settings import Settings
from rhovane.store import Store, open_store
from rhovane.web.tracks import ReplayedWatch

LONGEST_WAIT_S = 2.0  # seconds a page waits for another process before it says who holds the store
PERSON_COOKIE = "rhovane_person"
MENU = (
    ("/", "Morning list"),
    ("/pairs", "Pair matrix"),
    ("/series", "Series"),
    ("/nights", "Night ledger"),
    ("/sitelog", "Site log"),
    ("/statistics", "Alert log"),
    ("/downloads", "Downloads"),
)


def address(kind: str, key: object) -> str | None:
    """The address of a page about one thing."""
    text = quote(str(key), safe="")
    return {
        "alert": f"/alert/{text}",
        "pair": f"/pair?key={text}",
        "series": f"/one-series?key={text}",
        "night": f"/night/{text}",
    }.get(kind)


@dataclass
class Site:
    """The page of one network. ``as_of`` is the day the newest night should cover (None: the last complete day)."""

    settings: Settings
    clock: Callable[[], dt.datetime]
    as_of: dt.date | None
    replay_wait_s: float
    replayed: ReplayedWatch = field(init=False)
    environment: Environment = field(init=False)

    def __post_init__(self) -> None:
        self.replayed = ReplayedWatch(self.settings, wait_s=self.replay_wait_s)
        self.environment = page_environment(
            self.settings, address, zooms=True, packages=("rhovane.web", "rhovane.report")
        )
        self.environment.globals |= {"menu": MENU, "program_version": rhovane.__version__}

    def open(self, *, read_only: bool = True) -> Store:
        """The store, for one request."""
        given = self.settings.store
        return open_store(
            self.settings.store_path,
            lock_wait_s=min(given.lock_wait_s, LONGEST_WAIT_S),
            memory_limit_mb=given.memory_limit_mb,
            threads=given.threads,
            read_only=read_only,
        )

    def begin_replay(self, store: Store, now: dt.datetime) -> int | None:
        """Have the newest finished night replayed for the pictures of evidence; its number, None before the first."""
        last = store.last_finished_night()
        if last is None:
            return None
        if not self.replayed.knows(last.night_id):
            evidence = stored_evidence(self.settings, store, now)
            if evidence is not None:
                self.replayed.begin(evidence)
        return last.night_id

    def tracks(self, store: Store, now: dt.datetime) -> WatchTracks | None:
        """The watch replayed for the newest night, as far as it is there."""
        night_id = self.begin_replay(store, now)
        return None if night_id is None else self.replayed.of(night_id)

    def today(self, now: dt.datetime) -> dt.date:
        """The last day that a night could cover."""
        return self.as_of or days_of(self.settings.network.standard_offset).last_complete(now)

    def page(self, request: Request, template: str, status: int = 200, **context: Any) -> Response:
        """A page from a template."""
        text = self.environment.get_template(template).render(
            here=request.url.path,
            form_token=request.state.form_token,
            person=person_of(request),
            now=self.clock(),
            **context,
        )
        return HTMLResponse(text, status)

    def trouble(self, request: Request, error: RhovaneError, **context: Any) -> Response:
        """An error of ours as a page that says what is wrong and what to do."""
        status, title = 409, "That cannot be done"
        if isinstance(error, StoreLocked):
            status, title = 503, "The store is in use"
        elif isinstance(error, StoreDamaged):
            status, title = 500, "The store is damaged"
        elif isinstance(error, NotFound):
            status, title = 404, "Not found"
        response = self.page(
            request, "trouble.html", status, title=title, words=str(error), **{"kept": "", **context}
        )
        if isinstance(error, StoreLocked):
            response.headers["retry-after"] = "5"
        return response


def person_of(request: Request) -> str:
    """The name this browser gave last; empty before the first."""
    return unquote(request.state.cookies.get(PERSON_COOKIE, ""))[:80]
