"""The clocks of the machine: the one on the wall, and two that nobody can set."""

from __future__ import annotations

import datetime as dt
import time
from dataclasses import dataclass
from typing import Protocol

MOVED_S = (
    2.0  # a wall clock that gains or loses more between two looks was set; time services slew by far less
)


class Clock(Protocol):
    """What the service knows of time."""

    def now(self) -> dt.datetime:
        """The wall clock (aware, UTC); may be set."""

    def awake(self) -> float:
        """Seconds that the machine was awake, from any zero; only grows."""

    def elapsed(self) -> float:
        """Seconds that have passed, suspended or not, from any zero; only grows."""


class SystemClock:
    """The clocks of this machine."""

    def now(self) -> dt.datetime:
        """The wall clock."""
        return dt.datetime.now(dt.UTC)

    def awake(self) -> float:
        """The monotonic clock, which stands still while the machine is suspended."""
        return time.monotonic()

    def elapsed(self) -> float:
        """The clock since boot where there is one, else the monotonic clock."""
        since_boot = getattr(time, "CLOCK_BOOTTIME", None)
        return time.monotonic() if since_boot is None else time.clock_gettime(since_boot)


@dataclass(frozen=True)
class Look:
    """All clocks at one moment."""

    now: dt.datetime
    awake: float
    elapsed: float

    @classmethod
    def at(cls, clock: Clock) -> Look:
        """The clocks as they stand."""
        return cls(clock.now(), clock.awake(), clock.elapsed())


@dataclass(frozen=True)
class Movement:
    """What happened between two looks: seconds by which the wall clock was set, and seconds suspended."""

    set_s: float
    suspended_s: float

    @property
    def was_set(self) -> bool:
        """Whether somebody set the wall clock."""
        return abs(self.set_s) > MOVED_S

    @property
    def was_suspended(self) -> bool:
        """Whether the machine slept."""
        return self.suspended_s > MOVED_S


def movement(before: Look, after: Look) -> Movement:
    """What happened to the clocks between two looks."""
    elapsed = after.elapsed - before.elapsed
    return Movement(
        (after.now - before.now).total_seconds() - elapsed, elapsed - (after.awake - before.awake)
    )
