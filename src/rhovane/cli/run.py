"""Commands that run nights: demo, nightly, recompute."""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from rhovane.cli.entry import Ending, main, settings_at, store_of, utc_now, with_settings, writes_store
from rhovane.cli.wording import night_lines, sent_lines
from rhovane.model import ExitCode

if TYPE_CHECKING:
    from rhovane.settings import Settings
    from rhovane.store import Store

DATE = click.DateTime(formats=["%Y-%m-%d"])


@main.command()
@with_settings
@click.option(
    "--as-of",
    type=DATE,
    default=None,
    help="Last day the night covers, YYYY-MM-DD in standard time; default: yesterday.",
)
@click.option(
    "--send/--no-send", default=True, help="Send what is to be told afterwards, or leave it waiting."
)
@click.option(
    "--catch-up",
    is_flag=True,
    help="Run every night that is due, in order, then check and copy the store: what the service does, once.",
)
def nightly(config: Path, as_of: dt.datetime | None, send: bool, catch_up: bool) -> None:
    """Run the night once: ingest, windows, evidence, alerts, delivery.

    Ends with 3 when nothing new had arrived, and with 4 when part of the night failed.
    """
    from rhovane.pipeline import run_night, send_waiting
    from rhovane.prepare import days_of

    settings = settings_at(config)
    if catch_up:
        if as_of or not send:
            raise click.UsageError(
                "--catch-up takes neither --as-of nor --no-send: the ledger says what is due."
            )
        from rhovane.cli.unattended import catch_up_once

        raise Ending(catch_up_once(settings))
    now = utc_now()
    day = as_of.date() if as_of else days_of(settings.network.standard_offset).last_complete(now)
    with store_of(settings, read_only=False) as store:
        report = run_night(settings, store, as_of=day, now=now)
    click.echo("\n".join(night_lines(report)))
    if send and settings.delivery.channels:
        sent = send_waiting(settings, lambda: store_of(settings, read_only=False), utc_now)
        click.echo("\n".join(sent_lines(sent)))
    raise Ending(report.exit_code)


@main.command()
@writes_store
@click.option(
    "--from",
    "since",
    type=DATE,
    default=None,
    help="First day to compute again, YYYY-MM-DD; default: the first day with readings.",
)
@click.option("--as-of", type=DATE, default=None, help="Last day; default: the last day of the newest night.")
def recompute(settings: Settings, store: Store, since: dt.datetime | None, as_of: dt.datetime | None) -> None:
    """Compute windows, evidence and alerts again from the stored readings, reading no files."""
    from rhovane.pipeline import STEPS, run_night
    from rhovane.prepare import days_of

    now = utc_now()
    last = store.last_finished_night()
    day = as_of.date() if as_of else None
    if day is None:
        day = last.as_of if last else days_of(settings.network.standard_offset).last_complete(now)
    report = run_night(
        settings,
        store,
        as_of=day,
        now=now,
        kind="recompute",
        steps=tuple(step for step in STEPS if step[0] != "ingest"),
        recompute_from=since.date() if since else dt.date.min,
    )
    click.echo("\n".join(night_lines(report)))
    raise Ending(ExitCode.WELL if report.outcome == "complete" else report.exit_code)


@main.command()
@with_settings
@click.option("--seed", type=int, default=7, show_default=True, help="Seed of the invented world.")
@click.option("--events/--no-events", default=True, help="Plant the changes and decoys, or nothing at all.")
@click.option("--nights", type=click.IntRange(min=1), default=None, help="Walk only the first nights.")
@click.option("--fresh", is_flag=True, help="Delete the demo's working folder first and begin again.")
def demo(config: Path, seed: int, events: bool, nights: int | None, fresh: bool) -> None:
    """Walk 18 invented months night by night and end with the alert list."""
    from rhovane.cli.demonstration import Demonstration

    show = Demonstration(config, seed=seed, events=events, fresh=fresh)
    with store_of(show.settings, read_only=False) as store:
        walked = _with_progress(show, store, nights)
        click.echo("\n".join(show.closing_lines(store, walked, utc_now())))


def _with_progress(show: Any, store: Store, nights: int | None) -> Any:
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeElapsedColumn

    console = Console(stderr=True)
    bar = Progress(
        TextColumn("{task.description}"),
        BarColumn(),
        MofNCompleteColumn(),
        TextColumn("nights"),
        TimeElapsedColumn(),
        console=console,
        disable=not console.is_terminal,
    )
    with bar:
        click.echo(show.opening_line(), err=True)
        task = bar.add_task("compiling", total=None)

        def tell(day: dt.date, done: int, total: int) -> None:
            bar.update(task, description=f"night {day}", completed=done, total=total)

        return show.walk(store, nights=nights, tell=tell)
