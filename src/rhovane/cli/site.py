"""The command about the site log: list it, add to it, withdraw from it."""

from __future__ import annotations

import getpass
from pathlib import Path

import click

from rhovane.cli.entry import main, print_json, settings_at, store_of, utc_now, with_json, with_settings
from rhovane.cli.wording import site_log_lines
from rhovane.model import RhovaneError


@main.command()
@with_settings
@with_json
@click.option("--add", "subject", default=None, help="Series, station or * that a new entry concerns.")
@click.option(
    "--from", "start", default="", help="New entry: YYYY-MM-DD or 'YYYY-MM-DD HH:MM', standard time."
)
@click.option(
    "--to", "end", default="", help="New entry: its end, a date included; left out: it still goes on."
)
@click.option("--what", default="", help="New entry: what happened, in a few words.")
@click.option("--readings", default="", help="New entry: 'as usual', 'no reference' (default) or 'not used'.")
@click.option("--withdraw", type=int, default=None, metavar="NUMBER", help="Mark an entry as withdrawn.")
@click.option("--who", default=getpass.getuser, show_default="your login", help="Your name.")
def sitelog(
    config: Path,
    as_json: bool,
    subject: str | None,
    start: str,
    end: str,
    what: str,
    readings: str,
    withdraw: int | None,
    who: str,
) -> None:
    """List the site log; add an entry to it, or mark one as withdrawn.

    Entries added here live in the store; those of the site log file are taken over by each night.
    """
    from rhovane.review import add_site_log_entry, site_log_json, withdraw_site_log_entry

    settings = settings_at(config)
    if subject is None and (start or end or what or readings):
        raise click.UsageError("--from, --to, --what and --readings belong to --add SUBJECT")
    writes = subject is not None or withdraw is not None
    if not writes and not settings.store_path.exists():
        raise RhovaneError(f"{settings.store_path} is not there yet. Run `rhovane nightly` first.")
    with store_of(settings, read_only=not writes) as store:
        if subject is not None:
            cells = {"subject": subject, "from": start, "to": end, "what": what, "readings": readings}
            add_site_log_entry(settings, store, cells, who=who, now=utc_now())
        if withdraw is not None:
            withdraw_site_log_entry(store, withdraw, now=utc_now())
        entries = store.site_log()
    offset = settings.network.standard_offset
    if as_json:
        print_json([site_log_json(stored, offset) for stored in entries])
        return
    click.echo(f"{settings.network.name}: {sum(s.stands for s in entries)} entries in the site log")
    click.echo("\n".join(site_log_lines(entries, offset)))
