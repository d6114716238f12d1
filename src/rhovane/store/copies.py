"""Copies of the store: made while it is whole, read back before they count, kept for some days and weeks.

A daily copy is a store like the live one. A weekly archive is a folder of Parquet files, one a table: it
can be read without this program and without the version of DuckDB that wrote the store.
"""

from __future__ import annotations

import json
import re
import shutil
from collections.abc import Collection
from dataclasses import dataclass
from datetime import date
from pathlib import Path

import duckdb

from rhovane.model import NotFound, RhovaneError, StoreDamaged
from rhovane.store.manifest import Manifest, losses, manifest_path, read_manifest, write_manifest
from rhovane.store.migrations import applied_migrations, latest_known, migrate
from rhovane.store.session import Session, failure

CONTENTS = "contents.json"  # in an archive: what it must hold


class Copies(Session):
    """Copying of the whole store."""

    def backup(self, target: Path) -> Manifest:
        """Copy the store, with its manifest, to another file in one step; what the copy holds.

        The copy is opened and compared with the store before it takes the place of an earlier one.

        Raises
        ------
        RhovaneError
            The copy cannot be made there; an earlier one is left as it was.
        StoreDamaged
            The copy does not hold what the store holds; it was not kept.
        """
        if target.resolve() == self.path.resolve():
            raise RhovaneError(f"{target} is the store itself; name another file for the copy.")
        if not target.parent.is_dir():
            raise RhovaneError(f"{target.parent}: no such folder; create it, or name another file.")
        part = target.with_name(f".{target.name}.part")
        part.unlink(missing_ok=True)
        place = str(part).replace("'", "''")
        source = self.value("select current_database()").replace('"', '""')
        expected = self.holds()
        try:
            self.execute(f"attach '{place}' as store_copy (read_write)")
            try:
                self.execute(f'copy from database "{source}" to store_copy')
            finally:
                self.execute("detach store_copy")
            held = held_by(part)
            if held != expected:
                raise StoreDamaged(
                    f"The copy of {self.path} is not whole: {'; '.join(losses(held, expected)) or held}. It was not "
                    "kept. Run `rhovane verify`."
                )
            part.replace(target)
        except OSError as error:
            raise RhovaneError(
                f"{target} cannot be written ({error.strerror}); name another file."
            ) from error
        finally:
            part.unlink(missing_ok=True)
        write_manifest(target, held)
        return held

    def archive(self, folder: Path) -> Manifest:
        """Write every table as a Parquet file into a new folder, in one step; what it holds.

        Raises
        ------
        RhovaneError
            The folder exists, or cannot be written.
        StoreDamaged
            A file does not hold the rows of its table; the folder was not kept.
        """
        if folder.exists():
            raise RhovaneError(f"{folder} exists; an archive is never changed. Name another folder.")
        if not folder.parent.is_dir():
            raise RhovaneError(f"{folder.parent}: no such folder; create it, or name another one.")
        part = folder.with_name(f".{folder.name}.part")
        shutil.rmtree(part, ignore_errors=True)
        held = self.holds()
        try:
            part.mkdir()
            rows = {}
            for table in self.tables_of():
                place = _text(part / f"{table}.parquet")
                rows[table] = self.value(f"select count(*) from {table}")
                self.execute(f"copy {table} to {place} (format parquet, compression zstd)")
                found = self.value(f"select count(*) from read_parquet({place})")
                if found != rows[table]:
                    raise StoreDamaged(
                        f"{table}.parquet holds {found} rows, the table {rows[table]}. The archive was not kept. "
                        "Run `rhovane verify`."
                    )
            step = max(applied_migrations(self._connection))
            contents = {"tables_of_step": step, "rows": rows}
            (part / CONTENTS).write_text(json.dumps(contents, indent=1) + "\n", encoding="utf-8")
            part.rename(folder)
        except OSError as error:
            raise RhovaneError(f"{folder} cannot be written ({error.strerror}); name another one.") from error
        finally:
            shutil.rmtree(part, ignore_errors=True)
        return held


@dataclass(frozen=True)
class BackedUp:
    """What a backup did: the copy and what it holds, the archive (None: this week's is there), what was removed."""

    copy: Path
    archive: Path | None
    held: Manifest
    removed: tuple[Path, ...]


def back_up(store: Copies, folder: Path, day: date, *, daily: int, weekly: int) -> BackedUp:
    """Copy a store into the backup folder, archive it once a week, and remove what is older than is to be kept.

    Parameters
    ----------
    folder : created if it does not exist
    day : the day that the copy is named by; a second copy of a day replaces the first
    daily : days for which a copy is kept, 1 or more
    weekly : weeks of which the newest copy and the archive are kept, 0 or more; 0 makes no archive
    """
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise RhovaneError(
            f"{folder} cannot be created ({error.strerror}); change backup.folder in the settings."
        ) from error
    stem = store.path.stem
    copy = folder / f"{stem}-{day.isoformat()}{store.path.suffix}"
    held = store.backup(copy)
    archive = folder / f"{stem}-{_week(day)}-parquet"
    made = None
    if weekly and not archive.exists():
        store.archive(archive)
        made = archive
    removed = []
    copies = copies_in(folder, store.path)
    for one in copies.keys() - kept_days(copies, daily=daily, weekly=weekly):
        copies[one].unlink()
        manifest_path(copies[one]).unlink(missing_ok=True)
        removed.append(copies[one])
    for old in archives_in(folder, store.path)[max(weekly, 1) :]:
        shutil.rmtree(old)
        removed.append(old)
    return BackedUp(copy, made, held, tuple(sorted(removed)))


