"""Commands that keep the store: verify, backup, restore, tidy."""

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
)
from rhovane.cli.wording import check_lines
from rhovane.model import ExitCode, NotFound

if TYPE_CHECKING:
    from rhovane.settings import Settings
    from rhovane.store import Store


@main.command()
@with_settings
@with_json
@click.option(
    "--file",
    "copy",
    type=click.Path(path_type=Path, dir_okay=False),
    default=None,
    help="Check this copy of a store instead of the network's own.",
)
def verify(config: Path, as_json: bool, copy: Path | None) -> None:
    """Read every value of the store and check every count; says what was checked.

    Ends with 6 when something is wrong, with the first faults and the remedy.
    """
    settings = settings_at(config)
    with store_of(settings, read_only=True, path=copy) as store:
        _verify(store, as_json=as_json)


def _verify(store: Store, *, as_json: bool) -> None:
    checks = list(store.checks())
    if as_json:
        print_json({"store": str(store.path), "checks": [c.as_json() for c in checks]})
    else:
        click.echo(str(store.path))
        click.echo("\n".join(check_lines(checks)))
    if any(c.faults for c in checks):
        raise Ending(ExitCode.STORE_DAMAGED)


@main.command()
@with_settings
@with_json
@click.option("--list", "only_list", is_flag=True, help="List the copies there are; make none.")
def backup(config: Path, as_json: bool, only_list: bool) -> None:
    """Copy the store to the backup folder, and remove copies older than the settings keep.

    The copy is read back and compared before it counts. Once a week every table is written as a Parquet
    file as well.
    """
    from rhovane.prepare import days_of
    from rhovane.store import archives_in, back_up, copies_in

    settings = settings_at(config)
    folder = settings.backup_folder
    if only_list:
        copies = [*copies_in(folder, settings.store_path).values(), *archives_in(folder, settings.store_path)]
        listed = sorted(str(p) for p in copies)
        if as_json:
            print_json(listed)
        else:
            click.echo("\n".join(listed) or f"No copies in {folder}. Run `rhovane backup`.")
        return
    day = days_of(settings.network.standard_offset).day_of(int(utc_now().timestamp()))
    with store_of(settings, read_only=True) as store:
        done = back_up(store, folder, day, daily=settings.backup.daily, weekly=settings.backup.weekly)
    if as_json:
        print_json(
            {
                "copy": str(done.copy),
                "archive": done.archive and str(done.archive),
                "removed": [str(p) for p in done.removed],
                "ingests": done.held.ingest_rows,
                "readings": done.held.readings,
            }
        )
        return
    click.echo(f"{done.copy}: {done.held.readings} readings of {done.held.ingest_rows} files, read back")
    if done.archive:
        click.echo(f"{done.archive}: every table as Parquet")
    for path in done.removed:
        click.echo(f"removed {path}")


@main.command()
@with_settings
@click.argument("copy", type=click.Path(path_type=Path), required=False)
def restore(config: Path, copy: Path | None) -> None:
    """Put COPY (default: the newest copy) in the place of a store that is gone, and verify it.

    COPY is a file or a Parquet archive that `rhovane backup` made. A store that is still there is never overwritten.
    """
    from rhovane.store import restore as put_in_place

    settings = settings_at(config)
    chosen = copy or _newest_copy(settings)
    held = put_in_place(chosen, settings.store_path)
    click.echo(f"{chosen} → {settings.store_path}: {held.readings} readings, {held.nights} nights")
    with store_of(settings, read_only=False) as store:
        _verify(store, as_json=False)
    click.echo("`rhovane nightly` takes in what has arrived since. Decisions made since are not in the copy.")


def _newest_copy(settings: Settings) -> Path:
    from rhovane.store import copies_in

    copies = copies_in(settings.backup_folder, settings.store_path)
    if not copies:
        raise NotFound(f"There is no copy in {settings.backup_folder}; name one: rhovane restore COPY.")
    return copies[max(copies)]


@main.command()
@with_settings
@with_json
def tidy(config: Path, as_json: bool) -> None:
    """Write an old store anew with the rows of each series together: smaller, and quicker to read.

    Needs free space for a second file. Once a year is enough.
    """
    from rhovane.store import tidy as write_anew

    settings = settings_at(config)
    done = write_anew(settings.store_path, lambda: store_of(settings, read_only=False))
    if as_json:
        print_json(done.as_json())
        return
    click.echo(
        f"{settings.store_path}: {done.bytes_before / 1e6:.1f} → {done.bytes_after / 1e6:.1f} MB; one series is "
        f"read in {1000 * done.seconds_before:.1f} → {1000 * done.seconds_after:.1f} ms"
    )
