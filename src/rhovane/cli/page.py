"""Commands for the morning: the local page, and the report of a night or an alert as one file."""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import TYPE_CHECKING

import click

from rhovane.cli.entry import main, reads_store, settings_at, utc_now, with_settings
from rhovane.model import RhovaneError

if TYPE_CHECKING:
    from rhovane.settings import Settings
    from rhovane.store import Store

DATE = click.DateTime(formats=["%Y-%m-%d"])


@main.command()
@with_settings
@click.option(
    "--host",
    default="127.0.0.1",
    show_default=True,
    help="Address to listen on; others than this machine's own need a token.",
)
@click.option(
    "--port", type=click.IntRange(0, 65535), default=8321, show_default=True, help="Port; 0 takes a free one."
)
@click.option(
    "--name",
    "names",
    multiple=True,
    help="A further name by which browsers reach this page; may be given again.",
)
@click.option(
    "--token-file",
    type=click.Path(path_type=Path, dir_okay=False, exists=True),
    default=None,
    help="File with the token that everybody has to enter.",
)
@click.option(
    "--as-of", type=DATE, default=None, help="Judge missed nights as of this day; default: yesterday."
)
def page(
    config: Path,
    host: str,
    port: int,
    names: tuple[str, ...],
    token_file: Path | None,
    as_of: dt.datetime | None,
) -> None:
    """Serve the morning list, alert sheets and log as a local page; Ctrl-C ends it."""
    from rhovane.web import PageServer

    token = None if token_file is None else token_file.read_text("utf-8").strip()
    server = PageServer(
        settings_at(config),
        host=host,
        port=port,
        token=token,
        clock=utc_now,
        names=names,
        as_of=as_of.date() if as_of else None,
    )
    click.echo(f"The page is at {server.address}  (Ctrl-C ends it)")
    server.run()


@main.command()
@reads_store
@click.option(
    "--night", type=DATE, default=None, help="The night by the last day it covers; default: the newest."
)
@click.option(
    "--alert", "alert_id", type=int, default=None, help="Write the handover sheet of this alert instead."
)
@click.option(
    "--out",
    type=click.Path(path_type=Path, dir_okay=False),
    default=None,
    help="File to write; default: night-DATE.html or alert-ID.html in the folder reports of the work folder.",
)
def report(
    settings: Settings,
    store: Store,
    night: dt.datetime | None,
    alert_id: int | None,
    out: Path | None,
) -> None:
    """Write a night, or one alert, as one HTML file that opens without network."""
    from rhovane.pipeline.documents import alert_file, night_file

    if night is not None and alert_id is not None:
        raise RhovaneError("Give --night or --alert, not both. Nothing was written.")
    now = utc_now()
    if alert_id is not None:
        written = alert_file(settings, store, alert_id, now, out)
    else:
        written = night_file(settings, store, now, None if night is None else night.date(), out)
    click.echo(f"Written: {written}")
