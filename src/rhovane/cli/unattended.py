"""Commands for a watch that nobody watches: service, deliver."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING

import click

from rhovane.cli.entry import (
    Ending,
    main,
    print_json,
    settings_at,
    store_of,
    utc_now,
    with_json,
    with_settings,
)
from rhovane.cli.wording import night_lines, sent_lines
from rhovane.model import ExitCode, RhovaneError

if TYPE_CHECKING:
    from rhovane.pipeline import NightReport
    from rhovane.schedule import Log
    from rhovane.settings import Settings
    from rhovane.store import OutboxEntry


@main.command()
@with_settings
@click.option(
    "--page/--no-page", "with_page", default=True, help="Serve the page as well, on this machine only."
)
@click.option(
    "--port", type=click.IntRange(0, 65535), default=8321, show_default=True, help="Port of the page."
)
def service(config: Path, with_page: bool, port: int) -> None:
    """Run the nights by themselves, in the foreground, until SIGTERM: for a service manager.

    Missed nights are made up for in order. The log is written as JSON lines.
    """
    from rhovane.schedule import Keeper, SystemClock, open_log, run_service

    settings = settings_at(config)
    with open_log(settings, also=("apscheduler",)) as log:
        keeper = Keeper(settings, lambda: store_of(settings, read_only=False), SystemClock(), log)
        run_service(keeper, beside=_page_beside(settings, port, log) if with_page else ())
    # Whatever still computes rests on no commit; waiting for it would keep the service manager waiting.
    sys.stdout.flush()
    sys.stderr.flush()
    os._exit(int(ExitCode.WELL))


def _page_beside(settings: Settings, port: int, log: Log) -> list[Callable[[], None]]:
    """The page, to be run beside the nights; nothing, with a warning in the log, where its port is taken."""
    from rhovane.web import PageServer

    try:
        server = PageServer(settings, port=port, token=None, clock=utc_now)
    except RhovaneError as error:
        log.warning("the page is not served", reason=str(error))
        return []
    log.info("the page is served", address=server.address)
    return [server.run]


def catch_up_once(settings: Settings) -> ExitCode:
    """Run what is due, once, as the service would; for `nightly --catch-up`."""
    from rhovane.schedule import Keeper, SystemClock, open_log

    codes: list[ExitCode] = []

    def tell(report: NightReport) -> None:
        click.echo("\n".join(night_lines(report)))
        codes.append(report.exit_code)

    with open_log(settings) as log:
        keeper = Keeper(
            settings, lambda: store_of(settings, read_only=False), SystemClock(), log, on_night=tell
        )
        keeper.run_due_nights()
    if keeper.faults:
        return ExitCode.STORE_DAMAGED
    for error in keeper.troubles:
        return error.exit_code if isinstance(error, RhovaneError) else ExitCode.FAILED
    if not codes:
        click.echo("No night is due.")
        return ExitCode.NOTHING_NEW
    return max(codes, key=lambda code: (code is ExitCode.NIGHT_INCOMPLETE, code is ExitCode.WELL))


@main.command()
@with_settings
@with_json
@click.option("--list", "only_list", is_flag=True, help="List what waits; send nothing.")
def deliver(config: Path, as_json: bool, only_list: bool) -> None:
    """Send what waits in the outbox, at once.

    Ends with 7 when something could not be delivered.
    """
    from rhovane.pipeline import send_waiting

    settings = settings_at(config)
    if only_list:
        with store_of(settings, read_only=True) as store:
            waiting = store.outbox(waiting=True)
        if as_json:
            print_json([_entry_json(e) for e in waiting])
        else:
            click.echo("\n".join(_entry_line(e) for e in waiting) or "Nothing waits.")
        return
    sent = send_waiting(settings, lambda: store_of(settings, read_only=False), utc_now, at_once=True)
    if as_json:
        print_json(sent.as_json())
    else:
        click.echo("\n".join(sent_lines(sent)))
    raise Ending(ExitCode.NEEDS_ATTENTION if sent.waiting else ExitCode.WELL)


def _entry_json(entry: OutboxEntry) -> dict[str, object]:
    return {
        "id": entry.message.id,
        "channel": entry.channel,
        "kind": entry.message.kind.value,
        "subject": entry.message.subject,
        "created_at": entry.created_at.isoformat(),
        "attempts": entry.attempts,
        "last_error": entry.last_error,
    }


def _entry_line(entry: OutboxEntry) -> str:
    why = f": {entry.last_error}" if entry.last_error else ""
    return f"{entry.channel:<5} {entry.message.subject}, {entry.attempts} attempts{why}"
