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
from rhovane.ingest.sensorthings import read_sensorthings_table
from rhovane.ingest.table import Table
from rhovane.ingest.table_schema import schema_notes, schema_place
from rhovane.ingest.unpacking import MB, TooLarge, too_large, unpacked
from rhovane.ingest.wide_form import read_wide
from rhovane.model import FeedError, ParsedFile, RejectedRow
from rhovane.settings import SeriesSettings, SourceSettings

ReadParquet = Callable[[Path], Mapping[str, Sequence[Any]]]
CHANGED = "The file changed while it was read. It will be read again with the next ingest."
NEVER = datetime(1970, 1, 1, tzinfo=UTC)


class StillWritten(FeedError):
    """A file changed while it was read: it is left for the next pass."""


def parse_file(
    path: Path,
    source: SourceSettings,
    series: Mapping[str, SeriesSettings],
    *,
    read_parquet: ReadParquet,
    shown_as: str | None = None,
    work_folder: Path = Path(),
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
    work_folder : Path
        Where a schema that the source names is found.

    Returns
    -------
    ParsedFile
        Columns are numpy arrays: ``series_key`` object (str); ``hour_start``, ``result_time``, ``line`` int64;
        ``value`` float64, NaN where the source says missing (flag MISSING); ``flag``, ``stage`` int8.
        ``rejected`` is in order of line. ``modified`` is in UTC. A file that cannot be read at all has no
        readings, ``rows_read`` 0 and one rejected entry with line 0; if not even its bytes can be read, its
        ``sha256`` is "" and says nothing about its content. ``rules`` is the source's.

    Raises
    ------
    FeedError
        The file has vanished.
    StillWritten
        It changed while it was read.

    Notes
    -----
    The bytes are read once, and unpacked if they are compressed; the digest is of the bytes as they lay there. A file
    that is larger than its source allows is not read: its ``sha256`` is "". Rules for time labels: :mod:`rhovane.ingest.clock`; for repeated readings:
    :func:`rhovane.ingest.readings.find_repeats`.
    """
    shown = shown_as if shown_as is not None else str(path)
    try:
        with path.open("rb") as stream:
            status = os.fstat(stream.fileno())
            if status.st_size > source.size_limit_mb * MB:
                raise too_large("has", source.size_limit_mb)
            data = stream.read()
            after = os.fstat(stream.fileno())
    except FileNotFoundError:
        raise FeedError(
            f"{path}: no such file. It may have been moved since the folder was listed; run the ingest again."
        ) from None
    except OSError as error:
        reason = f"The file cannot be read ({error.strerror}). Correct its permissions or the disk, then run again."
        return _unreadable(source, shown, "", 0, NEVER, reason)
    except TooLarge as error:
        return _unreadable(source, shown, "", status.st_size, NEVER, str(error))
    if (status.st_size, status.st_mtime_ns) != (after.st_size, after.st_mtime_ns):
        raise StillWritten(CHANGED)
    modified = _moment(status.st_mtime_ns)
    digest = hashlib.sha256(data).hexdigest()
    try:
        table = _table(path, data, status, source, read_parquet)
        readings = _readings(table, source, series, modified)
        place = schema_place(path, source, work_folder)
        notes = schema_notes(place, table, source) if place else []
    except TooLarge as error:
        return _unreadable(source, shown, "", len(data), NEVER, str(error))
    except StillWritten:
        raise
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
        rejected=(*notes, *readings.rejected),
        rules=source.reading_rules,
    )


def describe_rejections(parsed: ParsedFile) -> list[str]:
    """The rejected rows of a file for people: "FILE:LINE, column NAME: REASON", in order of line."""
    described = []
    for row in parsed.rejected:
        place = f"{parsed.path}:{row.line}" if row.line else parsed.path
        column = f", column {row.column}" if row.column else ""
        described.append(f"{place}{column}: {row.reason}")
    return described


def _table(
    path: Path, data: bytes, status: os.stat_result, source: SourceSettings, read_parquet: ReadParquet
) -> Table:
    if source.form.endswith("parquet"):
        return _parquet_table(path, data, status, read_parquet)
    content = unpacked(data, source.size_limit_mb)
    if source.form.endswith("sensorthings"):
        return read_sensorthings_table(content, source)
    return read_csv_table(
        content,
        delimiter=source.delimiter,
        encoding=source.encoding,
        preamble_lines=source.preamble_lines,
        comment=source.comment,
        header_rows=source.header_rows,
    )


def _readings(
    table: Table, source: SourceSettings, series: Mapping[str, SeriesSettings], modified: datetime
) -> Readings:
    read = read_long if source.form.startswith("long") else read_wide
    readings = read(table, source, series, modified_s=whole_seconds(modified))
    if not len(table.line) and not table.rejected:
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
        raise StillWritten(CHANGED)
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
        rules=source.reading_rules,
    )


def _moment(nanoseconds: int) -> datetime:
    """A time of change; one outside the years 1970 to 9999 counts as never."""
    # From whole numbers: a float is off by a microsecond now and then, and the file would look changed.
    try:
        return max(NEVER + timedelta(microseconds=nanoseconds // 1000), NEVER)
    except OverflowError:
        return NEVER
