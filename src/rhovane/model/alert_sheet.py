"""What an alert tells beside its two correlations: sizes with intervals, counter-evidence, alternatives."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass

from rhovane.model.estimates import CorrelationEstimate


@dataclass(frozen=True)
class Bounded:
    """A value with its 95 % interval; None where there is none, and ``reason`` says why."""

    value: float | None
    low: float | None = None
    high: float | None = None
    reason: str | None = None


@dataclass(frozen=True)
class SeriesLevel:
    """One series before and after: medians in ``unit``, their ratio, and the ratio of its interquartile ranges."""

    series: str
    unit: str
    before: Bounded
    after: Bounded
    ratio: Bounded
    spread_ratio: float | None


@dataclass(frozen=True)
class Witness:
    """A pair that has something to say for or against the suspect.

    ``relation`` is "own" (a pair of the suspect), "partner" (shares a series with one of those) or "alike" (the same
    two quantities elsewhere). ``before`` and ``after`` are means of daily correlations, ``z`` the change in
    standard deviations; ``moved`` None: unclear, or too few days to say.
    """

    pair: str
    relation: str
    before: float | None
    after: float | None
    z: float | None
    n_days: int
    moved: bool | None


@dataclass(frozen=True)
class EpisodeDays:
    """Days without which the correlation is back at its earlier value; none where it is no episode."""

    days: tuple[dt.date, ...]
    without: float | None
    reason: str | None = None


@dataclass(frozen=True)
class Hint:
    """What a change is consistent with, never what it is: what speaks for it, what against, what to check."""

    text: str
    supports: tuple[str, ...] = ()
    against: tuple[str, ...] = ()
    check: str = ""


@dataclass(frozen=True)
class AlertSheet:
    """The companion facts of an alert, as of ``as_of`` and readings up to ingest ``data_version``.

    ``change`` is after less before on the atanh scale; ``slope_before`` and ``slope_after`` are Theil-Sen slopes of
    the second series on the first; ``year_earlier`` the correlation at the same season a year before.
    """

    as_of: dt.date
    data_version: int
    change: Bounded
    levels: tuple[SeriesLevel, ...]
    slope_before: Bounded
    slope_after: Bounded
    year_earlier: CorrelationEstimate
    as_year_earlier: bool
    episode: EpisodeDays
    witnesses: tuple[Witness, ...]

    def of(self, *relations: str, moved: bool) -> list[str]:
        """Pairs of these relations that moved, or that held."""
        return [w.pair for w in self.witnesses if w.relation in relations and w.moved is moved]
