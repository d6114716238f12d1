"""Single cells of a feed: numbers, codes, and what is wrong with them.

Feeds repeat themselves: a year of hourly readings has few distinct texts in any column. Every column is
therefore judged once for each distinct cell, by a careful function, and looked up for each row.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Hashable, Iterable, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

Cell = str | int | float | datetime | None
"""One cell as delivered: text from a CSV file, a typed value or None (no value) from a Parquet file."""

MAX_KEPT = 4000  # characters of a line kept in quarantine; longer than the row of any station seen
MAX_QUOTED = 60  # characters of a cell repeated in a message

T = TypeVar("T")


@dataclass(frozen=True)
class Fault:
    """Why a cell cannot be used: what was found, and what to do."""

    reason: str


@dataclass(frozen=True)
class Numbers:
    """A value column as numbers.

    ``value`` float64, shape (n,), NaN where missing or at fault; ``missing`` bool, shape (n,), True where the
    source says that there is no value; ``faults`` lists (row, reason) for cells that are neither.
    ``below`` int8, shape (n,), is BELOW where only a bound is known and ``value`` stands for it, and
    NOT_DETECTED where the cell does not say the bound (``value`` NaN); None where there is no such cell.
    """

    value: NDArray[np.float64]
    missing: NDArray[np.bool_]
    faults: list[tuple[int, str]]
    below: NDArray[np.int8] | None = None


BELOW, NOT_DETECTED = 1, 2
# Share of a detection limit that a value below it stands for, by the rule of its source.
BELOW_SHARE = {"half": 0.5, "limit": 1.0, "zero": 0.0, "missing": math.nan}


@dataclass(frozen=True)
class BelowLimit:
    """How values below a detection limit are written: the rule, and the texts that say no limit."""

    rule: str
    not_detected: frozenset[str]

    def plain(self, cell: Cell, decimal: str) -> tuple[float, int] | None:
        """The value that a marked cell stands for (NaN: not said), and its kind; None for other cells."""
        if not isinstance(cell, str):
            return None
        text = cell.strip()
        if text in self.not_detected:
            return math.nan, NOT_DETECTED
        mark = text[:1] == "<" or text[-1:] == "<"
        bound = _reader(decimal)(text.strip("<")) if mark and text.count("<") == 1 else None
        if bound is None or not 0 <= bound < math.inf:
            return None
        return BELOW_SHARE[self.rule] * bound, BELOW


@dataclass(frozen=True)
class Distinct:
    """A column as its distinct cells: row i holds ``cells[index[i]]``; ``index`` int64, shape (n,)."""

    cells: Sequence[Any]
    index: NDArray[np.int64]


def distinct(cells: Sequence[Cell]) -> Distinct:
    """The distinct cells of a column, in order of first appearance, and where they stand."""
    if hasattr(cells, "index") and hasattr(cells, "cells"):  # a column that is coded already
        return Distinct(cells.cells, cells.index)
    position = {cell: i for i, cell in enumerate(dict.fromkeys(cells))}
    index = np.fromiter(map(position.__getitem__, cells), dtype=np.int64, count=len(cells))
    return Distinct(list(position), index)


def combined(first: Distinct, second: Distinct) -> Distinct:
    """The distinct tuples of two columns of equal length."""
    width = max(len(second.cells), 1)
    both = first.index * width + second.index
    size = len(first.cells) * width
    if size <= len(both):
        # Few combinations: marking those that occur is ten times as fast as sorting all rows.
        occurs = np.zeros(size, dtype=bool)
        occurs[both] = True
        pairs = np.flatnonzero(occurs)
        index = (np.cumsum(occurs) - 1)[both]
    else:
        pairs, index = np.unique(both, return_inverse=True)
    cells = [(first.cells[p // width], second.cells[p % width]) for p in pairs.tolist()]
    return Distinct(cells, index)


def judged(
    column: Distinct, verdict: Callable[..., T | Fault], filler: T
) -> tuple[list[T], list[tuple[int, str]]]:
    """The verdict on each distinct cell of a column.

    Parameters
    ----------
    column : Distinct
    verdict : callable
        Takes one cell; returns what it stands for, or a :class:`Fault`.
    filler
        Stands in the answers where a cell is at fault.

    Returns
    -------
    answers : list, one entry a distinct cell
    faults : list of (row, reason), in order of row
    """
    answers: list[T] = []
    reasons: dict[int, str] = {}
    for i, cell in enumerate(column.cells):
        answer = verdict(cell)
        if isinstance(answer, Fault):
            reasons[i] = _undecodable_reason(cell) or answer.reason
            answer = filler
        answers.append(answer)
    if not reasons:
        return answers, []
    at_fault = np.zeros(len(answers), dtype=bool)
    at_fault[list(reasons)] = True
    rows = np.flatnonzero(at_fault[column.index])
    return answers, [
        (row, reasons[i]) for row, i in zip(rows.tolist(), column.index[rows].tolist(), strict=True)
    ]


def read_numbers(
    cells: Sequence[Cell], *, decimal: str, missing: Iterable[str], below_limit: BelowLimit | None = None
) -> Numbers:
    """A value column as numbers, with the missing and the faulty cells told apart.

    Parameters
    ----------
    cells : sequence of Cell, length n
        Texts, or numbers and None from a typed file. None is "no value" and therefore missing.
    decimal : str
        Decimal sign of texts, "." or ",". Thousands separators are never accepted.
    missing : iterable of str
        Texts that mean "no value". One that is itself a number also stands for that number written
        otherwise: "-999" covers "-999.0".
    below_limit : BelowLimit, optional
        How values below a detection limit are understood; without it "<0.5" is a fault.
    """
    texts = frozenset(missing)
    codes = frozenset(map(_reader(decimal), texts)) - {None}
    to_number = _reader(decimal)

    def verdict(cell: Cell) -> float | Fault:
        # The answer NaN means missing: a finite number or a fault are the only other endings.
        if cell is None or cell in texts:
            return math.nan
        if isinstance(cell, str):
            number = to_number(cell)
            if number is None:
                return math.nan if cell.strip() in texts else Fault(_not_a_number(cell.strip(), decimal))
        elif isinstance(cell, datetime):
            return Fault(f"{quoted(cell)} is a time, not a number. Correct columns.value, or the file.")
        else:
            number = float(cell)
        if number in codes:
            return math.nan
        if not math.isfinite(number):
            return Fault(f"{quoted(cell)} is too large for a number. Correct the file{_or_list(cell)}.")
        return number

    column = distinct(cells)
    marked: dict[int, tuple[float, int]] = {}
    if below_limit is not None:
        marked = {
            i: found
            for i, cell in enumerate(column.cells)
            if cell not in texts and (found := below_limit.plain(cell, decimal)) is not None
        }
        if marked:
            plain = [None if i in marked else cell for i, cell in enumerate(column.cells)]
            column = Distinct(plain, column.index)
    faults: list[tuple[int, str]] = []
    answers = _plain_numbers(column.cells, texts, codes, decimal)
    if answers is None:
        answers, faults = judged(column, verdict, math.nan)
    for i, (bound, _) in marked.items():
        answers[i] = bound
    value = np.array(answers, dtype=np.float64)[column.index]
    no_number = np.isnan(value)
    no_number[[row for row, _ in faults]] = False
    if not marked:
        return Numbers(value, no_number, faults)
    kinds = np.zeros(len(answers), dtype=np.int8)
    kinds[list(marked)] = [kind for _, kind in marked.values()]
    below = kinds[column.index]
    no_number &= below != NOT_DETECTED
    below[no_number] = 0  # by the rule "missing"
    return Numbers(value, no_number, faults, below)


def code_of(cell: Cell) -> str:
    """A code (station, quantity, unit, flag, stage) as text without surrounding blanks; "" for no value."""
    if cell is None:
        return ""
    if isinstance(cell, float) and cell.is_integer():
        return str(int(cell))
    return str(cell).strip()


def is_empty(cell: Cell) -> bool:
    """Whether a cell holds nothing but blanks."""
    return cell is None or (isinstance(cell, str) and not cell.strip())


def shown(cell: Cell) -> str:
    """A cell or line as it is kept in quarantine: bytes that are no text made visible, very long text cut."""
    if cell is None:
        return ""
    text = cell.isoformat(sep=" ") if isinstance(cell, datetime) else str(cell)
    if len(text) > MAX_KEPT:
        text = text[:MAX_KEPT] + "…"
    if not text.isprintable():
        text = (
            text.replace("\0", "\\x00").encode("utf-8", "surrogateescape").decode("utf-8", "backslashreplace")
        )
    return text


def quoted(cell: Cell) -> str:
    """A cell between quotation marks, short enough for a message."""
    text = shown(cell)
    return f'"{text}"' if len(text) <= MAX_QUOTED else f'"{text[:MAX_QUOTED]}…"'


_NUMBER = {
    sign: re.compile(
        rf"\s*[+-]?(?:[0-9]+(?:{re.escape(sign)}[0-9]*)?|{re.escape(sign)}[0-9]+)(?:[eE][+-]?[0-9]+)?\s*"
    )
    for sign in (".", ",")
}
_NOT_FINITE = re.compile(r"[+-]?(nan|inf|infinity)", re.IGNORECASE)
# What decoding leaves in place of bytes that are no text: surrogates for UTF-8, U+FFFD for UTF-16.
_UNDECODABLE = re.compile("[\udc80-\udcff\ufffd]")


def _plain_numbers(
    cells: Sequence[Any], texts: frozenset[str], codes: frozenset[float | None], decimal: str
) -> list[float] | None:
    """All cells at once, NaN where missing, if they are missing or plain decimal texts; None if some are neither."""
    words = [cell for cell in cells if cell not in texts]
    # Made of these characters alone, a text that float() accepts is a plain decimal number.
    try:
        if "".join(words).strip("0123456789+-eE" + decimal):
            return None
        if decimal == ",":
            words = [word.replace(",", ".") for word in words]
        numbers = list(map(float, words))
    except (TypeError, ValueError):
        return None
    if math.inf in numbers or -math.inf in numbers:
        return None
    if codes or len(words) < len(cells):
        found = iter(numbers)
        numbers = [math.nan if cell in texts else next(found) for cell in cells]
        return [math.nan if number in codes else number for number in numbers]
    return numbers


def _reader(decimal: str) -> Callable[[str], float | None]:
    """How a text becomes a number; None for texts that are no plain decimal number."""
    fullmatch = _NUMBER[decimal].fullmatch
    if decimal == ",":
        return lambda text: float(text.replace(",", ".")) if fullmatch(text) else None
    return lambda text: float(text) if fullmatch(text) else None


def _or_list(cell: Cell) -> str:
    return f', or, if this means "no value", list {quoted(cell)} under missing'


def _not_a_number(text: str, decimal: str) -> str:
    if not text:
        return 'The cell is empty. If that means "no value", list "" under missing of this source.'
    found, listed = quoted(text), _or_list(text)
    if _NOT_FINITE.fullmatch(text):
        return f"{found} is not a finite number. Correct the file{listed}."
    if "<" in text and _NUMBER[decimal].fullmatch(text.strip("<")):
        return (
            f'{found} is a bound, not a number. Say what it stands for: below_limit = "half" (or "limit", "zero", '
            '"missing") of this source.'
        )
    other = "," if decimal == "." else "."
    if _NUMBER[other].fullmatch(text):
        return f'{found} is not a number with decimal "{decimal}". Set decimal = "{other}" if the file means that.'
    return f"{found} is not a number. Correct the file{listed}."


def _undecodable_reason(cell: Hashable) -> str | None:
    parts = cell if isinstance(cell, tuple) else (cell,)
    for part in parts:
        if isinstance(part, str) and _UNDECODABLE.search(part):
            return (
                f"{quoted(part)} holds bytes that are no text. Set encoding to what the file is written in."
            )
    return None
