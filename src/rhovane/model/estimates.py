"""A rank correlation as it is recorded: never without what it rests on."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass


@dataclass(frozen=True)
class CorrelationEstimate:
    """A rank correlation with what it rests on; NaN-free: None where it cannot be assessed.

    ``reason`` says why there is no correlation or no significance, ``interval_reason`` why there is no interval.
    """

    first_day: dt.date
    last_day: dt.date
    statistic: float | None
    n_pairs: int
    n_effective: float | None
    low: float | None
    high: float | None
    reason: str | None = None
    interval_reason: str | None = None
