"""One open connection: statements, transactions that cannot be lost silently, arrays in and out.

DuckDB reports success for a COMMIT that follows a failed statement, and rolls everything back. So every
failure marks the transaction as doomed, a doomed transaction is rolled back and raises, and after each
COMMIT the ledgers written in it are counted.
"""

from __future__ import annotations

import contextlib
from collections.abc import Callable, Iterator, Mapping, Sequence
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import duckdb
import numpy as np

from rhovane.model import RhovaneError, StoreDamaged
from rhovane.store.manifest import Manifest, losses, read_manifest, write_manifest

Parameters = Sequence[Any] | Mapping[str, Any]
Columns = Mapping[str, np.ndarray]

_DISK_FULL = ("No space left", "File too large", "Disk quota exceeded")  # of errno ENOSPC, EFBIG, EDQUOT
_DAMAGE_WORDS = ("corrupt", "checksum", "could not read enough bytes", "not a valid duckdb")


def failure(error: duckdb.Error, where: Path) -> RhovaneError:
    """What a DuckDB error means for the person, with the remedy."""
    text = str(error)
    damaged = (duckdb.FatalException, duckdb.InternalException, duckdb.SerializationException)
    if any(words in text for words in _DISK_FULL):
        return RhovaneError(
            f"{where}: the disk is full or a file may not grow: {text}\nNothing of this step was kept; what was "
            "committed before is. Free space beside the store, and run again."
        )
    if isinstance(error, damaged) or any(word in text.lower() for word in _DAMAGE_WORDS):
        return StoreDamaged(
            f"{where} is damaged: {text}\nKeep a copy of the file, restore the latest backup in its place "
            "(`rhovane restore`) and ingest the feed again: what is known already is recognised."
        )
    if isinstance(error, duckdb.OutOfMemoryException):
        return RhovaneError(
            f"{where}: not enough memory or disk space: {text}\nNothing of this step was kept. Raise "
            "store.memory_limit_mb or free space beside the store, and run again."
        )
    return RhovaneError(f"{where}: the database reports: {text}\nNothing of this step was kept.")


