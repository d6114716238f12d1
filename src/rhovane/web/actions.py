"""Pages that write: a decision on an alert, an entry of the site log. Each appends; nothing is changed or deleted."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from typing import Any
from urllib.parse import quote

from starlette.requests import Request
from starlette.responses import RedirectResponse, Response

from rhovane.model import EventKind, NotFound, Outcome, RhovaneError, StoreLocked
from rhovane.review import add_site_log_entry, alert_entry, record_decision
from rhovane.web.guard import cookie
from rhovane.web.pages import alert_page, site_log_context
from rhovane.web.site import PERSON_COOKIE, Site

LONGEST_NOTE = 8000  # characters
LONGEST_NAME = 80
A_YEAR_S = 365 * 86_400


def actions(site: Site) -> dict[str, Callable[[Request], Response]]:
    """All pages that write, by path."""

    def decide(request: Request) -> Response:
        number = request.path_params["number"]
        form: dict[str, str] = request.state.form
        now = site.clock()
        try:
            kind, payload = decision(form)
            with site.open(read_only=False) as store:
                record_decision(
                    store,
                    number,
                    kind,
                    now=now,
                    who=form.get("who", "").strip()[:LONGEST_NAME],
                    note=form.get("note", "").strip(),
                    payload=payload,
                )
        except (NotFound, StoreLocked) as error:
            return site.trouble(request, error, kept=form.get("note", ""))
        except RhovaneError as error:
            return _again(site, request, number, str(error), form)
        return _done(f"/alert/{number}?recorded=1#log-{number}", form)

    def log_entry(request: Request) -> Response:
        form: dict[str, str] = request.state.form
        cells = {name: form.get(name, "").strip() for name in ("subject", "from", "to", "what", "readings")}
        try:
            _limited(cells["what"])
            with site.open(read_only=False) as store:
                add_site_log_entry(
                    site.settings,
                    store,
                    cells,
                    who=form.get("who", "").strip()[:LONGEST_NAME],
                    now=site.clock(),
                )
        except StoreLocked as error:
            return site.trouble(request, error, kept=form.get("what", ""))
        except RhovaneError as error:
            with site.open() as store:
                context = site_log_context(site, store)
            return site.page(
                request, "site_log.html", 409, **{**context, "refused": str(error), "given": form}
            )
        return _done("/sitelog", form)

    return {"/alert/{number:int}/record": decide, "/sitelog": log_entry}


def decision(form: dict[str, str]) -> tuple[EventKind, dict[str, Any]]:
    """What a form decides, as an event of the log.

    Raises
    ------
    RhovaneError
        A choice is missing or not known; says which, and what is allowed.
    """
    note = form.get("note", "").strip()
    _limited(note)
    if not form.get("who", "").strip():
        raise RhovaneError("A decision needs a name: write yours. Nothing was written.")
    match form.get("decision", ""):
        case "acknowledge":
            return EventKind.ACKNOWLEDGED, {}
        case "shelve":
            return EventKind.SHELVED, {"until": _a_day(form.get("until", ""), "Shelving needs an end:")}
        case "outcome":
            found = form.get("outcome", "")
            known = [o.value for o in Outcome]
            if found not in known:
                raise RhovaneError(f"Choose an outcome: {', '.join(known)}. Nothing was written.")
            payload: dict[str, Any] = {"outcome": found}
            if form.get("fault_until", "").strip():
                payload["until"] = _a_day(form["fault_until"], "The last day at fault")
            if form.get("new_baseline") == "yes":
                payload["new_baseline"] = True
            return EventKind.OUTCOME, payload
        case "note":
            if not note:
                raise RhovaneError("The note is empty: write what you saw. Nothing was written.")
            return EventKind.NOTE, {}
        case other:
            raise RhovaneError(
                f"{other!r} is no decision: choose acknowledge, shelve, outcome or note. Nothing was written."
            )


def _a_day(text: str, what: str) -> str:
    try:
        return dt.date.fromisoformat(text.strip()).isoformat()
    except ValueError:
        raise RhovaneError(
            f"{what} {text.strip()!r} is not a day; choose one, as 2025-04-30. Nothing was written."
        ) from None


def _limited(text: str) -> None:
    if len(text) > LONGEST_NOTE:
        raise RhovaneError(
            f"The text has {len(text)} characters; at most {LONGEST_NOTE} are kept. Shorten it. Nothing was written."
        )


def _again(site: Site, request: Request, number: int, refused: str, form: dict[str, str]) -> Response:
    """The sheet again, with what was wrong and what was typed."""
    now = site.clock()
    with site.open() as store:
        entry = alert_entry(store, number, now)
        return alert_page(site, request, store, entry, now, status=409, refused=refused, given=form)


def _done(where: str, form: dict[str, str]) -> Response:
    """On to the page that shows what was written; the name is remembered in this browser."""
    response = RedirectResponse(where, 303)
    name = quote(form.get("who", "").strip()[:LONGEST_NAME], safe="")
    response.headers.append("set-cookie", cookie(PERSON_COOKIE, name, seconds=A_YEAR_S))
    return response
