"""Is the store whole, and a copy for the case that it is not."""

from __future__ import annotations

from pathlib import Path

import duckdb

from rhovane.model import RhovaneError, StoreDamaged
from rhovane.store.alert_log import AlertLog
from rhovane.store.manifest import Manifest, losses, write_manifest
from rhovane.store.session import failure

_LAWS = (
    ("readings, and rows that the ledger counts as new", "(select count(*) from reading)", "rows_new"),
    (
        "readings in the history, and rows that the ledger counts as revised",
        "(select count(*) from reading_history)",
        "rows_revised",
    ),
    (
        "rejected rows, and those that the ledger counts",
        "(select count(*) from rejected where line > 0)",
        "rows_rejected",
    ),
    (
        "rows read, and rows that are new, revised, unchanged or rejected",
        "sum(rows_read)",
        "rows_new + rows_revised + rows_unchanged + rows_rejected",
    ),
)


class Upkeep(AlertLog):
    """Checking and copying of the whole store."""

    def verify(self) -> list[str]:
        """Read every value of every table and check the laws of the ledgers: faults in words, none when whole.

        Raises
        ------
        StoreDamaged
            A block of the file cannot be read.
        """
        tables = self.rows("select table_name from duckdb_tables() where not internal order by table_name")
        for (table,) in tables:
            self.rows(f"select count(*), bit_xor(hash(columns(*))) from {table}")
        found = []
        for words, held, counted in _LAWS:
            left, right = self.rows(f"select coalesce({held}, 0), coalesce(sum({counted}), 0) from ingest")[0]
            if left != right:
                found.append(f"{words} differ: {left} and {right}")
        twice = self.value(
            "select count(*) from (select 1 from reading group by series_id, ts having count(*) > 1)"
        )
        if twice:
            found.append(f"{twice} hours have two current readings")
        place = self.verify_alert_chain()
        if place is not None:
            found.append(f"the alert log is not as it was written from event {place} on")
        return found

    def backup(self, target: Path) -> Manifest:
        """Copy the store, with its manifest, to another file in one step; what the copy holds.

        The copy is read back and compared before it takes the place of an earlier one.

        Raises
        ------
        RhovaneError
            The copy cannot be made there; an earlier one is left as it was.
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
            held = _held_by(part)
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


def _held_by(path: Path) -> Manifest:
    try:
        with duckdb.connect(str(path), read_only=True) as connection:
            return Manifest.counted(lambda sql: connection.execute(sql).fetchall()[0])
    except duckdb.Error as error:
        raise failure(error, path) from error
