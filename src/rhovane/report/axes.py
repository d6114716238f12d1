"""Scales and their ticks."""

from __future__ import annotations

import datetime as dt
import math
from dataclasses import dataclass

import numpy as np

DAY_S = 86_400
MONTHS = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")
TICK_PX = 74  # px; least distance between two time labels
EPOCH = dt.date(1970, 1, 1)


@dataclass(frozen=True)
class Scale:
    """A linear scale from values to px."""

    low: float
    high: float
    begin: float
    end: float

    def __call__(self, value: float) -> float:
        """Where a value stands."""
        return self.begin + (value - self.low) / (self.high - self.low) * (self.end - self.begin)


def nice_ticks(low: float, high: float, most: int = 6) -> list[float]:
    """Round numbers inside a range, ``most`` of them or fewer."""
    rough = (high - low) / max(most, 1)
    power = 10.0 ** math.floor(math.log10(rough))
    step = next(m * power for m in (1, 2, 5, 10) if m * power >= rough * 0.999)
    first = math.ceil(low / step - 1e-9)
    return [round(i * step, 10) for i in range(first, math.floor(high / step + 1e-9) + 1)]


def rounded_range(values: np.ndarray, *, include: tuple[float, ...] = ()) -> tuple[float, float]:
    """A range that holds all finite values with a little air; 0 to 1 when there are none."""
    seen = np.concatenate([values[np.isfinite(values)], np.array(include, dtype=float)])
    if not len(seen):
        return 0.0, 1.0
    low, high = float(seen.min()), float(seen.max())
    air = 0.06 * (high - low) or 0.5
    return low - air, high + air


def tick_label(value: float) -> str:
    """A number on an axis, with a true minus sign."""
    return f"{value:g}".replace("-", "−")


def time_ticks(low: float, high: float, width_px: float) -> list[tuple[float, str]]:
    """Places (seconds) and words of the labels of a time axis; whole days, weeks or months."""
    most = max(2, int(width_px / TICK_PX))
    n_days = (high - low) / DAY_S
    if n_days <= most * 7:
        step = next((s for s in (1, 2, 7) if n_days / s <= most), 7)
        first = math.ceil(low / DAY_S)
        days = [d for d in range(first, math.floor(high / DAY_S) + 1) if (d - first) % step == 0]
        return [(d * DAY_S, _day_label(EPOCH + dt.timedelta(days=d))) for d in days]
    step = next((s for s in (1, 2, 3, 6, 12) if n_days / 30.4 / s <= most), 24)
    day = EPOCH + dt.timedelta(days=math.ceil(low / DAY_S))
    year, month = day.year, day.month + (day.day > 1)
    found = []
    while True:
        year, month = year + (month - 1) // 12, (month - 1) % 12 + 1
        second = (dt.date(year, month, 1) - EPOCH).days * DAY_S
        if second > high:
            return found
        if (month - 1) % step == 0:
            found.append((float(second), f"{MONTHS[month - 1]} {year}"))
        month += 1


def _day_label(day: dt.date) -> str:
    return f"{day.day} {MONTHS[day.month - 1]}"


def day_seconds(days: np.ndarray) -> np.ndarray:
    """Days (datetime64[D]) as seconds since 1970 of the network's standard clock."""
    return days.astype("datetime64[D]").astype(np.int64) * DAY_S


def seconds_of(day: dt.date) -> float:
    """Midnight of a day in seconds since 1970 of the network's standard clock."""
    return float((day - EPOCH).days * DAY_S)
