"""What the store knows about readings, now or as a past night saw them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import duckdb
import numpy as np
from numpy.typing import NDArray

from rhovane.model import FeedError, NotFound
from rhovane.store.clock import aware_utc, naive_utc, seconds_of
from rhovane.store.session import Session, plain_array

# A history row was current from its own ingest until before the one that superseded it.
AS_OF_READINGS = """
    select series_id, ts, value, flag, stage, result_time, line, ingest_id, confirmed_by from reading where ingest_id <= $upto
    union all
    select series_id, ts, value, flag, stage, result_time, line, ingest_id, confirmed_by from reading_history
    where ingest_id <= $upto and superseded_by > $upto
"""


KNOWN_FILES = "select path, size_bytes, mtime_ns from feed_file"


@dataclass(frozen=True)
class Readings:
    """Readings of some series as columns; the order of the rows is not defined.

    ``position`` (int32) is the index into ``keys``; ``ts`` (int64) the start of the interval in whole
    seconds since 1970 UTC; ``value`` (float64) in the unit of the series, NaN where the source said
    missing; ``flag`` (int8) a :class:`rhovane.model.Flag`.
    """

    keys: tuple[str, ...]
    position: NDArray[np.int32]
    ts: NDArray[np.int64]
    value: NDArray[np.float64]
    flag: NDArray[np.int8]

    def __len__(self) -> int:
        return len(self.ts)


@dataclass(frozen=True)
class Origin:
    """Readings of one series that one file gave: how many, on which lines, for which hours (UTC).

    Lines are None where they are not known any more, because a later file gave all these readings again.
    """

    series: str
    source: str
    path: str
    sha256: str
    first_line: int | None
    last_line: int | None
    n_readings: int
    first_hour: datetime
    last_hour: datetime


class ReadingReader(Session):
    """Reading of readings and of the ingest ledger."""

    def read_readings(
        self, keys: Sequence[str], start: datetime, end: datetime, *, max_ingest_id: int | None = None
    ) -> Readings:
        """Readings of the series ``keys`` whose interval begins in ``start <= t < end``.

        With ``max_ingest_id`` the values and flags are exactly those that were current after that ingest.

        Raises
        ------
        NotFound
            The store does not know one of the series.
        """
        ids = dict(self.rows("select key, id from series"))
        unknown = sorted(set(keys) - ids.keys())
        if unknown:
            raise NotFound(
                f"The store knows no series {', '.join(unknown)}. Known are the series of the settings."
            )
        wanted = {
            "position": np.arange(len(keys), dtype=np.int32),
            "series_id": np.array([ids[key] for key in keys], np.int32),
        }
        span: dict[str, Any] = {"start": naive_utc(start), "end": naive_utc(end)}
        source = "reading"
        if max_ingest_id is not None:
            source = f"({AS_OF_READINGS})"
            span["upto"] = int(max_ingest_id)
        found = self.columns(
            f"""
            select w.position, r.ts, r.value, r.flag from {source} r join staged w on w.series_id = r.series_id
            where r.ts >= $start and r.ts < $end
            """,
            span,
            wanted,
        )
        return Readings(
            tuple(keys),
            found["position"],
            seconds_of(found["ts"]),
            found["value"].astype(float),
            found["flag"],
        )

    def origins(
        self, keys: Sequence[str], start: datetime, end: datetime, *, max_ingest_id: int
    ) -> list[Origin]:
        """Where the readings with ``start <= t < end`` came from, as they were after an ingest.

        In order of series, then of the first hour that a file gave. A reading that several files gave alike counts for
        the one that decides its precedence; where a file after ``max_ingest_id`` took that over, its line is lost.
        """
        found = self.rows(
            f"""
            select s.key, i.source, i.path, i.sha256, min(r.line), max(r.line), count(*), min(r.ts), max(r.ts)
            from (
                select series_id, ts,
                    case when coalesce(confirmed_by, ingest_id) <= $upto then line end as line,
                    case when confirmed_by <= $upto then confirmed_by else ingest_id end as given_by
                from ({AS_OF_READINGS})
            ) r join series s on s.id = r.series_id join ingest i on i.id = r.given_by
            where s.key in (select unnest($keys)) and r.ts >= $start and r.ts < $end
            group by s.key, i.source, i.path, i.sha256, i.id order by s.key, min(r.ts), i.id
            """,
            {
                "upto": int(max_ingest_id),
                "keys": list(keys),
                "start": naive_utc(start),
                "end": naive_utc(end),
            },
        )
        return [Origin(*row[:7], aware_utc(row[7]), aware_utc(row[8])) for row in found]

    def changed_since(self, ingest_id: int) -> dict[str, datetime]:
        """For each series the first hour whose value or flag later ingests brought or revised.

        Series without such an hour are left out. A reading that was only delivered again, or confirmed
        by a later stage, has not changed.
        """
        found = self.rows(
            """
            select s.key, min(r.ts) from reading r join series s on s.id = r.series_id
            where r.ingest_id > ? group by s.key order by s.key
            """,
            [int(ingest_id)],
        )
        return {key: aware_utc(first) for key, first in found}

    def last_ingest_id(self) -> int:
        """Number of the last ingest; 0 before the first."""
        return int(self.value("select coalesce(max(id), 0) from ingest"))

    def known_files(self, source_prefix: str = "") -> dict[str, tuple[int, int]]:
        """Size in bytes and time of change in ns (to whole microseconds) of the files taken in, by path.

        Only files of sources whose name begins with ``source_prefix``.
        """
        if source_prefix:
            found = self.rows(
                "select path, size_bytes, mtime_ns from feed_file where starts_with(source, ?)",
                [source_prefix],
            )
            return {path: (size, mtime) for path, size, mtime in found}
        if KNOWN_FILES not in self._remembered:
            found = self.rows(KNOWN_FILES)
            self._remembered[KNOWN_FILES] = {path: (size, mtime) for path, size, mtime in found}
        return self._remembered[KNOWN_FILES]

    def span_of(self, keys: Sequence[str]) -> dict[str, tuple[datetime, datetime]]:
        """First and last hour stored of each series that has readings."""
        found = self.rows(
            """
            select s.key, min(r.ts), max(r.ts) from reading r join series s on s.id = r.series_id
            where s.key in (select unnest(?)) group by s.key
            """,
            [list(keys)],
        )
        return {key: (aware_utc(first), aware_utc(last)) for key, first, last in found}

    def ingests(self, *, after: int = 0) -> dict[str, np.ndarray]:
        """The ingest ledger after ingest number ``after``, as columns in order of number."""
        return self.columns(
            """
            select id, source, path, sha256, size_bytes, rows_read, rows_new, rows_revised, rows_unchanged,
                   rows_rejected, first_ts, last_ts, ingested_at
            from ingest where id > ? order by id
            """,
            [int(after)],
        )

    def rejected_rows(self, *, after: int = 0) -> dict[str, np.ndarray]:
        """Rejected rows of ingests after number ``after``, as columns in order of ingest and line."""
        return self.columns(
            """
            select ingest_id, path, line, column_name, raw, reason from rejected where ingest_id > ?
            order by ingest_id, line, column_name
            """,
            [int(after)],
        )

    def count_rejected(self) -> int:
        """Number of rows in quarantine."""
        return int(self.value("select count(*) from rejected"))

    def read_parquet(self, path: Path) -> dict[str, np.ndarray]:
        """Columns of a Parquet file by name; see :func:`rhovane.store.read_parquet`.

        Faster than the function, because the store's engine is running already; touches no table.
        """
        return _parquet_columns(self._connection.cursor(), path)


def read_parquet(path: Path) -> dict[str, np.ndarray]:
    """Columns of a Parquet file by name, in row order; needs no store.

    Times come as datetime64[us] (NaT: missing), numbers as numpy arrays (NaN: missing among floats),
    text and whole numbers with gaps as object arrays (None: missing). Times with a zone come as aware
    datetimes in UTC, so that they are never taken for labels of the source's own clock.

    Raises
    ------
    FeedError
        There is no such file, or it is not a Parquet file.
    """
    with duckdb.connect(":memory:", config={"threads": 1}) as connection:
        return _parquet_columns(connection, path)


def _parquet_columns(connection: duckdb.DuckDBPyConnection, path: Path) -> dict[str, np.ndarray]:
    if not path.is_file():
        raise FeedError(f"{path}: no such file.")
    with connection:
        try:
            relation = connection.execute("select * from read_parquet(?)", [str(path)])
            kinds = {name: str(kind) for name, kind, *_ in relation.description}
            fetched = relation.fetchnumpy()
        except duckdb.Error as error:
            raise FeedError(f"{path}: cannot be read as Parquet: {error}") from error
    return {name: _parquet_column(plain_array(values), kinds[name]) for name, values in fetched.items()}


def _parquet_column(values: np.ndarray, kind: str) -> np.ndarray:
    if kind.startswith("DECIMAL"):
        return values.astype(float)
    if (
        kind == "TIMESTAMP WITH TIME ZONE"
    ):  # fetched as naive UTC; without its offset it would be taken for local
        moments = values.astype("datetime64[us]").tolist()
        return np.array([t and t.replace(tzinfo=UTC) for t in moments], dtype=object)
    return values
