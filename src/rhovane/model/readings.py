"""Readings as delivered: one parsed feed file, its good rows as columns, its bad rows with reasons."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import datetime
from enum import IntEnum


class Flag(IntEnum):
    """Quality of a reading: the values of IOOS QARTOD, the inner alphabet for every foreign code.

    BELOW_LIMIT is ours: a good reading of which only a bound is known, below the detection limit. Its value
    stands for the bound by a rule that its source declares.
    """

    PASS = 1
    NOT_EVALUATED = 2
    SUSPECT = 3
    FAIL = 4
    BELOW_LIMIT = 6
    MISSING = 9


class Stage(IntEnum):
    """How far a reading has been checked by its network; a later stage outranks an earlier one."""

    NOT_VERIFIED = 0
    PRELIMINARY = 1
    VERIFIED = 2


@dataclass(frozen=True)
class RejectedRow:
    """A row (or a cell of a wide row) that did not become a reading: kept, never dropped.

    ``line`` is the 1-based line in the file (0: the file as a whole); ``column`` the name of the column
    at fault ("" when the whole row is); ``raw`` the text as it stood; ``reason`` says what is wrong and
    what to do.
    """

    line: int
    column: str
    raw: str
    reason: str


@dataclass(frozen=True)
class ParsedFile:
    """One feed file after parsing, before the store has seen it.

    All column sequences have one entry a reading, in file order: ``series_key`` (str), ``hour_start``
    (whole seconds since 1970-01-01 UTC of the start of the interval), ``value`` (float; NaN where the
    source says missing), ``flag`` (:class:`Flag` values), ``stage`` (:class:`Stage` values),
    ``result_time`` (whole seconds since 1970 UTC: when the value was issued; the file's own time where
    rows do not say) and ``line`` (1-based).

    ``rows_read`` counts the readings the file holds: rows of a long file, cells of a wide one. Always
    ``rows_read == len(value) + len(rejected_rows_that_are_readings)``; rejected entries with
    ``line == 0`` concern the file and do not count. ``rules`` names the settings it was read by ("": not
    said): the same bytes read by other rules are another delivery, which takes the place of the first.
    """

    source: str
    path: str
    sha256: str
    size_bytes: int
    modified: datetime
    rows_read: int
    series_key: Sequence[str]
    hour_start: Sequence[int]
    value: Sequence[float]
    flag: Sequence[int]
    stage: Sequence[int]
    result_time: Sequence[int]
    line: Sequence[int]
    rejected: Sequence[RejectedRow] = field(default_factory=tuple)
    rules: str = ""


@dataclass(frozen=True)
class IngestOutcome:
    """What one file did to the store: ``rows_read == new + revised + unchanged + rejected``."""

    ingest_id: int
    source: str
    path: str
    rows_read: int
    new: int
    revised: int
    unchanged: int
    rejected: int
    already_known: bool = False
    first: datetime | None = None
    last: datetime | None = None
