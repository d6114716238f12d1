"""What the statistics accept: arrays, windows and lags are checked here, in one voice.

Every refusal is a ``ValueError`` that says what was found, what is allowed and what to do.
"""

from __future__ import annotations

from collections.abc import Iterable
from math import ceil
from operator import index
from typing import Any, Literal, get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Whole = int | np.integer[Any]
Method = Literal["spearman", "kendall"]

SMALLEST_WINDOW = 8  # rows; below, hardly any rank correlation differs from chance
LARGEST_WINDOW = 4096  # rows; centred doubled ranks then fit 16 bits
DEFAULT_COVERAGE = 0.75  # of the window's pairs; the data-capture rule of most networks
LARGEST_EXACT_INTEGER = 2**53  # beyond, neighbouring integers share one float64


def as_series(values: ArrayLike, name: str) -> Floats:
    """Return one series as a contiguous float64 array; NaN marks a row without an observation.

    Parameters
    ----------
    values : array-like of float or int, shape (n_rows,)
        Array, pandas Series or list; read-only and strided arrays are fine. Masked entries become NaN.
    name
        How messages call it.

    Raises
    ------
    ValueError
        Not numeric, not one-dimensional, infinite values, or integers too large to be told apart.
    """
    # Asking for "mask" first spares everyone else the loading of numpy.ma.
    if hasattr(values, "mask") and isinstance(values, np.ma.MaskedArray):
        values = np.ma.filled(values.astype(np.float64), np.nan)
    found = np.asarray(values)
    if found.dtype.kind == "O":
        try:
            found = np.asarray(values, dtype=np.float64)
        except (TypeError, ValueError) as problem:
            raise ValueError(
                f"{name} holds values that are not numbers; give floats, with NaN where there is no observation."
            ) from problem
    if found.dtype.kind not in "fiu":
        raise ValueError(f"{name} has type {found.dtype}; floats or integers are allowed; convert it first.")
    if found.ndim != 1:
        raise ValueError(
            f"{name} has {found.ndim} dimensions (shape {found.shape}); one is allowed; pass one series at a time."
        )
    if (
        found.dtype.kind in "iu"
        and found.size
        and max(abs(int(found.max())), abs(int(found.min()))) > (LARGEST_EXACT_INTEGER)
    ):
        raise ValueError(
            f"{name} holds integers beyond ±2**53, which float64 cannot tell apart; subtract a constant first."
        )
    floats = np.ascontiguousarray(found, dtype=np.float64)
    infinite = np.flatnonzero(np.isinf(floats))
    if infinite.size:
        raise ValueError(
            f"{name} holds {infinite.size} infinite values, the first in row {infinite[0]}; "
            "finite values and NaN are allowed; replace them by NaN or leave the rows out."
        )
    return floats


def as_pair(x: ArrayLike, y: ArrayLike) -> tuple[Floats, Floats]:
    """Return two series of equal length; see :func:`as_series`."""
    first, second = as_series(x, "x"), as_series(y, "y")
    if len(first) == 0 == len(second):
        raise ValueError("x and y have no rows; at least one is needed; check what was selected.")
    if len(first) != len(second):
        raise ValueError(
            f"x has {len(first)} rows and y has {len(second)}; both must share one grid; "
            "put them on the same hours, with NaN where one is missing."
        )
    return first, second


def whole_number(value: Any, name: str) -> int:
    """Return ``value`` as an int; anything that is not a whole number is refused."""
    if isinstance(value, (bool, np.bool_)):
        raise ValueError(f"{name}={value!r} is not a whole number; give an integer.")
    try:
        return index(value)
    except TypeError as problem:
        raise ValueError(f"{name}={value!r} is not a whole number; give an integer.") from problem


def checked_method(method: str) -> Method:
    """Return the method's name if it is known."""
    for known in get_args(Method):
        if method == known:
            return known  # type: ignore[no-any-return]
    raise ValueError(f'method={method!r} is not known; choose "spearman" or "kendall".')


def checked_window(window: Any, n_rows: int | None = None) -> int:
    """Return the window's length in rows, within 8 to 4096 and (if given) within the data."""
    length = whole_number(window, "window")
    if not SMALLEST_WINDOW <= length <= LARGEST_WINDOW:
        raise ValueError(
            f"window={length} rows is out of range; choose from {SMALLEST_WINDOW} to {LARGEST_WINDOW}."
        )
    if n_rows is not None and length > n_rows:
        raise ValueError(
            f"window={length} rows is longer than the data ({n_rows} rows); choose a shorter one."
        )
    return length


def checked_step(step: Any) -> int:
    """Return the rows between the ends of neighbouring windows, 1 or more."""
    stride = whole_number(step, "step")
    if stride < 1:
        raise ValueError(f"step={stride} rows is out of range; choose 1 or more.")
    return stride


def checked_min_pairs(min_pairs: Any, window: int) -> int:
    """Return the fewest pairs for a statistic: 75 % of the window, rounded up, unless given."""
    if min_pairs is None:
        return ceil(DEFAULT_COVERAGE * window)
    fewest = whole_number(min_pairs, "min_pairs")
    if not 2 <= fewest <= window:
        raise ValueError(
            f"min_pairs={fewest} cannot be met by window={window} rows; choose a value from 2 to {window}."
        )
    return fewest


def checked_lags(lags: Iterable[Any], n_rows: int) -> Integers:
    """Return the lags in the order given; each must leave at least one row in common."""
    if isinstance(lags, (str, bytes)) or not isinstance(lags, Iterable):
        raise ValueError(
            f"lags={lags!r} is not a sequence of whole numbers; give for example (0,) or range(-3, 4)."
        )
    found = [whole_number(lag, "a lag") for lag in lags]
    if not found:
        raise ValueError("lags is empty; give at least one, for example (0,).")
    if len(set(found)) < len(found):
        raise ValueError(f"lags holds a value twice ({found}); give each lag once.")
    beyond = [lag for lag in found if abs(lag) >= n_rows]
    if beyond:
        raise ValueError(
            f"lag {beyond[0]} reaches beyond the data ({n_rows} rows); choose lags within ±{n_rows - 1}."
        )
    return np.array(found, dtype=np.int64)
