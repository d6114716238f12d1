"""What a source says about its readings as rows: quality flag, stage, time of issue."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from enum import IntEnum
from typing import Any

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

    def meant(
        name: str, meaning: Callable[[str], IntEnum | None], where: str, what: str, default: IntEnum
    ) -> Any:
        """What the codes of a column mean, by row; the default where there is no column or no meaning."""
        if not name:
            return np.full(n_rows, default, dtype=np.int8)
        cells = table.column(name)

        def of(cell: Cell) -> IntEnum | Fault:
            code = code_of(cell)
            found = meaning(code)
            return _unmapped(where, what, code) if found is None else found

        column = distinct(cells)
        meanings, unknown = judged(column, of, default)
        faults.add(name, cells, unknown)
        return np.array(meanings, dtype=np.int8)[column.index]

    flag = meant(names.flag, source.flag_of, "flags", "quality", Flag.NOT_EVALUATED)
    stage = meant(names.stage, source.stage_of, "stages", "stage", Stage.NOT_VERIFIED)
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
