"""The page as an ASGI application."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from importlib.resources import files

from starlette.applications import Starlette
from starlette.requests import Request
from starlette.responses import PlainTextResponse, Response
from starlette.routing import Route

from rhovane.model import NotFound
from rhovane.settings import Settings
from rhovane.web.actions import actions
from rhovane.web.downloads import TABLES, downloads
from rhovane.web.guard import Guard
from rhovane.web.matrix import shade_class
from rhovane.web.pages import moved, pages
from rhovane.web.site import Site

STATIC = {
    "rhovane.css": ("rhovane.report", "text/css; charset=utf-8"),
    "uPlot.min.css": ("rhovane.web", "text/css; charset=utf-8"),
    "uPlot.iife.min.js": ("rhovane.web", "text/javascript; charset=utf-8"),
    "zoom.js": ("rhovane.web", "text/javascript; charset=utf-8"),
    "icon.svg": ("rhovane.web", "image/svg+xml"),
    "uPlot-LICENSE.txt": ("rhovane.web", "text/plain; charset=utf-8"),
}
LOOPBACK_NAMES = ("127.0.0.1", "localhost", "[::1]")


def make_app(
    settings: Settings,
    *,
    token: str | None,
    clock: Callable[[], dt.datetime],
    hosts: frozenset[str] | None = None,
    as_of: dt.date | None = None,
    replay_wait_s: float = 0.05,
) -> Guard:
    """The page of a network as an ASGI application.

    Parameters
    ----------
    settings : Settings
        Of the network whose store is shown; the store is opened anew for every request.
    token : str or None
        What a person has to enter before anything is shown; None only on a loopback address.
    clock : callable
        The moment now (aware, UTC).
    hosts : frozenset of str, optional
        Values of the Host header that name this page, lower case, with the port; default: loopback names
        without a port.
    as_of : date, optional
        Judge missed nights as of this day; default: the last complete day.
    replay_wait_s : float
        Seconds that a sheet waits for the replay of the watch before it is shown without it.
    """
    site = Site(settings, clock, as_of, replay_wait_s)
    site.environment.globals |= {"tables": TABLES, "shade_class": shade_class}
    routes = [Route(path, page, methods=["GET"]) for path, page in {**pages(site), **downloads(site)}.items()]
    routes += [Route(path, action, methods=["POST"]) for path, action in actions(site).items()]
    routes += [Route("/static/{name}", static_file), Route("/favicon.ico", moved)]

    def not_found(request: Request, _error: Exception) -> Response:
        return site.trouble(request, NotFound("There is no such page. The menu lists those there are."))

    app = Starlette(routes=routes, exception_handlers={404: not_found})
    app.state.site = site
    return Guard(app, hosts=hosts or frozenset(LOOPBACK_NAMES), token=token, clock=clock)


def static_file(request: Request) -> Response:
    """A file that belongs to the page; only those listed."""
    name = request.path_params["name"]
    if name not in STATIC:
        return PlainTextResponse("There is no such file.\n", 404)
    package, media_type = STATIC[name]
    content = files(package).joinpath("static", name).read_bytes()
    return Response(content, media_type=media_type, headers={"cache-control": "max-age=3600"})