def kept_days(days: Collection[date], *, daily: int, weekly: int) -> set[date]:
    """The days whose copies stay: the newest ``daily`` ones, and the last one of each of the newest ``weekly`` weeks."""
    newest_first = sorted(days, reverse=True)
    last_of_week: dict[str, date] = {}
    for day in newest_first:
        last_of_week.setdefault(_week(day), day)
    return {*newest_first[:daily], *list(last_of_week.values())[:weekly]}


def copies_in(folder: Path, store: Path) -> dict[date, Path]:
    """The copies of a store in a folder, by day; other files there are never touched."""
    pattern = re.compile(rf"{re.escape(store.stem)}-(\d{{4}}-\d\d-\d\d){re.escape(store.suffix)}")
    found = {p: pattern.fullmatch(p.name) for p in folder.glob("*") if p.is_file()}
    return {date.fromisoformat(m[1]): p for p, m in found.items() if m}


def archives_in(folder: Path, store: Path) -> list[Path]:
    """The weekly archives of a store in a folder, newest first."""
    pattern = re.compile(rf"{re.escape(store.stem)}-\d{{4}}-W\d\d-parquet")
    found = (p for p in folder.glob("*") if p.is_dir() and pattern.fullmatch(p.name))
    return sorted(found, reverse=True)


def restore(copy: Path, store: Path) -> Manifest:
    """Put a copy (a file) or an archive (a folder) in the place of a store that is no longer there; what it holds.

    Raises
    ------
    NotFound
        There is no such copy.
    RhovaneError
        The store is still there: it is never overwritten.
    StoreDamaged
        The copy is damaged or not complete; nothing was put in place.
    """
    beside = store.with_name(store.name + ".wal")
    for old in (store, beside):
        if old.exists():
            raise RhovaneError(
                f"{old} is still there and is not overwritten. Move it away (keep it until the restored store "
                "verifies), then run `rhovane restore` again."
            )
    if not copy.exists():
        raise NotFound(f"There is no copy {copy}. `rhovane backup --list` shows those there are.")
    store.parent.mkdir(parents=True, exist_ok=True)
    part = store.with_name(f".{store.name}.part")
    part.unlink(missing_ok=True)
    try:
        if copy.is_dir():
            rebuild(copy, part)
        else:
            shutil.copyfile(copy, part)
        held = held_by(part)
        expected = read_manifest(copy) if copy.is_file() else None
        if expected is not None and losses(held, expected):
            raise StoreDamaged(
                f"{copy} has lost data: {'; '.join(losses(held, expected))}. Use another copy."
            )
        part.replace(store)
    except OSError as error:
        raise RhovaneError(f"{store} cannot be written ({error.strerror}).") from error
    finally:
        part.unlink(missing_ok=True)
    # The manifest of the lost store says more than the copy holds: the feed brings the rest again.
    write_manifest(store, held)
    return held


def rebuild(archive: Path, target: Path) -> None:
    """Make a store from an archive, with the tables of the program that wrote it.

    Raises
    ------
    StoreDamaged
        The archive lacks a file, a file lacks rows, or a newer program wrote it.
    """
    try:
        contents = json.loads((archive / CONTENTS).read_text(encoding="utf-8"))
        step, rows = int(contents["tables_of_step"]), dict(contents["rows"])
    except (OSError, ValueError, KeyError, TypeError) as error:
        raise StoreDamaged(
            f"{archive} is no archive of a store: {CONTENTS}: {error!r}. Use another copy."
        ) from error
    if step > latest_known():
        raise StoreDamaged(
            f"{archive} was written by a newer version of the program (tables of step {step}; this version knows "
            f"steps up to {latest_known()}). Install the newer version, or use an older archive."
        )
    try:
        with duckdb.connect(str(target)) as connection:
            migrate(connection, str(target), read_only=False, upto=step)
            connection.execute("delete from migration")
            for table, expected in sorted(rows.items()):
                place = _text(archive / f"{table}.parquet")
                connection.execute(f"insert into {table} by name select * from read_parquet({place})")
                (found,) = connection.execute(f"select count(*) from {table}").fetchall()[0]
                if found != expected:
                    raise StoreDamaged(
                        f"{archive}/{table}.parquet holds {found} rows, not {expected}. Use another copy."
                    )
    except duckdb.Error as error:
        raise StoreDamaged(f"{archive} is not whole: {error}\nUse another copy.") from error


def held_by(path: Path) -> Manifest:
    """What a closed store holds, read from its file alone."""
    try:
        with duckdb.connect(str(path), read_only=True) as connection:
            return Manifest.counted(lambda sql: connection.execute(sql).fetchall()[0])
    except duckdb.Error as error:
        raise failure(error, path) from error


def _week(day: date) -> str:
    year, week, _ = day.isocalendar()
    return f"{year:04d}-W{week:02d}"


def _text(path: Path) -> str:
    return "'" + str(path).replace("'", "''") + "'"
