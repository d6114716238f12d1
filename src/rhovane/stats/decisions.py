"""What people know about days and pairs, as input to the watch, each from the day on which it was known.

A day is judged with what was known when it was judged: what becomes known later changes references and
judgements from then on, never what was decided before. So a replay of the whole history gives what the
nights gave one by one.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Flags = NDArray[np.bool_]
Floats = NDArray[np.float64]


@dataclass(frozen=True)
class SetAside:
    """Days of some pairs that never enter a reference: a fault, a calibration, works in the site log.

    Attributes
    ----------
    pairs : tuple of int
        Positions of the pairs.
    first, last : int
        Days concerned, both included; ``last`` None: no end is known yet.
    known : int
        First day that is judged with this knowledge; 0: it was always known.
    forgotten : int or None
        First day that is judged without it again; None: it still stands.
    judged : bool
        Whether the days themselves are still judged. False: they do not alarm either.
    """

    pairs: tuple[int, ...]
    first: int
    last: int | None = None
    known: int = 0
    forgotten: int | None = None
    judged: bool = False

    def stands(self, day: int) -> bool:
        """Whether this is known when a day is judged."""
        return self.known <= day and (self.forgotten is None or day < self.forgotten)


@dataclass(frozen=True)
class Decisions:
    """All that is known: days set aside, and new baselines as (pair, day).

    On the day of a new baseline every open change of the pair ends, and its reference starts anew.
    """

    set_aside: tuple[SetAside, ...] = ()
    new_baselines: tuple[tuple[int, int], ...] = ()

    def turning(self, day: int) -> bool:
        """Whether something becomes known, or is no longer, as this day is judged."""
        return any(day in (s.known, s.forgotten) for s in self.set_aside)

    def known_on(self, day: int, belongs: Flags, n_days: int) -> Knowledge:
        """What is known when ``day`` is judged; ``belongs`` (n_charts, n_pairs) says which pairs a chart is on."""
        barred = np.zeros((belongs.shape[1], n_days), dtype=bool)
        unjudged = np.zeros_like(barred)
        for one in self.set_aside:
            if one.stands(day):
                rows = slice(max(one.first, 0), None if one.last is None else max(one.last + 1, 0))
                barred[list(one.pairs), rows] = True
                if not one.judged:
                    unjudged[list(one.pairs), rows] = True
        share = belongs.astype(np.float64) @ barred
        return Knowledge(self, barred, unjudged, 2.0 * share > belongs.sum(axis=1, keepdims=True))

    def reaching_back(self, day: int) -> list[int]:
        """Pairs of which earlier days become known as set aside when ``day`` is judged."""
        news = [s for s in self.set_aside if s.known == day and s.first < day and s.stands(day)]
        return sorted({p for s in news for p in s.pairs})

    def renewed(self, pairs: NDArray[np.int64], day: int) -> bool:
        """Whether one of these pairs is given a new baseline on this day."""
        return any(day == when and pair in pairs for pair, when in self.new_baselines)

    def up_to(self, n_days: int) -> Decisions:
        """The part that bears on the judgement of the first days; in one order, so that equal parts are equal."""
        known = {
            replace(
                one,
                pairs=tuple(sorted(one.pairs)),
                last=n_days - 1 if one.last is None else min(one.last, n_days - 1),
                forgotten=None if one.forgotten is None or one.forgotten >= n_days else one.forgotten,
            )
            for one in self.set_aside
            if one.known < n_days and one.first < n_days
        }
        return Decisions(
            tuple(sorted(known, key=repr)), tuple(sorted({b for b in self.new_baselines if b[1] < n_days}))
        )


@dataclass(frozen=True)
class Knowledge:
    """Decisions as known on one day, as flags of shape (n_pairs, n_days).

    ``barred`` days enter no reference, ``unjudged`` ones do not alarm either; ``charts`` (n_charts, n_days)
    are those on which most pairs of a chart are barred.
    """

    decisions: Decisions
    barred: Flags
    unjudged: Flags
    charts: Flags

    def referable(self, usable: Flags) -> Flags:
        """The usable days that may enter a reference."""
        return usable & ~self.barred if self.decisions.set_aside else usable

    def outputs(self, past: Floats) -> Floats:
        """Past outputs of the charts that may say how widely they scatter; NaN for the others."""
        return np.where(self.charts, np.nan, past) if self.decisions.set_aside else past


def checked_decisions(
    set_aside: Sequence[SetAside], new_baselines: Sequence[tuple[int, int]], n_pairs: int
) -> Decisions:
    """The decisions as one; ValueError where one names a pair that is not there or days in the wrong order."""
    for i, one in enumerate(set_aside):
        if not one.pairs or not all(0 <= p < n_pairs for p in one.pairs):
            raise ValueError(f"set_aside[{i}] names pairs {one.pairs}; choose from 0 to {n_pairs - 1}.")
        if one.last is not None and one.last < one.first:
            raise ValueError(f"set_aside[{i}] ends on day {one.last}, before its first day {one.first}.")
        if one.forgotten is not None and one.forgotten < one.known:
            raise ValueError(
                f"set_aside[{i}] is forgotten on day {one.forgotten}, before it is known on {one.known}."
            )
    for i, (pair, _day) in enumerate(new_baselines):
        if not 0 <= pair < n_pairs:
            raise ValueError(f"new_baselines[{i}] names pair {pair}; choose from 0 to {n_pairs - 1}.")
    return Decisions(tuple(set_aside), tuple((int(p), int(d)) for p, d in new_baselines))
