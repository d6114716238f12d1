"""What the readings of a night show to be wrong with the data, kind by kind.

Each look covers what is new or revised and as much before it as its rule needs. What it finds from its ``since`` on is
what a look at the whole history would find there.
"""

from __future__ import annotations

import datetime as dt
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rhovane.model import NoteKind
from rhovane.pipeline.step_memory import StepMemory, kept, steps_of_days
from rhovane.prepare import Days, Grid
from rhovane.settings import Settings
from rhovane.stats import data_faults as faults
from rhovane.stats import level_step as steps
from rhovane.stats.unit_switch import keeps_course, matching_offset, matching_unit, shifted_zero

HOUR_S = 3600
DAY_S = 86_400
WEEK_DAYS = 7
DIFFERENCE_UNITS = ("K", "degC", "degF")  # a temperature has no natural zero: steps are differences
SAME_CAUSE_DAYS = (
    3  # days apart at which steps of two series of a station have one cause outside the instruments
)
LOOKBACK_DAYS = 3 * faults.DRY_HOURS // 24  # no look reaches further back than this before what is new


@dataclass(frozen=True)
class Finding:
    """A stretch of hours, or a moment, with something wrong; seconds since 1970 UTC, ``end`` None while it lasts."""

    subject: str
    kind: NoteKind
    begin: int
    end: int | None
    facts: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True)
class Look:
    """All findings of one family that touch the time from ``since`` on.

    A finding that begins before ``exact`` may have begun earlier than the look could see. ``subjects`` are those looked
    at; None: all of the family.
    """

    family: str
    since: int
    exact: int
    findings: tuple[Finding, ...]
    subjects: frozenset[str] | None = None


@dataclass(frozen=True)
class Network:
    """What the looks need to know of the series, in the order of the grid's columns."""

    keys: tuple[str, ...]
    first_hour: NDArray[np.int64]
    accumulates: NDArray[np.bool_]
    by_ratio: NDArray[np.bool_]
    groups: tuple[tuple[int, ...], ...]  # linear series of one quantity and unit
    gauges: tuple[tuple[int, ...], ...]  # accumulating series of one quantity

    @classmethod
    def of(cls, settings: Settings, keys: Sequence[str], first_hours: Mapping[str, str]) -> Network:
        """The series of the settings, and the first hour ever read of each (ISO text)."""
        known = settings.series_by_key()
        series = [known[key] for key in keys]
        never = int(dt.datetime.max.replace(tzinfo=dt.UTC).timestamp())
        first = [
            int(dt.datetime.fromisoformat(first_hours[k]).timestamp()) if k in first_hours else never
            for k in keys
        ]

        def alike(kind: str) -> tuple[tuple[int, ...], ...]:
            found: dict[tuple[str, str], list[int]] = {}
            for i, one in enumerate(series):
                if one.kind == kind:
                    found.setdefault((one.quantity, one.unit), []).append(i)
            return tuple(tuple(members) for members in found.values())

        return cls(
            tuple(keys),
            np.array(first, dtype=np.int64),
            np.array([s.kind == "accumulated" for s in series]),
            np.array([s.unit not in DIFFERENCE_UNITS for s in series]),
            alike("linear"),
            alike("accumulated"),
        )


