"""Files to take away: tables, reports. Only names listed here are served; none is a path."""

from __future__ import annotations

import shutil
import tempfile
from collections.abc import Callable
from pathlib import Path

from starlette.background import BackgroundTask
from starlette.requests import Request
from starlette.responses import FileResponse, JSONResponse, Response

from rhovane.model import CAUTION, NotFound, RhovaneError
from rhovane.pipeline.documents import night_report
from rhovane.pipeline.looking import alert_sheet
from rhovane.report import alert_document
from rhovane.review import alert_entry, export_table
from rhovane.web.pages import day_of_text
from rhovane.web.site import Site

TABLES = {
    "readings": ("csv", "parquet", "json"),
    "windows": ("csv", "parquet", "json"),
    "alerts": ("csv", "parquet", "json"),
}


def downloads(site: Site) -> dict[str, Callable[[Request], Response]]:
    """All files, by path."""

    def guarded(answer: Callable[[Request], Response]) -> Callable[[Request], Response]:
        def page(request: Request) -> Response:
            try:
                return answer(request)
            except RhovaneError as error:
                return site.trouble(request, error)

        return page

    def table(request: Request) -> Response:
        what, form = request.path_params["what"], request.path_params["form"]
        if form not in TABLES.get(what, ()):
            raise NotFound(f"{what}.{form} is not among the downloads.")
        folder = Path(tempfile.mkdtemp(prefix="rhovane-"))
        try:
            with site.open() as store:
                export_table(site.settings, store, what, folder / f"{what}.{form}", site.clock())
        except BaseException:
            shutil.rmtree(folder)
            raise
        return FileResponse(
            folder / f"{what}.{form}",
            filename=f"rhovane-{what}.{form}",
            media_type="application/octet-stream",
            background=BackgroundTask(shutil.rmtree, folder),
        )

    def night(request: Request) -> Response:
        day, now = day_of_text(request.path_params["day"]), site.clock()
        with site.open() as store:
            tracks = site.tracks(store, now)
            _, document = night_report(site.settings, store, now, day, tracks, as_of=site.as_of)
        return _attached(document, f"night-{day}.html")

    def alert(request: Request) -> Response:
        number, now = request.path_params["number"], site.clock()
        with site.open() as store:
            view = alert_sheet(site.settings, store, alert_entry(store, number, now), site.tracks(store, now))
        return _attached(alert_document(site.settings, view, now), f"alert-{number}.html")

    def alert_json(request: Request) -> Response:
        number, now = request.path_params["number"], site.clock()
        with site.open() as store:
            entry = alert_entry(store, number, now)
        content = {"network": site.settings.network.name, "caution": CAUTION, "alert": entry.as_json()}
        name = f"alert-{number}.json"
        return JSONResponse(content, headers={"content-disposition": f'attachment; filename="{name}"'})

    return {
        "/download/{what}.{form}": guarded(table),
        "/report/night/{day}": guarded(night),
        "/report/alert/{number:int}": guarded(alert),
        "/report/alert/{number:int}.json": guarded(alert_json),
    }


def _attached(document: str, name: str) -> Response:
    return Response(
        document,
        media_type="text/html; charset=utf-8",
        headers={"content-disposition": f'attachment; filename="{name}"'},
    )
