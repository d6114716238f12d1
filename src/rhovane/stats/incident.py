"""What the watch reports of a change: when, which pairs, where to look first, and how it ended."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.chart import NO_RELATION
from rhovane.stats.compiled import compiled

Floats = NDArray[np.float64]

LONGEST_ONSET_DAYS = 42
"""Days back from the alarm within which the onset is sought."""


@dataclass(frozen=True)
class Judgement:
    """Where to look first, as seen on one day.

    ``suspect`` is ("pair", position), ("series", key) or ("station", name); ``pairs`` the positions
    concerned and ``lead`` the one that stands out most; ``kind`` is "strength", or "timing" where the best
    lag moved, by ``lag_steps``.
    """

    day: int
    suspect: tuple[str, object]
    pairs: tuple[int, ...]
    lead: int
    kind: str
    lag_steps: int


@dataclass(frozen=True)
class Incident:
    """A change of relationships, from the day that raised it to the day it ended.

    Attributes
    ----------
    alarm_day, onset_day : int
        Day whose evidence crossed the threshold, and likeliest first day of the change.
    judged : Judgement
        As seen on the alarm day; never revised.
    settled : Judgement or None
        As seen seven days later; None until then.
    direction : str
        "weaker" where the absolute correlation of the lead pair fell, else "stronger"; where its
        reference is near zero, "weaker" for a fall and "stronger" for a rise of its value.
    before, after : float
        Daily correlation of the lead pair in its reference, and from the onset to the alarm day.
    evidence, threshold : float
        Log evidence of the chart that crossed, and its limit.
    end_day : int or None
        Last day of the incident; None while it lasts. ``ending`` is "returned" or "new baseline".
    onset_range : (int, int)
        First and last day that the onset may have been, with a probability of 90 %.
    """

    alarm_day: int
    onset_day: int
    judged: Judgement
    settled: Judgement | None
    direction: str
    before: float
    after: float
    evidence: float
    threshold: float
    end_day: int | None
    ending: str | None
    onset_range: tuple[int, int]

    @property
    def pairs(self) -> tuple[int, ...]:
        """Pairs concerned, as judged on the alarm day."""
        return self.judged.pairs

    @property
    def lead(self) -> int:
        """The pair that stood out most on the alarm day."""
        return self.judged.lead

    @property
    def suspect(self) -> tuple[str, object]:
        """Where to look first, as judged on the alarm day."""
        return self.judged.suspect

    @property
    def lag_steps(self) -> int:
        """Steps by which the suspect seemed late on the alarm day; 0 where the best lag had not moved."""
        return self.judged.lag_steps

    @property
    def kind(self) -> str:
        """ "strength" or "timing", as judged on the alarm day."""
        return self.judged.kind


@dataclass
class OpenIncident:
    """An incident that has not ended, with what the watch needs to follow it."""

    alarm_day: int
    onset_day: int
    chart: int
    evidence: float
    threshold: float
    onset_range: tuple[int, int]
    before: float = np.nan
    after: float = np.nan
    pairs: NDArray[np.int64] = field(default_factory=lambda: np.empty(0, np.int64))
    reach: NDArray[np.bool_] = field(default_factory=lambda: np.empty(0, bool))
    lead: int = -1
    first: Judgement | None = None
    last: Judgement | None = None
    settled: bool = False
    change: Floats = field(default_factory=lambda: np.empty(0))
    back: float = 0.0

    def closed(self, end_day: int | None, ending: str | None) -> Incident:
        """As reported."""
        assert self.first is not None
        return Incident(
            self.alarm_day,
            self.onset_day,
            self.first,
            self.last if self.settled else None,
            change_direction(self.before, self.after),
            float(np.tanh(self.before)),
            float(np.tanh(self.after)),
            self.evidence,
            self.threshold,
            end_day,
            ending,
            self.onset_range,
        )


def change_direction(before: float, after: float) -> str:
    """ "weaker" or "stronger", from atanh correlations before and after; see :class:`Incident`."""
    if abs(np.tanh(before)) < NO_RELATION:
        return "stronger" if after > before else "weaker"
    return "stronger" if abs(after) > abs(before) and before * after > 0 else "weaker"


@compiled
def onset_day(z: Floats, day: int, first: int) -> int:
    """Likeliest first day of a shift that lasts to ``day``: where (sum of z)² / n is largest."""
    total = 0.0
    n = 0
    best = 0.0
    onset = day
    for earlier in range(day, max(first, day - LONGEST_ONSET_DAYS + 1) - 1, -1):
        if not np.isnan(z[earlier]):
            total += z[earlier]
            n += 1
            if total * total / n > best:
                best = total * total / n
                onset = earlier
    return onset


def weighted_mean(score: Floats, weight: Floats) -> float:
    """Mean score of some days, weighted; NaN without any."""
    known = np.isfinite(score)
    return float(np.average(score[known], weights=weight[known])) if known.any() else float("nan")
