"""A parsed file on its way into the store: its readings as records, its ledger row, its outcome."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import datetime
from typing import NamedTuple

import numpy as np

from rhovane.model import IngestOutcome, ParsedFile, RhovaneError
from rhovane.store.clock import from_seconds, microseconds, naive_utc, timestamps
from rhovane.store.precedence import READING, Records

_COLUMNS = ("series_key", "hour_start", "value", "flag", "stage", "result_time", "line")


class Delivery(NamedTuple):
    """A file that the ledger does not know yet, with the number that its ledger row gets."""

    file: ParsedFile
    ingest_id: int


def records_of(delivery: Delivery, ids: dict[str, int]) -> Records:
    """The readings of a file as records, in file order."""
    file = delivery.file
    n = len(file.value)
    lengths = {name: len(getattr(file, name)) for name in _COLUMNS}
    if set(lengths.values()) != {n}:
        raise RhovaneError(f"{file.path}: its columns have different lengths: {lengths}. Nothing was kept.")
    if file.rows_read != n + count_rejected_rows(file):
        raise RhovaneError(
            f"{file.path}: {file.rows_read} rows read, but {n} readings and {count_rejected_rows(file)} rejected rows. "
            "Nothing was kept; every row must be one or the other."
        )
    unknown = sorted(set(file.series_key) - ids.keys())
    if unknown:
        raise RhovaneError(
            f"{file.path}: series not known to the store: {', '.join(unknown)}. Define them in the settings first. "
            "Nothing was kept."
        )
    rows = np.empty(n, READING)
    rows["series_id"] = np.fromiter((ids[key] for key in file.series_key), np.int32, n)
    rows["ts"] = file.hour_start
    rows["value"] = file.value
    rows["flag"] = file.flag
    rows["stage"] = file.stage
    rows["result_time"] = file.result_time
    rows["line"] = file.line
    rows["file_rank"] = file_rank(file)
    rows["ingest_id"] = rows["confirmed_by"] = delivery.ingest_id
    infinite = np.isinf(rows["value"])
    if infinite.any():
        raise RhovaneError(
            f"{file.path}: the value of line {rows['line'][infinite][0]} is infinite; a reading is a finite number "
            "or missing (NaN). Nothing was kept."
        )
    return rows


def table_of(rows: Records) -> dict[str, np.ndarray]:
    """Records as columns that a statement can read; times as TIMESTAMP."""
    columns = {name: rows[name] for name in READING.names or () if name != "file_rank"}
    return columns | {name: timestamps(rows[name]) for name in ("ts", "result_time")}


def text_columns(**columns: Sequence[str]) -> dict[str, np.ndarray]:
    """Texts as columns that a statement can read."""
    return {name: np.array(values, dtype=object) for name, values in columns.items()}


def file_rank(file: ParsedFile) -> int:
    """The first 64 bits of the content hash: enough to order files by content."""
    return int(file.sha256[:16], 16)


def count_rejected_rows(file: ParsedFile) -> int:
    """Rejected rows that count as rows read; not those that concern the file as a whole."""
    return sum(row.line > 0 for row in file.rejected)


def span_of_file(file: ParsedFile) -> tuple[datetime, datetime] | None:
    """First and last hour, naive UTC; None without readings."""
    if not len(file.hour_start):
        return None
    hours = np.asarray(file.hour_start)
    return naive_utc(from_seconds(hours.min())), naive_utc(from_seconds(hours.max()))


def outcome_of(
    file: ParsedFile, ingest_id: int, counts: tuple[int, int, int], *, already_known: bool = False
) -> IngestOutcome:
    """What a file did to the store."""
    span = span_of_file(file)
    first, last = (None, None) if span is None else (from_seconds(microseconds(t) // 1_000_000) for t in span)
    return IngestOutcome(
        ingest_id,
        file.source,
        file.path,
        file.rows_read,
        *counts,
        count_rejected_rows(file),
        already_known,
        first,
        last,
    )