@dataclass(frozen=True)
class Looker:
    """The grid of a night and the first day that is new or revised.

    ``new_from`` is that day series by series where it is known; with ``step_memory`` the days before are not judged again.
    """

    settings: Settings
    network: Network
    grid: Grid
    days: Days
    since: dt.date
    new_from: tuple[dt.date, ...] | None = None
    step_memory: StepMemory | None = None

    def looks(self) -> tuple[Look, ...]:
        """Every kind of finding about series but steps in level."""
        return (self.gaps(), self.stuck(), self.low_coverage(), self.dry(), self.ties())

    def gaps(self) -> Look:
        """Series without observation for longer than allowed; an open one is a series that is behind."""
        longest = self.settings.data_notes.gap_hours
        start, values = self._hours(longest + 2)
        first_row = (self.network.first_hour - start) // HOUR_S
        runs = faults.gap_runs(np.isfinite(values), first_row, longest)
        return self._stretches(NoteKind.GAP, start, len(values), runs, lambda _value: {})

    def stuck(self) -> Look:
        """Series that repeat one value."""
        start, values = self._hours(faults.LONGEST_STUCK_HOURS + faults.USUAL_HOURS + 2)
        runs = faults.stuck_runs(values, self.network.accumulates, self.settings.data_notes.stuck_hours)
        return self._stretches(NoteKind.STUCK, start, len(values), runs, lambda value: {"value": value})

    def dry(self) -> Look:
        """Gauges that stay at zero while their neighbours are wet."""
        start, values = self._hours(3 * faults.DRY_HOURS)
        wet_hours = self.settings.data_notes.dry_hours
        found: list[Finding] = []
        for group in self.network.gauges:
            for column in group:
                others = [i for i in group if i != column]
                if others:
                    names = ", ".join(self.network.keys[i] for i in others)
                    runs = faults.dry_runs(values[:, column], values[:, others], wet_hours)
                    one = faults.Runs(runs.series + column, runs.begin, runs.end, runs.measure)
                    look = self._stretches(
                        NoteKind.DRY,
                        start,
                        len(values),
                        one,
                        lambda amount, names=names: {
                            "wet_hours": wet_hours,
                            "amount": rounded(amount),
                            "neighbours": names,
                        },
                    )
                    found += look.findings
        clipped = start > self.grid.start
        exact = start + faults.DRY_HOURS * HOUR_S if clipped else start
        return Look(NoteKind.DRY.value, self._since_s - HOUR_S, exact, tuple(found))

    def low_coverage(self) -> Look:
        """Days whose window holds too few observations of a series."""
        correlation = self.settings.correlation
        window = max(1, correlation.window_hours // 24)
        start, values = self._hours(24 * window)
        per_day = np.isfinite(values).reshape(-1, 24, values.shape[1]).sum(axis=1)
        first_day = -((start - self.network.first_hour) // DAY_S)
        runs = faults.low_coverage_runs(per_day, first_day, window, correlation.min_coverage)
        found = []
        for column, begin, end, share in zip(runs.series, runs.begin, runs.end, runs.measure, strict=True):
            if int(end) >= len(per_day) - self._new_days - 1:
                found.append(
                    Finding(
                        self.network.keys[column],
                        NoteKind.LOW_COVERAGE,
                        start + DAY_S * int(begin),
                        None if end == len(per_day) - 1 else start + DAY_S * int(end) + 23 * HOUR_S,
                        {"share": rounded(share), "window_days": window},
                    )
                )
        return Look(NoteKind.LOW_COVERAGE.value, self._since_s - DAY_S, self._since_s, tuple(found))

    def ties(self) -> Look:
        """Weeks from which on equal values are much more frequent: rounding, or a limit below which one value stands."""
        first = self.grid_day(self.since) // WEEK_DAYS * WEEK_DAYS  # the week that holds the first new day
        complete = (self.grid_day(self.last_day) + 1) // WEEK_DAYS * WEEK_DAYS
        if complete <= first:
            return Look(NoteKind.TIES.value, self._since_s + DAY_S * (WEEK_DAYS + 1), 0, ())
        grid_begins = self.grid_day(self.days.day_of(self.grid.start))
        whole = -(-grid_begins // WEEK_DAYS) * WEEK_DAYS
        begin = max(whole, first - WEEK_DAYS * 2 * faults.USUAL_WEEKS)
        row = 24 * (begin - grid_begins)
        values = self.grid.values[row : row + 24 * (complete - begin)]
        ties = faults.weekly_ties(values)
        weeks, columns, before = faults.ties_raised(ties)
        epoch_start = self.grid.start + HOUR_S * row
        since = self.grid.start + DAY_S * (first - grid_begins)
        found = [
            Finding(
                self.network.keys[c],
                NoteKind.TIES,
                epoch_start + DAY_S * WEEK_DAYS * int(w),
                epoch_start + DAY_S * WEEK_DAYS * int(w),
                {"before": rounded(b), "after": rounded(ties[w, c])},
            )
            for w, c, b in zip(weeks, columns, before, strict=True)
            if epoch_start + DAY_S * WEEK_DAYS * int(w) >= since and not self.network.accumulates[c]
        ]
        return Look(NoteKind.TIES.value, since, 0, tuple(found))

    def steps(self) -> tuple[Look, StepMemory]:
        """Sudden steps in level, those of a known unit and shifted zeros called so; and what to remember of them."""
        reach = steps.AFTER_DAYS - 1 + steps.APART_DAYS + SAME_CAUSE_DAYS
        start, values = self._hours(24 * (reach + SAME_CAUSE_DAYS + steps.APART_DAYS + steps.LOOKBACK_DAYS))
        begin = self.grid_day(self.days.day_of(start))
        since = self.grid_day(self.since)
        now = steps_of_days(
            values,
            begin,
            [self.grid_day(d) for d in self.new_from] if self.new_from else [since] * len(self.network.keys),
            self.network.groups,
            self.network.by_ratio.tolist(),
            strength=self.settings.data_notes.step_strength,
            memory=self.step_memory,
        )
        shown = kept(now, self.step_memory)
        first = max(0, since - reach - shown.begin)
        rows = slice(max(0, first - SAME_CAUSE_DAYS - steps.APART_DAYS), None)
        table = steps.StepTable(shown.table.size[rows], shown.table.error[rows], shown.table.strength[rows])
        found = steps.dated_steps(table, first=0, offset=rows.start + shown.begin - begin)
        least = first + shown.begin - begin
        findings = []
        for i, (day, column) in enumerate(zip(found.day.tolist(), found.series.tolist(), strict=True)):
            if day >= least:
                kind, facts = self._called(found, i, values)
                moment = start + DAY_S * day
                findings.append(Finding(self.network.keys[column], kind, moment, moment, facts))
        return Look("step", start + DAY_S * max(0, least), 0, tuple(findings)), shown

    def _called(
        self, found: steps.LevelSteps, i: int, values: NDArray[np.float64]
    ) -> tuple[NoteKind, dict[str, Any]]:
        """What a step is called, and its numbers."""
        day, column = int(found.day[i]), int(found.series[i])
        size, error, strength = float(found.size[i]), float(found.error[i]), float(found.strength[i])
        quantity = self.network.keys[column].partition(".")[2]
        facts = {"strength": rounded(abs(strength))}
        if not self.network.by_ratio[column]:
            kelvin = matching_offset(size, error)
            facts |= {"offset": rounded(size), "error": rounded(error)}
            return (NoteKind.LEVEL_STEP if kelvin is None else NoteKind.UNIT_SWITCH), facts
        facts |= {"factor": rounded(math.exp(size))}
        facts |= {
            "low": rounded(math.exp(size - 2 * error)),
            "high": rounded(math.exp(size + 2 * error)),
        }
        if self._has_company(found, day, column):
            return NoteKind.LEVEL_STEP, facts
        others = [c for group in self.network.groups if column in group for c in group if c != column]
        before = values[24 * max(0, day - steps.BEFORE_DAYS) : 24 * day]
        after = values[24 * day : 24 * (day + steps.AFTER_DAYS)]
        unit = matching_unit(quantity, size, error, strength)
        if unit is not None:
            factor = {"unit": rounded((unit.low + unit.high) / 2)}
            kept_course = keeps_course(
                before[:, column], after[:, column], before[:, others], after[:, others]
            )
            return (NoteKind.UNIT_SWITCH, facts | factor) if kept_course else (NoteKind.LEVEL_STEP, facts)
        before, after = before[:, column], after[:, column]
        weather = float(np.nanmedian(after) / np.nanmedian(before)) / math.exp(size)
        offset = shifted_zero(before, after, weather)
        if offset is not None:
            return NoteKind.SHIFTED_ZERO, facts | {"offset": rounded(offset)}
        return NoteKind.LEVEL_STEP, facts

    def _has_company(self, found: steps.LevelSteps, day: int, column: int) -> bool:
        """Whether another series of the station steps at about the same time: then no instrument is to blame."""
        station = self.network.keys[column].partition(".")[0]
        near = np.abs(found.day - day) <= SAME_CAUSE_DAYS
        return any(
            c != column and self.network.keys[c].partition(".")[0] == station
            for c in found.series[near].tolist()
        )

    # -- where things are --------------------------------------------------------------------------

    @property
    def _since_s(self) -> int:
        return self.days.start_of(self.since)

    @property
    def last_day(self) -> dt.date:
        """Last day of the grid."""
        return self.days.day_of(self.grid.start + HOUR_S * (self.grid.n_hours - 1))

    @property
    def _new_days(self) -> int:
        return (self.last_day - self.since).days + 1

    def grid_day(self, day: dt.date) -> int:
        """A day as days since 1970."""
        return (day - dt.date(1970, 1, 1)).days

    def _hours(self, before: int) -> tuple[int, NDArray[np.float64]]:
        """Start and values of whole days from ``before`` hours before the first new day on."""
        row = max(0, self.grid.row_of(self._since_s) - -(-before // 24) * 24)
        return self.grid.start + HOUR_S * row, self.grid.values[row:]

    def _stretches(self, kind: NoteKind, start: int, n_rows: int, runs: faults.Runs, facts: Any) -> Look:
        """Runs of hours that reach the new days, as findings."""
        since = self._since_s - HOUR_S
        found = []
        for column, begin, end, measure in zip(runs.series, runs.begin, runs.end, runs.measure, strict=True):
            last = start + HOUR_S * int(end)
            if last >= since:
                found.append(
                    Finding(
                        self.network.keys[column],
                        kind,
                        start + HOUR_S * int(begin),
                        None if end == n_rows - 1 else last,
                        facts(float(measure)),
                    )
                )
        return Look(kind.value, since, start + HOUR_S, tuple(found))


def rounded(value: float) -> float:
    """A number to four significant digits, as it is kept and shown."""
    return float(f"{value:.4g}")
