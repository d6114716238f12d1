"""Commands that look: alerts, alert, status, export."""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import TYPE_CHECKING

import click

from rhovane.cli.entry import Ending, main, print_json, reads_store, utc_now, with_json
from rhovane.cli.wording import alert_lines, alert_table, caution_lines, status_lines

if TYPE_CHECKING:
    from rhovane.settings import Settings
    from rhovane.store import Store


@main.command()
@reads_store
@with_json
@click.option("--unreviewed", is_flag=True, help="Only alerts that nobody has acknowledged.")
def alerts(settings: Settings, store: Store, as_json: bool, unreviewed: bool) -> None:
    """List the alert log, newest alarm day first."""
    from rhovane.review import alert_entries

    entries = [e for e in alert_entries(store, utc_now()) if e.needs_review or not unreviewed]
    if as_json:
        print_json([e.as_json() for e in entries])
        return
    click.echo(f"{settings.network.name}: {len(entries)} alerts")
    click.echo("\n".join(alert_table(entries)))
    click.echo("\nOne in full: rhovane alert ID")


@main.command()
@click.argument("alert_id", metavar="ID", type=int)
@reads_store
@with_json
def alert(store: Store, alert_id: int, as_json: bool) -> None:
    """Show one alert in full: before and after, evidence, what it rests on, its log."""
    from rhovane.review import alert_entry

    entry = alert_entry(store, alert_id, utc_now())
    if as_json:
        print_json(entry.as_json())
        return
    click.echo("\n".join(alert_lines(entry)))
    click.echo("\n" + "\n".join(caution_lines()))


@main.command()
@reads_store
@with_json
@click.option(
    "--as-of",
    type=click.DateTime(formats=["%Y-%m-%d"]),
    default=None,
    help="Judge missed nights and silent series as of this day; default: yesterday.",
)
def status(settings: Settings, store: Store, as_json: bool, as_of: dt.datetime | None) -> None:
    """Say whether the night ran, what arrived, and what is silent for lack of data.

    Ends with 4 when no night has run, nights were missed, or the last one was incomplete; with 7 when the watch
    itself needs looking after: service, clock, disk, deliveries.
    """
    from rhovane.review import network_status

    now = utc_now()
    found = network_status(settings, store, now, as_of=as_of.date() if as_of else None)
    if as_json:
        print_json(found.as_json())
    else:
        click.echo("\n".join(status_lines(found, now)))
    raise Ending(found.exit_code)


@main.command()
@click.argument("what", type=click.Choice(["readings", "windows", "alerts"]))
@click.argument("file", type=click.Path(path_type=Path, dir_okay=False))
@reads_store
def export(settings: Settings, store: Store, what: str, file: Path) -> None:
    """Write readings, windows or alerts to FILE (.csv, .parquet or .json)."""
    from rhovane.review import export_table

    rows = export_table(settings, store, what, file, utc_now())
    click.echo(f"{rows} {what} → {file}")
