"""Commands about the feed: check (dry run), ingest."""

from __future__ import annotations

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
    writes_store,
)
from rhovane.model import ExitCode

if TYPE_CHECKING:
    from rhovane.settings import Settings
    from rhovane.store import Store

MOST_LINES = 40


@main.command()
@with_settings
@with_json
def check(config: Path, as_json: bool) -> None:
    """Check settings, calendar and site log, and say what reading the feed would do. Writes nothing."""
    from rhovane.pipeline.checking import dry_run
    from rhovane.settings import load_site_log

    settings = settings_at(config)
    path, offset = settings.site_log_path, settings.network.standard_offset
    log = () if path is None else load_site_log(path, settings.series_by_key(), offset)
    if settings.store_path.exists():
        with store_of(settings, read_only=True) as store:
            found = dry_run(settings, store)
    else:
        found = dry_run(settings, None)
    if as_json:
        print_json([source.as_json() for source in found])
        return
    click.echo(
        f"{config}: well ({len(settings.series)} series, {len(settings.pair)} pairs, "
        f"{len(settings.calendar_entries)} calendar and {len(log)} site log entries)"
    )
    for source in found:
        click.echo(f"{source.name}: {source.summary()}")
        for line in source.rejections[:MOST_LINES]:
            click.echo(f"  {line}")
        if len(source.rejections) > MOST_LINES:
            click.echo(f"  … and {len(source.rejections) - MOST_LINES} more (all with --json)")


@main.command()
@click.argument("files", nargs=-1, type=click.Path(path_type=Path, dir_okay=False))
@click.option(
    "--source", "source_name", default=None, help="Source the FILES belong to; default: by its pattern."
)
@writes_store
@with_json
def ingest(
    settings: Settings, store: Store, files: tuple[Path, ...], source_name: str | None, as_json: bool
) -> None:
    """Append new readings: from FILES, or from whatever is new in the feed folders.

    Ends with 3 when nothing new arrived, with 4 when a source could not be read.
    """
    from rhovane.pipeline.checking import ingest_now

    done = ingest_now(settings, store, files, source_name, now=utc_now())
    if as_json:
        print_json(done.as_json())
    else:
        for line in done.lines():
            click.echo(line)
    if done.troubles:
        raise Ending(ExitCode.NIGHT_INCOMPLETE)
    if not done.anything_new:
        raise Ending(ExitCode.NOTHING_NEW)
