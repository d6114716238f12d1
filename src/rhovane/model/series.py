"""Series and pairs: what is measured, and which relationships are watched."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from typing import Literal

SeriesKind = Literal["linear", "circular", "accumulated"]


@dataclass(frozen=True)
class Segment:
    """From ``first_day`` on (standard time) a series was measured with something else, or somewhere else."""

    first_day: dt.date
    what: str


@dataclass(frozen=True)
class Series:
    """One quantity at one station in one unit.

    ``key`` is ``STATION.quantity``; ``step_minutes`` is the regular interval; values of a ``circular``
    series (wind direction) are never ranked; an ``accumulated`` series (rain) holds sums over the step.
    ``segments`` are its changes of instrument and place, in order of day.
    """

    key: str
    unit: str
    kind: SeriesKind = "linear"
    step_minutes: int = 60
    label: str = ""
    segments: tuple[Segment, ...] = ()

    @property
    def station(self) -> str:
        """The place that measures: the part of the key before the first dot."""
        return self.key.partition(".")[0]

    @property
    def quantity(self) -> str:
        """What is measured: the part of the key after the first dot."""
        return self.key.partition(".")[2]


@dataclass(frozen=True)
class Pair:
    """Two series whose relationship is watched, with the recipe for it.

    ``key`` names the pair in the store and on every page. ``recipe_hash`` changes when anything that
    alters its numbers changes, so that results of two recipes are never mixed.
    """

    key: str
    first: str
    second: str
    recipe_hash: str
    label: str = ""
