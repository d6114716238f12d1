"""What a source says about its readings as rows: quality flag, stage, time of issue."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.ingest.cells import Cell, Fault, code_of, distinct, judged, quoted
from rhovane.ingest.clock import read_issue_times
from rhovane.ingest.table import RowFaults, Table
from rhovane.model import Flag, Stage
from rhovane.settings import SourceSettings


@dataclass(frozen=True)
class Status:
    """One entry a row: ``flag`` int8 and ``stage`` int8 of the model's values, ``result_time`` int64 (s UTC)."""

    flag: NDArray[np.int8]
    stage: NDArray[np.int8]
    result_time: NDArray[np.int64]


def status_columns(source: SourceSettings) -> list[str]:
    """Names of the status columns that the source has."""
    columns = source.columns
    return [name for name in (columns.flag, columns.stage, columns.issued) if name]


def read_status(table: Table, source: SourceSettings, *, modified_s: int, faults: RowFaults) -> Status:
    """Flag, stage and time of issue of every row; what cannot be understood is added to ``faults``.

    Notes
    -----
    Without a flag column readings are "not evaluated", without a stage column "not verified", and without a time
    of issue they were issued when the file was written (``modified_s``, seconds since 1970-01-01 UTC).
    """
    n_rows = len(table.line)
    names = source.columns
    flag = np.full(n_rows, Flag.NOT_EVALUATED, dtype=np.int8)
    if names.flag:
        cells = table.column(names.flag)

        def flag_of(cell: Cell) -> Flag | Fault:
            code = code_of(cell)
            found = source.flag_of(code)
            return _unmapped("flags", "quality", code) if found is None else found

        column = distinct(cells)
        flags, unknown = judged(column, flag_of, Flag.NOT_EVALUATED)
        flag = np.array(flags, dtype=np.int8)[column.index]
        faults.add(names.flag, cells, unknown)
    stage = np.full(n_rows, Stage.NOT_VERIFIED, dtype=np.int8)
    if names.stage:
        cells = table.column(names.stage)

        def stage_of(cell: Cell) -> Stage | Fault:
            code = code_of(cell)
            found = source.stage_of(code)
            return _unmapped("stages", "stage", code) if found is None else found

        column = distinct(cells)
        stages, unknown = judged(column, stage_of, Stage.NOT_VERIFIED)
        stage = np.array(stages, dtype=np.int8)[column.index]
        faults.add(names.stage, cells, unknown)
    result_time = np.full(n_rows, modified_s, dtype=np.int64)
    if names.issued:
        cells = table.column(names.issued)
        issued = read_issue_times(cells, source, unsaid=modified_s)
        result_time = issued.first
        faults.add(names.issued, cells, issued.faults)
    return Status(flag, stage, result_time)


def _unmapped(section: str, kind: str, code: str) -> Fault:
    name = quoted(code)
    return Fault(
        f"The {kind} code {name} has no meaning here. Add {name} to [source.{section}] of this source."
    )
