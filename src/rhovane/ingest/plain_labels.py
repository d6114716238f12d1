"""Time labels of fixed width, all at once: digits where the pattern has digits, and nothing else.

Labels that are anything but well formed are left to :mod:`rhovane.ingest.clock`, which says what is wrong.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

DAY_S = 86_400  # seconds
DIGITS = {"Y": 4, "m": 2, "d": 2, "H": 2, "M": 2, "S": 2}
HIGHEST = {"H": 23, "M": 59, "S": 59}
ZERO, NINE = ord("0"), ord("9")


def plain_labels(cells: Sequence[Any], time_format: str) -> NDArray[np.int64] | None:
    """Clock readings in seconds since 1970-01-01; None if any label needs a closer look.

    Parameters
    ----------
    cells : sequence of Cell, length n
        Distinct labels.
    time_format : str
        strptime pattern.
    """
    layout = _layout(time_format)
    if layout is None or not cells or not all(isinstance(cell, str) for cell in cells):
        return None
    fields, literals, width = layout
    if set(map(len, cells)) != {width}:
        return None
    joined = "".join(cells)
    if not joined.isascii():
        return None
    text = np.frombuffer(joined.encode("ascii"), dtype=np.uint8).reshape(len(cells), width)
    if any((text[:, at] != ord(letter)).any() for at, letter in literals):
        return None
    part: dict[str, NDArray[np.int64]] = {}
    for name, at in fields.items():
        digits = text[:, at : at + DIGITS[name]]
        if ((digits < ZERO) | (digits > NINE)).any():
            return None
        part[name] = (digits.astype(np.int64) - ZERO) @ 10 ** np.arange(DIGITS[name])[::-1]
        if part[name].max() > HIGHEST.get(name, 9999):
            return None
    year, month, day = part["Y"], part["m"], part["d"]
    if year.min() < 1 or month.min() < 1 or month.max() > 12:
        return None
    months = ((year - 1970) * 12 + month - 1).astype("datetime64[M]")
    first, following = (m.astype("datetime64[D]").astype(np.int64) for m in (months, months + 1))
    if (day < 1).any() or (day > following - first).any():
        return None
    seconds = (first + day - 1) * DAY_S
    for name, unit in (("H", 3600), ("M", 60), ("S", 1)):
        if name in part:
            seconds = seconds + part[name] * unit
    return seconds


def _layout(time_format: str) -> tuple[dict[str, int], list[tuple[int, str]], int] | None:
    """Where the numbers and the other letters of a pattern stand, and its width; None for other patterns."""
    fields: dict[str, int] = {}
    literals: list[tuple[int, str]] = []
    at = 0
    letters = iter(time_format)
    for letter in letters:
        if letter != "%":
            literals.append((at, letter))
            at += 1
            continue
        name = next(letters, "")
        if name not in DIGITS or name in fields:
            return None
        fields[name] = at
        at += DIGITS[name]
    if not {"Y", "m", "d"} <= fields.keys() or not time_format.isascii():
        return None
    return fields, literals, at
