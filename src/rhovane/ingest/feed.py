"""Feed files: finding them, parsing one, and saying what was rejected."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Callable, Mapping, Sequence
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

from rhovane.ingest.clock import whole_seconds
from rhovane.ingest.csv_table import read_csv_table
from rhovane.ingest.long_form import read_long
from rhovane.ingest.parquet_table import check_parquet_bytes, read_parquet_table
from rhovane.ingest.readings import Readings
from rhovane.ingest.table import Table
from rhovane.ingest.wide_form import read_wide
from rhovane.model import FeedError, ParsedFile, RejectedRow
from rhovane.settings import SeriesSettings, SourceSettings

ReadParquet = Callable[[Path], Mapping[str, Sequence[Any]]]
NEVER = datetime(1970, 1, 1, tzinfo=UTC)


def parse_file(
    path: Path,
    source: SourceSettings,
    series: Mapping[str, SeriesSettings],
    *,
    read_parquet: ReadParquet,
    shown_as: str | None = None,
) -> ParsedFile:
    """One feed file as readings and rejected rows.

    Parameters
    ----------
    path : Path
    source : SourceSettings
        How the file is written.
    series : mapping of str to SeriesSettings
        Series by key.
    read_parquet : callable
        Takes a path and returns the columns of a Parquet file by name (numpy arrays, masked where null, or other
        sequences). Times without an offset are read on the clock of the source; instants (TIMESTAMP WITH TIME
        ZONE) must come with their offset. It raises FeedError, OSError or ValueError for what is no Parquet file.
    shown_as : str, optional
        How the file is named in the result; default: its path.

    Returns
    -------
    ParsedFile
        Columns are numpy arrays: ``series_key`` object (str); ``hour_start``, ``result_time``, ``line`` int64;
        ``value`` float64, NaN where the source says missing (flag MISSING); ``flag``, ``stage`` int8.
        ``rejected`` is in order of line. ``modified`` is in UTC. A file that cannot be read at all has no
        readings, ``rows_read`` 0 and one rejected entry with line 0; if not even its bytes can be read, its
        ``sha256`` is "" and says nothing about its content.

    Raises
    ------
    FeedError
        The file has vanished.

    Notes
    -----
    CSV bytes are read once; the digest is of the bytes that were parsed. A Parquet file that changes while it is
    read is refused. Rules for time labels: :mod:`rhovane.ingest.clock`; for repeated readings:
    :func:`rhovane.ingest.readings.find_repeats`.
    """
    shown = shown_as if shown_as is not None else str(path)
    try:
        with path.open("rb") as stream:
            status = os.fstat(stream.fileno())
            data = stream.read()
    except FileNotFoundError:
        raise FeedError(
            f"{path}: no such file. It may have been moved since the folder was listed; run the ingest again."
        ) from None
    except OSError as error:
        reason = f"The file cannot be read ({error.strerror}). Correct its permissions or the disk, then run again."
        return _unreadable(source, shown, "", 0, NEVER, reason)
    # From whole numbers: as a float the time of change is off by a microsecond now and then, and the file looks changed.
    modified = NEVER + timedelta(microseconds=status.st_mtime_ns // 1000)
    digest = hashlib.sha256(data).hexdigest()
    try:
        if source.form.endswith("csv"):
            table = read_csv_table(data, delimiter=source.delimiter, encoding=source.encoding)
        else:
            table = _parquet_table(path, data, status, read_parquet)
        readings = _readings(table, source, series, modified)
    except FeedError as error:
        return _unreadable(source, shown, digest, len(data), modified, str(error))
    return ParsedFile(
        source=source.name,
        path=shown,
        sha256=digest,
        size_bytes=len(data),
        modified=modified,
        rows_read=readings.rows_read,
        series_key=readings.series_key,
        hour_start=readings.hour_start,
        value=readings.value,
        flag=readings.flag,
        stage=readings.stage,
        result_time=readings.result_time,
        line=readings.line,
        rejected=readings.rejected,
    )


def describe_rejections(parsed: ParsedFile) -> list[str]:
    """The rejected rows of a file for people: "FILE:LINE, column NAME: REASON", in order of line."""
    described = []
    for row in parsed.rejected:
        place = f"{parsed.path}:{row.line}" if row.line else parsed.path
        column = f", column {row.column}" if row.column else ""
        described.append(f"{place}{column}: {row.reason}")
    return described


def _readings(
    table: Table, source: SourceSettings, series: Mapping[str, SeriesSettings], modified: datetime
) -> Readings:
    read = read_long if source.form.startswith("long") else read_wide
    readings = read(table, source, series, modified_s=whole_seconds(modified))
    if not table.line and not table.rejected:
        raise FeedError("The file holds a header and no rows. Check whether the source delivers.")
    return readings


def _parquet_table(path: Path, data: bytes, before: os.stat_result, read_parquet: ReadParquet) -> Table:
    check_parquet_bytes(data)
    try:
        columns = read_parquet(path)
        after = path.stat()
    except (OSError, ValueError) as error:
        raise FeedError(
            f"The Parquet file cannot be read ({error}). Deliver the whole file again."
        ) from error
    if (before.st_size, before.st_mtime_ns) != (after.st_size, after.st_mtime_ns):
        raise FeedError("The file changed while it was read. It will be read again with the next ingest.")
    return read_parquet_table(columns)


def _unreadable(
    source: SourceSettings, shown: str, digest: str, size_bytes: int, modified: datetime, reason: str
) -> ParsedFile:
    nothing = Readings.none()
    return ParsedFile(
        source=source.name,
        path=shown,
        sha256=digest,
        size_bytes=size_bytes,
        modified=modified,
        rows_read=0,
        series_key=nothing.series_key,
        hour_start=nothing.hour_start,
        value=nothing.value,
        flag=nothing.flag,
        stage=nothing.stage,
        result_time=nothing.result_time,
        line=nothing.line,
        rejected=(RejectedRow(0, "", "", reason),),
    )
