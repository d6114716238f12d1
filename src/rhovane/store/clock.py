"""Times at the edge of the store: datetimes outside, naive UTC timestamps and whole seconds inside."""

from __future__ import annotations

import datetime as dt

import numpy as np
from numpy.typing import NDArray

EPOCH = dt.datetime(1970, 1, 1)


def naive_utc(moment: dt.datetime) -> dt.datetime:
    """A moment as the store writes it; a moment without zone is taken as UTC already."""
    return moment if moment.tzinfo is None else moment.astimezone(dt.UTC).replace(tzinfo=None)


def aware_utc(moment: dt.datetime) -> dt.datetime:
    """A stored moment with its zone said."""
    return moment.replace(tzinfo=dt.UTC)


def from_seconds(seconds: int) -> dt.datetime:
    """Whole seconds since 1970 UTC as a moment with its zone said."""
    return (EPOCH + dt.timedelta(seconds=int(seconds))).replace(tzinfo=dt.UTC)


def microseconds(moment: dt.datetime) -> int:
    """Whole microseconds since 1970 UTC, exactly."""
    return (naive_utc(moment) - EPOCH) // dt.timedelta(microseconds=1)


def timestamps(seconds: NDArray[np.int64]) -> NDArray[np.datetime64]:
    """Whole seconds since 1970 UTC as an array that DuckDB reads as TIMESTAMP."""
    return np.asarray(seconds, np.int64).astype("datetime64[s]").astype("datetime64[us]")


def seconds_of(values: NDArray[np.datetime64]) -> NDArray[np.int64]:
    """TIMESTAMP values fetched from DuckDB as whole seconds since 1970 UTC."""
    return np.asarray(values).astype("datetime64[s]").astype(np.int64)
