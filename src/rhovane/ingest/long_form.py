"""Long form: one reading a row, with the codes of its station and quantity beside it."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from rhovane.ingest.cells import (
    BELOW_SHARE,
    NOT_DETECTED,
    BelowLimit,
    Cell,
    Distinct,
    Fault,
    Numbers,
    code_of,
    combined,
    distinct,
    is_empty,
    judged,
    quoted,
    read_numbers,
    shown,
)
from rhovane.ingest.clock import read_labels, settle_repeated_hours
from rhovane.ingest.readings import Readings, find_repeats
from rhovane.ingest.status import read_status, status_columns
from rhovane.ingest.table import RowFaults, Table, require_columns
from rhovane.ingest.units import SAME, Conversion, conversion
from rhovane.model import Flag, RejectedRow
from rhovane.settings import SeriesSettings, SourceSettings


def read_long(
    table: Table, source: SourceSettings, series: Mapping[str, SeriesSettings], *, modified_s: int
) -> Readings:
    """The readings of a long table.

    Parameters
    ----------
    table : Table
    source : SourceSettings
        Its ``series`` table maps "STATION QUANTITY" (or "QUANTITY" where there is no station column) to a key.
    series : mapping of str to SeriesSettings
        Series by key.
    modified_s : int
        When the file was written, seconds since 1970-01-01 UTC.

    Raises
    ------
    FeedError
        A column is missing from the header.

    Notes
    -----
    A row is rejected for the first fault of: code, time, flag, stage, time of issue, value, unit. Every row is
    one reading: ``rows_read`` counts rows, bad ones included.
    """
    names = source.columns
    first = [name for name in (names.time, names.station, names.quantity, names.value, names.unit) if name]
    require_columns(table, first + status_columns(source), source.delimiter)
    faults = RowFaults()
    keys = sorted(set(source.series.values()))
    codes, which = _read_codes(table, source, series, keys, faults)
    hour_start = _read_hours(table, source, which, faults)
    status = read_status(table, source, modified_s=modified_s, faults=faults)
    cells = table.column(names.value)
    numbers = read_numbers(
        cells, decimal=source.decimal, missing=source.missing, below_limit=below_limit_of(source)
    )
    says_missing = status.flag == Flag.MISSING
    flag = status.flag
    if numbers.below is not None:
        value_of = [bound_of(source, str(code)) for code in codes.cells]
        numbers, unsaid = with_bounds(numbers, [value_of[i] for i in codes.index.tolist()])
        faults.add(names.value, cells, unsaid)
        flag = flag_below(flag, numbers)
    # A flag that says "missing" makes an empty cell an answer; a text in its place stays a fault.
    faults.add(
        names.value, cells, [f for f in numbers.faults if not (says_missing[f[0]] and is_empty(cells[f[0]]))]
    )
    missing = numbers.missing | says_missing
    value = _convert(table, source, series, codes, np.where(missing, np.nan, numbers.value), faults)
    readings = Readings(
        keys,
        which,
        hour_start,
        value,
        np.where(missing, Flag.MISSING, flag).astype(np.int8),
        status.stage,
        status.result_time,
        np.array(table.line, dtype=np.int64),
    )
    kept = np.ones(len(table.line), dtype=bool)
    kept[faults.rows] = False
    rejected = [*table.rejected, *faults.rejected(table.line)]
    good = np.flatnonzero(kept)
    for position, reason in find_repeats(readings.only(kept, (), 0)):
        row = int(good[position])
        rejected.append(RejectedRow(int(table.line[row]), "", table.row_text(row), reason))
        kept[row] = False
    return readings.only(kept, rejected, len(table.line) + sum(row.line > 0 for row in table.rejected))


def _read_codes(
    table: Table,
    source: SourceSettings,
    series: Mapping[str, SeriesSettings],
    keys: list[str],
    faults: RowFaults,
) -> tuple[Distinct, NDArray[np.int64]]:
    """Code of every row, and the position of its series among the keys (0 where the code is unknown)."""
    names = source.columns
    position = {key: i for i, key in enumerate(keys)}
    quantities = distinct(table.column(names.quantity))
    stations = distinct(table.column(names.station)) if names.station else None
    pairs = combined(stations, quantities) if stations else quantities
    codes: list[Cell] = [
        " ".join(code_of(part) for part in cell) if isinstance(cell, tuple) else code_of(cell)
        for cell in pairs.cells
    ]

    def verdict(code: str) -> int | Fault:
        key = source.series.get(code)
        name = quoted(code)
        if key is None:
            return Fault(
                f"The code {name} is not known. List {name} under [source.series], or remove the rows."
            )
        if key not in series:
            return Fault(
                f"The code {name} leads to {key}, which is not defined. Add a [[series]] with this key."
            )
        return position[key]

    column = Distinct(codes, pairs.index)
    answers, unknown = judged(column, verdict, 0)
    at_known_station = {code.rpartition(" ")[0] for code in source.series}
    for row, reason in unknown:
        new_station = stations and code_of(stations.cells[stations.index[row]]) not in at_known_station
        at = names.station if new_station else names.quantity
        faults.add_one(row, at, shown(codes[pairs.index[row]]), reason)
    return column, np.array(answers, dtype=np.int64)[column.index]


def _read_hours(
    table: Table, source: SourceSettings, which: NDArray[np.int64], faults: RowFaults
) -> NDArray[np.int64]:
    """Start of the interval of every row, seconds since 1970-01-01 UTC."""
    cells = table.column(source.columns.time)
    instants = read_labels(cells, source)
    instant = instants.first
    unsettled: list[tuple[int, str]] = []
    if not np.array_equal(instants.first, instants.second):
        instant = instant.copy()
        # A row with a bad value still shows where its label stands in the order; one with a bad code or label
        # does not.
        usable = np.ones(len(cells), dtype=bool)
        usable[faults.rows] = False
        usable[[row for row, _ in instants.faults]] = False
        doubtful = usable & (instants.first != instants.second)
        for one in np.unique(which[doubtful]):
            rows = np.flatnonzero(usable & (which == one))
            instant[rows], found = settle_repeated_hours(instants, rows)
            unsettled += found
    faults.add(source.columns.time, cells, [*instants.faults, *unsettled])
    return instant - source.step_minutes * 60 if source.label == "end" else instant


def _convert(
    table: Table,
    source: SourceSettings,
    series: Mapping[str, SeriesSettings],
    codes: Distinct,
    value: NDArray[np.float64],
    faults: RowFaults,
) -> NDArray[np.float64]:
    """Values in the unit of their series; rows without a value have no unit to be wrong."""
    name = source.columns.unit
    n_rows = len(value)
    units = distinct(table.column(name)) if name else Distinct([None], np.zeros(n_rows, dtype=np.int64))
    situations = combined(codes, units)

    def verdict(situation: tuple[str, Cell]) -> Conversion | Fault:
        code, unit = situation
        key = source.series.get(code, "")
        # Rows with an unknown code are rejected for it.
        return (
            conversion_for(source, series[key], code, code_of(unit) if name else None)
            if key in series
            else SAME
        )

    answers, unfit = judged(situations, verdict, SAME)
    if unfit:
        at = name or source.columns.value
        faults.add(at, table.column(at), [fault for fault in unfit if not np.isnan(value[fault[0]])])
    if all(answer.changes_nothing for answer in answers):
        return value
    factor = np.array([answer.factor for answer in answers])[situations.index]
    offset = np.array([answer.offset for answer in answers])[situations.index]
    converted: NDArray[np.float64] = value * factor + offset
    return converted


def below_limit_of(source: SourceSettings) -> BelowLimit | None:
    """How a source writes values below a detection limit; None where it does not."""
    if source.below_limit == "reject":
        return None
    return BelowLimit(source.below_limit, frozenset(source.not_detected))


def bound_of(source: SourceSettings, code: str) -> float | Fault:
    """What "not detected" stands for in the series with a code, in the unit of the feed."""
    limit = source.limits.get(code)
    if limit is None and source.below_limit != "missing":
        return Fault(
            f"The detection limit of {quoted(code)} is not known. Declare it, in the unit of the feed: "
            f"{quoted(code)} under [source.limits]."
        )
    return math.nan if limit is None else BELOW_SHARE[source.below_limit] * limit


def with_bounds(numbers: Numbers, bounds: Sequence[float | Fault]) -> tuple[Numbers, list[tuple[int, str]]]:
    """The numbers with their bounds where the cells do not say them, and the rows whose bound is not known."""
    assert numbers.below is not None
    value, missing, below = numbers.value.copy(), numbers.missing.copy(), numbers.below.copy()
    unsaid = []
    for row in np.flatnonzero(below == NOT_DETECTED).tolist():
        bound = bounds[row]
        if isinstance(bound, Fault):
            unsaid.append((row, bound.reason))
        elif math.isnan(bound):
            missing[row], below[row] = True, 0
        else:
            value[row] = bound
    return Numbers(value, missing, numbers.faults, below), unsaid


def flag_below(flag: NDArray[np.int8], numbers: Numbers) -> NDArray[np.int8]:
    """Flags with good readings below a limit marked as such; a worse flag stays."""
    if numbers.below is None:
        return flag
    good = (flag == Flag.PASS) | (flag == Flag.NOT_EVALUATED)
    return np.where(good & (numbers.below > 0), Flag.BELOW_LIMIT, flag).astype(np.int8)


def conversion_for(
    source: SourceSettings, series: SeriesSettings, code: str, written: str | None
) -> Conversion | Fault:
    """How values with a code become values of a series.

    Parameters
    ----------
    written : str or None
        Unit as it stands beside the value; None where the source has no unit column.
    """
    declared = source.units.get(code)
    if written == "" and declared is None:
        return Fault(f'The unit is not given. Declare it: "{code}" under [source.units] of this source.')
    found = written or declared or series.unit
    found = source.unit_names.get(found, found)
    known = conversion(found, series.unit, series.quantity)
    if known is None:
        return Fault(
            f'The unit does not match: {quoted(found)} in the feed, "{series.unit}" for {series.key}, and no '
            f'conversion is known. If they are the same, add {quoted(found)} = "{series.unit}" under '
            "[source.unit_names]; otherwise change the unit of the series."
        )
    return known
