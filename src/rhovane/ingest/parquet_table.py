"""Columns read from a Parquet file → table."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from datetime import date, datetime
from typing import Any

import numpy as np

from rhovane.ingest.cells import Cell, shown
from rhovane.ingest.table import Table
from rhovane.model import FeedError

MAGIC = b"PAR1"  # first and last four bytes of a Parquet file; Apache Parquet format specification


def check_parquet_bytes(data: bytes) -> None:
    """Refuse bytes that cannot be a Parquet file.

    Raises
    ------
    FeedError
        The file is empty, is something else, or lacks its end.
    """
    if not data:
        raise FeedError("The file is empty. Ask the source to deliver it again, or remove it.")
    if not data.startswith(MAGIC):
        raise FeedError("The file is not a Parquet file. Correct the form or the files of this source.")
    if len(data) < 12 or not data.endswith(MAGIC):
        raise FeedError("The Parquet file seems cut: its end is missing. Deliver the whole file again.")


def read_parquet_table(columns: Mapping[str, Sequence[Any]]) -> Table:
    """A table of typed cells; rows are numbered from 1.

    Parameters
    ----------
    columns : mapping of str to sequence
        Column name → its values: numpy arrays (masked where null), or any sequence of texts, numbers, times
        and None. Times without an offset are read on the clock of the source; times with one are instants.

    Raises
    ------
    FeedError
        The columns differ in length.
    """
    lengths = {len(values) for values in columns.values()}
    if len(lengths) > 1:
        raise FeedError("The columns of the Parquet file differ in length. Deliver the whole file again.")
    n_rows = lengths.pop() if lengths else 0
    # Parquet names are compared without surrounding blanks, as CSV names are.
    by_name = {name.strip(): values for name, values in columns.items()}

    def row_text(row: int) -> str:
        return shown(", ".join(shown(cells_of(values[row : row + 1])[0]) for values in by_name.values()))

    return Table(
        tuple(name.strip() for name in columns),
        range(1, n_rows + 1),
        lambda name: cells_of(by_name[name]),
        row_text,
    )


def cells_of(values: Sequence[Any]) -> list[Cell]:
    """Values of a typed column as cells: null, NaN and NaT become None, truth values become texts."""
    array: Any = values if hasattr(values, "mask") else np.asarray(values)
    if array.dtype.kind == "M":
        # Whole microseconds are what a datetime can hold; finer times would come back as bare integers.
        array = array.astype("datetime64[us]")
    plain: list[Any] = array.tolist()
    if array.dtype.kind == "f" and None not in plain and not np.isnan(array).any():
        return plain
    return [_cell(value) for value in plain]


def _cell(value: Any) -> Cell:
    if isinstance(value, np.generic):
        value = value.item()
    if value is None or isinstance(value, (str, datetime)):
        # A missing time of a data frame calls itself a datetime, yet is not equal to itself.
        return value if value == value else None
    if isinstance(value, bool):
        return str(value)
    if isinstance(value, (int, float)):
        return None if math.isnan(value) else value
    if isinstance(value, date):
        return datetime(value.year, value.month, value.day)
    return str(value)
