"""An old store written anew, with the rows of each series together: smaller, and quicker to read.

Nights append in order of arrival, so a year of one series lies in hundreds of places and superseded rows leave
holes. The rows are copied in order into a new file, which takes the place of the old one in one step.
"""

from __future__ import annotations

import dataclasses
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from rhovane.model import RhovaneError, StoreDamaged
from rhovane.store.copies import held_by
from rhovane.store.migrations import migrate
from rhovane.store.store import Store

# Rows that are read together are put together; tables that are not named keep their order.
ORDER = {
    "reading": "series_id, ts",
    "reading_history": "series_id, ts, superseded_by",
    "reading_confirmation": "series_id, ts, replaced_by",
    "window_result": "pair, window_end, lag",
    "window_result_history": "pair, window_end, lag, superseded_by",
    "evidence": "pair, recipe, day",
    "evidence_history": "pair, recipe, day, superseded_by",
}


@dataclass(frozen=True)
class Tidied:
    """Bytes of the file, and seconds to read all readings of one series, before and after."""

    bytes_before: int
    bytes_after: int
    seconds_before: float
    seconds_after: float

    def as_json(self) -> dict[str, float]:
        """Plain values for ``--json``."""
        return dataclasses.asdict(self)


def tidy(path: Path, opened: Callable[[], Store]) -> Tidied:
    """Write a store anew with the rows of each series together.

    Parameters
    ----------
    path : the store's file
    opened : opens it for writing

    Raises
    ------
    RhovaneError
        There is no room for the new file beside the old one, which is left as it was.
    StoreDamaged
        The new file does not hold what the old one does; the old one stays.
    """
    part = path.with_name(f".{path.name}.part")
    part.unlink(missing_ok=True)
    place = str(part).replace("'", "''")
    try:
        with opened() as store:
            store.execute("checkpoint")  # so that no log of the old file is left beside the new one
            before, seconds_before = path.stat().st_size, _seconds_to_read(store)
            expected = store.holds()
            store.execute(f"attach '{place}' as tidied (read_write)")
            try:
                _copy_in_order(store)
            finally:
                store.execute("detach tidied")
            held = held_by(part)
            if held != expected:
                raise StoreDamaged(
                    f"The tidied copy holds {held}, the store {expected}. The store was left as it was. "
                    "Run `rhovane verify`."
                )
        part.replace(path)
    except OSError as error:
        raise RhovaneError(f"{path} cannot be replaced ({error.strerror}). It was left as it was.") from error
    finally:
        part.unlink(missing_ok=True)
    with opened() as store:
        return Tidied(before, path.stat().st_size, seconds_before, _seconds_to_read(store))


def _copy_in_order(store: Store) -> None:
    source = store.value("select current_database()").replace('"', '""')
    store.execute("use tidied")
    try:
        migrate(store._connection, "the tidied copy", read_only=False)
        store.execute("delete from tidied.migration")
        for table in store.tables_of(source):
            order = f"order by {ORDER[table]}" if table in ORDER else ""
            store.execute(f'insert into tidied.{table} by name select * from "{source}".{table} {order}')
    finally:
        store.execute(f'use "{source}"')


def _seconds_to_read(store: Store) -> float:
    """Seconds to read the readings of the first series; the quickest of three."""
    taken = []
    for _ in range(3):
        begun = time.perf_counter()
        store.rows(
            "select count(value), sum(value) from reading where series_id = (select min(id) from series)"
        )
        taken.append(time.perf_counter() - begun)
    return min(taken)
