"""Wide form: one label a row and one column a series."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import chain
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rhovane.ingest.cells import Cell, Fault, is_empty, read_numbers, shown
from rhovane.ingest.clock import read_labels, settle_repeated_hours
from rhovane.ingest.long_form import below_limit_of, bound_of, conversion_for, flag_below, with_bounds
from rhovane.ingest.readings import Readings, find_repeats
from rhovane.ingest.status import read_status, status_columns
from rhovane.ingest.table import RowFaults, Table, listed, missing_columns_reason, require_columns
from rhovane.model import FeedError, Flag, RejectedRow
from rhovane.settings import SeriesSettings, SourceSettings


def read_wide(
    table: Table, source: SourceSettings, series: Mapping[str, SeriesSettings], *, modified_s: int
) -> Readings:
    """The readings of a wide table, row by row and within a row in the order of the header.

    Parameters
    ----------
    table : Table
    source : SourceSettings
        Its ``series`` table maps a column name to a key. Flag, stage and time of issue, where the source has
        such columns, hold for the whole row.
    series : mapping of str to SeriesSettings
        Series by key.
    modified_s : int
        When the file was written, seconds since 1970-01-01 UTC.

    Raises
    ------
    FeedError
        The time column, a status column or every mapped column is missing from the header, or a column is
        mapped to a series that is not defined.

    Notes
    -----
    ``rows_read`` counts the cells of mapped columns; a row that is bad as a whole (time, status, number of columns)
    counts as one and is one rejected entry. A mapped column that is missing, and columns that are not mapped,
    are each noted once for the file (line 0).
    """
    names = source.columns
    mapped = [name for name in table.header if name in source.series]
    absent = [name for name in source.series if name not in table.header]
    fixed = [names.time, *status_columns(source)]
    if not mapped:
        raise FeedError(missing_columns_reason(table, absent, [*fixed, *source.series], source.delimiter))
    require_columns(table, fixed + mapped, source.delimiter)
    undefined = [source.series[name] for name in mapped if source.series[name] not in series]
    if undefined:
        raise FeedError(
            f"[source.series] leads to series that are not defined: {listed(undefined)}. Add a [[series]] each."
        )
    rejected = [*table.rejected, *_file_notes(table, source, fixed, absent)]
    bad_rows = RowFaults()
    hour_start = _read_hours(table, source, bad_rows)
    status = read_status(table, source, modified_s=modified_s, faults=bad_rows)
    rejected += bad_rows.rejected(table.line)
    whole = np.ones(len(table.line), dtype=bool)
    whole[bad_rows.rows] = False
    rows = np.flatnonzero(whole)
    n_cells = len(rows) * len(mapped)
    n_whole_rows_lost = len(bad_rows.rows) + sum(row.line > 0 for row in table.rejected)

    keys = [source.series[name] for name in mapped]
    unique_keys = sorted(set(keys))
    columns = [table.column(name) for name in mapped]
    if not whole.all():
        columns = [[column[row] for row in rows] for column in columns]
    cells = list(chain.from_iterable(columns))  # column by column, judged in one go
    value, flag, faults = _read_cells(cells, mapped, source, series, status.flag[rows])
    kept = np.ones(value.shape, dtype=bool)
    for i, reason in faults:
        j, row = divmod(i, len(rows))
        kept[row, j] = False
        rejected.append(RejectedRow(int(table.line[rows[row]]), mapped[j], shown(cells[i]), reason))

    def spread(per_row: NDArray[Any]) -> NDArray[Any]:
        return np.repeat(per_row[rows], len(mapped))

    readings = Readings(
        unique_keys,
        np.tile([unique_keys.index(key) for key in keys], len(rows)),
        spread(hour_start),
        value.ravel(),
        flag.ravel(),
        spread(status.stage),
        spread(status.result_time),
        spread(np.array(table.line, dtype=np.int64)),
    )
    kept_flat = kept.ravel()
    good = np.flatnonzero(kept_flat)
    for position, reason in find_repeats(readings.only(kept_flat, (), 0)):
        i, j = divmod(int(good[position]), len(mapped))
        rejected.append(RejectedRow(int(table.line[rows[i]]), mapped[j], shown(columns[j][i]), reason))
        kept_flat[good[position]] = False
    place = {name: j for j, name in enumerate(table.header)}
    rejected.sort(key=lambda row: (row.line, place.get(row.column, -1)))
    return readings.only(kept_flat, rejected, n_cells + n_whole_rows_lost)


def _read_cells(
    cells: Sequence[Cell],
    mapped: Sequence[str],
    source: SourceSettings,
    series: Mapping[str, SeriesSettings],
    row_flag: NDArray[np.int8],
) -> tuple[NDArray[np.float64], NDArray[np.int8], list[tuple[int, str]]]:
    """The cells of all mapped columns, one column after the other.

    Values in the units of their series and their flags, both of shape (n_rows, n_columns); faults as
    (position among the cells, reason).
    """
    numbers = read_numbers(
        cells, decimal=source.decimal, missing=source.missing, below_limit=below_limit_of(source)
    )
    flag = np.tile(row_flag, len(mapped))
    says_missing = flag == Flag.MISSING
    unsaid: list[tuple[int, str]] = []
    if numbers.below is not None:
        bounds = [bound_of(source, name) for name in mapped]
        numbers, unsaid = with_bounds(numbers, [bound for bound in bounds for _ in row_flag])
        flag = flag_below(flag, numbers)
    # A flag that says "missing" makes an empty cell an answer; a text in its place stays a fault.
    faults = [f for f in numbers.faults if not (says_missing[f[0]] and is_empty(cells[f[0]]))]
    faults += unsaid
    missing = numbers.missing | says_missing
    flag = np.where(missing, Flag.MISSING, flag).astype(np.int8)
    shape = (len(mapped), len(row_flag))
    value = np.where(missing, np.nan, numbers.value).reshape(shape)
    for j, name in enumerate(mapped):
        known = conversion_for(source, series[source.series[name]], name, None)
        if isinstance(known, Fault):
            faults += [(j * shape[1] + int(i), known.reason) for i in np.flatnonzero(~np.isnan(value[j]))]
        elif not known.changes_nothing:
            value[j] = value[j] * known.factor + known.offset
    return value.T, flag.reshape(shape).T, faults


def _read_hours(table: Table, source: SourceSettings, faults: RowFaults) -> NDArray[np.int64]:
    """Start of the interval of every row, seconds since 1970-01-01 UTC."""
    cells = table.column(source.columns.time)
    instants = read_labels(cells, source)
    instant = instants.first
    unsettled: list[tuple[int, str]] = []
    if not np.array_equal(instants.first, instants.second):
        instant = instant.copy()
        usable = np.ones(len(cells), dtype=bool)
        usable[[row for row, _ in instants.faults]] = False
        rows = np.flatnonzero(usable)
        instant[rows], unsettled = settle_repeated_hours(instants, rows)
    faults.add(source.columns.time, cells, [*instants.faults, *unsettled])
    return instant - source.step_minutes * 60 if source.label == "end" else instant


def _file_notes(
    table: Table, source: SourceSettings, fixed: Sequence[str], absent: Sequence[str]
) -> list[RejectedRow]:
    notes = []
    if absent:
        needed = [*fixed, *source.series]
        reason = missing_columns_reason(table, absent, needed, source.delimiter)
        notes.append(RejectedRow(0, "", shown(table.header_text), f"{reason} The other columns were read."))
    extra = [name for name in table.header if name and name not in source.series and name not in fixed]
    if extra:
        reason = f"Columns that are not listed under [source.series] were not read: {listed(extra)}. List them to keep them."
        notes.append(RejectedRow(0, "", shown(table.header_text), reason))
    return notes
