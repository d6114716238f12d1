"""What an alert sheet and a pair sheet hold: plain arrays and facts, gathered above and drawn elsewhere."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rhovane.review.alert_list import AlertEntry
from rhovane.review.nearby import Nearby
from rhovane.review.provenance import Provenance
from rhovane.review.relations import WindowTrack
from rhovane.settings import PairSettings, SeriesSettings
from rhovane.store import NightRecord

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class EvidenceTrack:
    """What the change watch saw of one pair, day by day; all arrays have shape (n_days,).

    ``evidence`` and ``threshold`` are logarithms of the chart value and its limit (NaN: learning, changed or not
    scored); ``state`` is a :class:`rhovane.stats.watch.DayState`; ``score`` says which daily score was watched.
    """

    day: NDArray[np.datetime64]
    evidence: Floats
    threshold: Floats
    state: NDArray[np.int8]
    score: str


@dataclass(frozen=True)
class HourlyReadings:
    """Both series of a pair hour by hour, NaN where there is no observation or the recipe keeps no hour.

    ``hour`` is the start of the hour in seconds since 1970 UTC.
    """

    hour: NDArray[np.int64]
    first: Floats
    second: Floats


@dataclass(frozen=True)
class RankScatter:
    """Joint hours of a stretch of days as shares of their rank, 0 (lowest) to 1 (highest), ties at their mean."""

    first_day: dt.date
    last_day: dt.date
    x: Floats
    y: Floats


@dataclass(frozen=True)
class Neighbour:
    """Another pair of the series concerned: its correlation in the windows before and after the onset.

    ``apart`` tells whether the two 95 % intervals do not touch; None where one of them is not known. ``named`` tells
    whether the alert counts the pair among the changed ones.
    """

    key: str
    shares: str
    before: float | None
    after: float | None
    apart: bool | None
    named: bool


@dataclass(frozen=True)
class PairPictures:
    """One pair over a stretch of days, ready to be drawn."""

    recipe: PairSettings
    first: SeriesSettings
    second: SeriesSettings
    windows: WindowTrack
    evidence: EvidenceTrack | None
    reference_low: float | None
    reference_high: float | None


@dataclass(frozen=True)
class AlertSheetView:
    """Everything about one alert. ``pictures`` is None where the settings no longer watch the pair."""

    entry: AlertEntry
    pictures: PairPictures | None
    before: RankScatter | None
    after: RankScatter | None
    readings: HourlyReadings | None
    neighbours: tuple[Neighbour, ...]
    nearby: Nearby
    night: NightRecord | None
    provenance: Provenance | None = None


@dataclass(frozen=True)
class PairSheetView:
    """Everything about one watched pair."""

    pictures: PairPictures
    entries: tuple[AlertEntry, ...]
    last_windows: dict[str, NDArray[Any]]