class Session:
    """An open store: the part that knows connections and transactions, but no table."""

    def __init__(self, connection: duckdb.DuckDBPyConnection, path: Path, *, read_only: bool) -> None:
        self.path = path
        self.read_only = read_only
        self._connection = connection
        self._depth = 0
        self._doomed = False
        self._remembered: dict[str, dict[Any, Any]] = {}
        self._counted: Manifest | None = None
        self._checkpoint_due = False
        self._written: dict[str, int] = {}
        self._open = True

    # -- life -----------------------------------------------------------------------------------

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the file; other processes may open it now. Closing twice is harmless."""
        if self._open:
            self._open = False
            self._connection.close()

    # -- statements -----------------------------------------------------------------------------

    def execute(
        self, sql: str, parameters: Parameters = (), staged: Columns | None = None
    ) -> duckdb.DuckDBPyConnection:
        """Run one statement; its failure dooms the transaction it is in.

        The statement can read the arrays of ``staged`` as the table ``staged``: NaN is read as NULL; text
        columns hold str only, because DuckDB judges the type of a column by a sample.
        """
        if staged is not None:
            # DuckDB finds the table under the name of this very variable, at half the cost of registering it.
            staged = {name: np.ascontiguousarray(column) for name, column in staged.items()}
        try:
            return self._connection.execute(sql, parameters)
        except duckdb.Error as error:
            self._doomed = True
            raise failure(error, self.path) from error

    def rows(
        self, sql: str, parameters: Parameters = (), staged: Columns | None = None
    ) -> list[tuple[Any, ...]]:
        """All rows of a query as tuples."""
        found: list[tuple[Any, ...]] = self._fetched(self.execute(sql, parameters, staged).fetchall)
        return found

    def value(self, sql: str, parameters: Parameters = (), staged: Columns | None = None) -> Any:
        """The one value of a query with one row and one column."""
        return self.rows(sql, parameters, staged)[0][0]

    def columns(
        self, sql: str, parameters: Parameters = (), staged: Columns | None = None
    ) -> dict[str, np.ndarray]:
        """All rows of a query as one array a column; NULL becomes NaN, NaT or None."""
        fetched = self._fetched(self.execute(sql, parameters, staged).fetchnumpy)
        return {name: plain_array(values) for name, values in fetched.items()}

    def _fetched(self, fetch: Callable[[], Any]) -> Any:
        try:
            return fetch()
        except duckdb.Error as error:
            self._doomed = True
            raise failure(error, self.path) from error

    def remembered(self, sql: str) -> dict[Any, Any]:
        """The rows of a query with two columns as a dict, read once and kept; whoever adds rows adds them here.

        Only for tables that are never changed but by adding. An open store has no other writer; a rollback
        forgets everything.
        """
        if sql not in self._remembered:
            self._remembered[sql] = dict(self.rows(sql))
        return self._remembered[sql]

    def tables_of(self, database: str | None = None) -> list[str]:
        """Names of all tables, in order; of the store itself, or of a file attached to it."""
        found = self.rows(
            """
            select table_name from duckdb_tables() where database_name = coalesce(?, current_database())
            order by table_name
            """,
            [database],
        )
        return [name for (name,) in found]

    # -- transactions ---------------------------------------------------------------------------

    @contextlib.contextmanager
    def transaction(self) -> Iterator[None]:
        """All writes of the block together, or none of them.

        Blocks may be nested: the outermost one commits. An error inside, even one that was caught before
        it reached the outermost block, undoes everything.

        Raises
        ------
        RhovaneError
            The store was opened for reading only, or a failure inside was passed over.
        StoreDamaged
            The database reported a commit, but the ledger rows are not there.
        """
        if self.read_only:
            raise RhovaneError(f"{self.path} was opened for reading only; open it for writing to change it.")
        if self._depth:
            with self._inner():
                yield
            return
        self._doomed = self._checkpoint_due = False
        self._written = {}
        self.execute("begin transaction")
        self._depth = 1
        try:
            yield
            if self._doomed:
                raise RhovaneError(
                    f"{self.path}: a step of this transaction had failed, so all of it was undone. See the first "
                    "error, remedy it and run again."
                )
            self.execute("commit")
        except BaseException:
            # After a fatal error there is nothing left to roll back; the first error is the one to show.
            self._forget()
            with contextlib.suppress(duckdb.Error):
                self._connection.execute("rollback")
            raise
        finally:
            self._depth = 0
        if self._written:
            write_manifest(self.path, self._read_back(), durable=self._checkpoint_due)
        if self._checkpoint_due:
            self._checkpoint()

    def _forget(self) -> None:
        """Forget what was remembered of the tables: a rollback may have taken it back."""
        self._remembered.clear()
        self._counted = None

    @contextlib.contextmanager
    def _inner(self) -> Iterator[None]:
        self._depth += 1
        try:
            yield
        except BaseException:
            self._doomed = True
            raise
        finally:
            self._depth -= 1

    def expect_after_commit(self, count: str, number: int) -> None:
        """Have it checked after the commit that a count of the manifest has reached this number."""
        self._written[count] = number

    def checkpoint_after_commit(self) -> None:
        """Have the write-ahead log folded into the file after the commit."""
        self._checkpoint_due = True

    def _checkpoint(self) -> None:
        try:
            self._connection.execute("checkpoint")
        except duckdb.TransactionException:
            # Another connection of this process is reading; the log is folded in by a later checkpoint or on closing.
            return
        except duckdb.Error as error:
            raise RhovaneError(
                f"{self.path}: all was kept, but the write-ahead log could not be folded into the file: {error}\n"
                "Free space beside the store, and open it again."
            ) from error

    def _read_back(self) -> Manifest:
        """How much the store holds after a commit, which must be what was written; counts what was written to."""
        if self._counted is None:
            held = self.holds()
        else:
            held = self._counted = self._counted.recounted(lambda sql: self.rows(sql)[0], self._written)
        for count, number in self._written.items():
            if getattr(held, count) < number:
                raise StoreDamaged(
                    f"{self.path}: the database reported success, but its {count} is {getattr(held, count)} where "
                    f"{number} was written. Nothing of this step was kept; run it again, and run `rhovane verify`."
                )
        return held

    # -- manifest -------------------------------------------------------------------------------

    def holds(self) -> Manifest:
        """How much the store holds now, counted anew."""
        self._counted = Manifest.counted(lambda sql: self.rows(sql)[0])
        return self._counted

    def compare_with_manifest(self) -> None:
        """Refuse a store that has lost something; bring a manifest that lags behind up to date.

        Raises
        ------
        StoreDamaged
            The store holds less than its manifest says.
        """
        # Read first: a manifest written in between could only be ahead of what is counted below.
        expected = read_manifest(self.path)
        held = self.holds()
        lost = losses(held, expected) if expected is not None else []
        if lost:
            raise StoreDamaged(
                f"{self.path} has lost committed data:\n  "
                + "\n  ".join(lost)
                + "\nKeep a copy of the file, "
                "restore the latest backup (`rhovane restore`), and ingest the feed again: what is known "
                "already is recognised."
            )
        if held != expected and not self.read_only:
            write_manifest(self.path, held)


def plain_array(values: np.ndarray) -> np.ndarray:
    """An array without a mask: NULL as NaN among floats, NaT among times, None among everything else."""
    if not isinstance(values, np.ma.MaskedArray):
        return values
    if values.dtype.kind in "fM":
        return values.filled(np.nan) if values.dtype.kind == "f" else values.filled(np.datetime64("NaT"))
    out = values.data.astype(object)
    out[np.ma.getmaskarray(values)] = None
    return out
