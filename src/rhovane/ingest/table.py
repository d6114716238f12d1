"""A feed file as rows and named columns, before anything in it is understood."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.ingest.cells import Cell, quoted, shown
from rhovane.model import FeedError, RejectedRow

MOST_NAMES = 30  # column names in one message
LIKELY_DELIMITERS = {",": ",", ";": ";", "\t": "\\t", "|": "|"}


@dataclass(frozen=True)
class Table:
    """Rows that have the right number of columns, and those that have not.

    ``column`` gives the cells of a named column, one a row; ``row_text`` a row as it stood; ``line`` the
    1-based line of each row (row number in a Parquet file); ``header_text`` the header line as it stood ("" where
    names are stored apart from the rows); ``rejected`` the rows that are bad as a whole.
    """

    header: tuple[str, ...]
    line: Sequence[int] | NDArray[np.int64]
    column: Callable[[str], Sequence[Cell]]
    row_text: Callable[[int], str]
    rejected: tuple[RejectedRow, ...] = ()
    header_text: str = ""


class RowFaults:
    """The first fault found in each row of a table; later faults of the same row add nothing."""

    def __init__(self) -> None:
        self._first: dict[int, tuple[str, str, str]] = {}

    def __contains__(self, row: int) -> bool:
        return row in self._first

    def add(self, column: str, cells: Sequence[Cell], faults: Iterable[tuple[int, str]]) -> None:
        """Note the faults of one column."""
        for row, reason in faults:
            self._first.setdefault(row, (column, shown(cells[row]), reason))

    def add_one(self, row: int, column: str, raw: str, reason: str) -> None:
        """Note one fault."""
        self._first.setdefault(row, (column, raw, reason))

    @property
    def rows(self) -> list[int]:
        """Rows at fault."""
        return sorted(self._first)

    def rejected(self, line: Sequence[int]) -> list[RejectedRow]:
        """As entries for the quarantine."""
        return [RejectedRow(int(line[row]), *self._first[row]) for row in self.rows]


def require_columns(table: Table, needed: Sequence[str], delimiter: str) -> None:
    """Refuse a header in which a needed column is missing or named twice.

    Raises
    ------
    FeedError
        Names the columns expected and found, and a likelier delimiter where there is one.
    """
    absent = [name for name in needed if name not in table.header]
    if absent:
        raise FeedError(missing_columns_reason(table, absent, needed, delimiter))
    twice = [name for name in needed if table.header.count(name) > 1]
    if twice:
        raise FeedError(
            f"The header names {listed(twice)} more than once, so it cannot be told which one is meant. "
            "Give every column its own name."
        )


def missing_columns_reason(table: Table, absent: Sequence[str], needed: Sequence[str], delimiter: str) -> str:
    """What is missing from a header, what stands there, and what to do."""
    text = f"The header lacks {listed(absent)}. Found: {listed(table.header)}; expected: {listed(needed)}."
    for other, written in LIKELY_DELIMITERS.items():
        if other == delimiter or other not in table.header_text:
            continue
        names = {name.strip().strip('"') for name in table.header_text.split(other)}
        if names.issuperset(absent):
            return f'{text} This looks like a wrong delimiter: set delimiter = "{written}".'
    return f"{text} Correct the column names of this source in the settings, or the file."


def listed(names: Iterable[str]) -> str:
    """Column names for a message; of very many only the first."""
    every = list(names)
    more = f" and {len(every) - MOST_NAMES} more" if len(every) > MOST_NAMES else ""
    return ", ".join(quoted(name) for name in every[:MOST_NAMES]) + more
