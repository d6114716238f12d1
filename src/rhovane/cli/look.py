"""Commands that look: alerts, alert, notes, status, export."""

from __future__ import annotations

import dataclasses
import datetime as dt
from pathlib import Path
from typing import TYPE_CHECKING

import click

from rhovane.cli.alert_wording import alert_lines, alert_table, reproduction_lines
from rhovane.cli.entry import Ending, main, print_json, reads_store, utc_now, with_json
from rhovane.cli.wording import caution_lines, count_lines, note_lines, status_lines
from rhovane.model import ExitCode

if TYPE_CHECKING:
    from rhovane.review import AlertEntry
    from rhovane.settings import Settings
    from rhovane.store import Store


MOST_NOTES = 12  # data notes shown under the alert list


@main.command()
@reads_store
@with_json
@click.option("--unreviewed", is_flag=True, help="Only alerts that nobody has acknowledged.")
@click.option(
    "--counts", is_flag=True, help="Counts by week, suspect and outcome; stale and chattering ones."
)
def alerts(settings: Settings, store: Store, as_json: bool, unreviewed: bool, counts: bool) -> None:
    """List the alert log, newest alarm day first."""
    from rhovane.review import alert_entries, current_notes, log_counts

    now = utc_now()
    entries = [e for e in alert_entries(store, now) if e.needs_review or not unreviewed]
    if counts:
        counted = log_counts(entries, now)
        if as_json:
            print_json(counted.as_json())
        else:
            click.echo("\n".join([settings.network.name, *count_lines(counted)]))
        return
    if as_json:
        print_json([e.as_json() for e in entries])
        return
    click.echo(f"{settings.network.name}: {len(entries)} alerts")
    click.echo("\n".join(alert_table(entries)))
    click.echo("\nOne in full: rhovane alert ID")
    noted = current_notes(settings, store)
    if noted:
        click.echo(
            f"\nData notes ({len(noted)}: what is wrong with the data themselves; no data is not no change)"
        )
        click.echo("\n".join(note_lines(noted, settings.network.standard_offset, MOST_NOTES)))


@main.command()
@reads_store
@with_json
@click.option("--all", "everything", is_flag=True, help="Also notes that are over or were withdrawn.")
def notes(settings: Settings, store: Store, as_json: bool, everything: bool) -> None:
    """List data notes: gaps, stuck values, dry gauges, steps in level, pairs not computable.

    Those that last and those begun in the last 7 days; newest first.
    """
    from rhovane.review import all_notes, current_notes, notes_as_json

    found = all_notes(store) if everything else current_notes(settings, store)
    if as_json:
        print_json(notes_as_json(found))
        return
    click.echo(f"{settings.network.name}: {len(found)} data notes (times are standard time)")
    click.echo("\n".join(note_lines(found, settings.network.standard_offset)))


@main.command()
@click.argument("alert_id", metavar="ID", type=int)
@reads_store
@with_json
@click.option(
    "--now", "as_of_now", is_flag=True, help="With all nights and readings so far, not those of its night."
)
@click.option(
    "--reproduce", "again", is_flag=True, help="Compute it again from its stored inputs and compare."
)
def alert(
    settings: Settings, store: Store, alert_id: int, as_json: bool, as_of_now: bool, again: bool
) -> None:
    """Show one alert in full: before and after, counter-evidence, what it rests on, its log.

    With --reproduce ends with 1 when the alert computed again is not the same in every bit.
    """
    from rhovane.review import alert_entry, nearby_entries, provenance_of

    entry = alert_entry(store, alert_id, utc_now())
    if again:
        _reproduce(settings, store, entry, as_json)
        return
    provenance = provenance_of(settings, store, entry.alert)
    if as_of_now:
        from rhovane.pipeline import as_seen_now

        entry = dataclasses.replace(entry, alert=as_seen_now(settings, store, entry.alert, utc_now()))
    around = nearby_entries(settings, store, entry.alert)
    offset = settings.network.standard_offset
    if as_json:
        print_json({**entry.as_json(), **around.as_json(offset), "provenance": provenance.as_json()})
        return
    click.echo("\n".join(alert_lines(entry, provenance, around, offset, now=as_of_now)))
    click.echo("\n" + "\n".join(caution_lines()))


def _reproduce(settings: Settings, store: Store, entry: AlertEntry, as_json: bool) -> None:
    from rhovane.pipeline import reproduce

    found = reproduce(settings, store, entry.alert, utc_now())
    if as_json:
        print_json(found.as_json())
    else:
        click.echo("\n".join(reproduction_lines(found)))
    raise Ending(ExitCode.WELL if found.matches else ExitCode.FAILED)


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
@click.option(
    "--as-of",
    type=click.DateTime(formats=["%Y-%m-%d"]),
    default=None,
    help="Night (its last day, YYYY-MM-DD) whose store is written, without what came later; default: now.",
)
@click.option(
    "--plain", is_flag=True, help="Only the table, without network, cautions and segments above it."
)
def export(
    settings: Settings, store: Store, what: str, file: Path, as_of: dt.datetime | None, plain: bool
) -> None:
    """Write readings, windows or alerts to FILE (.csv, .parquet or .json)."""
    from rhovane.review import export_table

    day = as_of.date() if as_of else None
    rows = export_table(settings, store, what, file, utc_now(), as_of=day, plain=plain)
    click.echo(f"{rows} {what} → {file}")
