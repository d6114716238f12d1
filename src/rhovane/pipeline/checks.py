"""Own quality checks of the settings, and what they leave out of the statistics.

An own flag never alters a value and never replaces the delivered flag: an hour counts as an observation when the worse
of both is accepted. Own flags follow from the readings of the 60 days before alone, so they are computed, not kept.
"""

from __future__ import annotations

import datetime as dt

import numpy as np
from numpy.typing import NDArray

from rhovane.model import NoteKind
from rhovane.pipeline.findings import DAY_S, HOUR_S, Finding, Look
from rhovane.prepare import Days, Grid
from rhovane.settings import CheckSettings, Settings
from rhovane.stats import data_faults as faults
from rhovane.stats import series_checks as checks

LOOKBACK_DAYS = checks.LOOKBACK_HOURS // 24


def neighbours_of(settings: Settings, keys: set[str]) -> set[str]:
    """Series that the checks of other series compare with."""
    return {
        c.neighbour for key in keys for c in settings.checks_of(key) if c.neighbour and c.neighbour != key
    }


def own_flags(settings: Settings, grid: Grid, key: str) -> dict[str, NDArray[np.int8]]:
    """Flags of a series by each check that is on, by its name; the grid holds whole days."""
    flags: dict[str, NDArray[np.int8]] = {}
    values = grid.column(key)
    for check in settings.checks_of(key):
        for name, found in _run(check, values, grid, key).items():
            flags[name] = checks.worse_flag(flags[name], found) if name in flags else found
    return flags


def left_out(settings: Settings, grid: Grid, key: str) -> NDArray[np.bool_]:
    """Hours of a series that the own checks leave out of the statistics."""
    out = np.zeros(grid.n_hours, dtype=bool)
    for found in own_flags(settings, grid, key).values():
        out |= _refused(settings, found)
    return out


def without_left_out(settings: Settings, grid: Grid, first_row: int) -> Grid:
    """The grid from a row on, NaN where an own check leaves an hour out."""
    values = grid.values[first_row:].copy()
    for column, key in enumerate(grid.keys):
        if settings.checks_of(key):
            values[left_out(settings, grid, key)[first_row:], column] = np.nan
    return Grid(grid.start + HOUR_S * first_row, grid.keys, values)


def left_out_look(settings: Settings, raw: Grid, days: Days, since: dt.date) -> Look:
    """Days on which own checks left hours out, as stretches of days."""
    start = days.start_of(since) - DAY_S
    row = max(0, raw.row_of(start))
    begins = raw.start + HOUR_S * row
    findings = []
    for key in raw.keys:
        refused = {name: _refused(settings, f)[row:] for name, f in own_flags(settings, raw, key).items()}
        if not refused:
            continue
        hours = np.logical_or.reduce(list(refused.values())).reshape(-1, 24).sum(axis=1)
        runs = faults.runs_of((hours > 0)[:, None])
        for begin, end in zip(runs.begin.tolist(), runs.end.tolist(), strict=True):
            day = slice(24 * begin, 24 * begin + 24)
            names = ", ".join(name for name, out in refused.items() if out[day].any())
            findings.append(
                Finding(
                    key,
                    NoteKind.LEFT_OUT,
                    begins + DAY_S * begin,
                    None if end == len(hours) - 1 else begins + DAY_S * end + 23 * HOUR_S,
                    {"hours": int(hours[begin]), "checks": names},
                )
            )
    return Look(NoteKind.LEFT_OUT.value, start, start + DAY_S, tuple(findings))


def _refused(settings: Settings, flags: NDArray[np.int8]) -> NDArray[np.bool_]:
    refused = {checks.SUSPECT, checks.FAIL} - settings.accepted_flags()
    return np.isin(flags, sorted(refused))


def _run(
    check: CheckSettings, values: NDArray[np.float64], grid: Grid, key: str
) -> dict[str, NDArray[np.int8]]:
    """One entry of the settings on one series; a check without a limit is not run."""

    def limits(name: str) -> tuple[float, float]:
        found = (getattr(check, f"{name}_suspect"), getattr(check, f"{name}_fail"))
        return tuple(np.nan if limit is None else float(limit) for limit in found)  # type: ignore[return-value]

    flags: dict[str, NDArray[np.int8]] = {}
    bounds = (check.low, check.high, check.suspect_low, check.suspect_high)
    if any(b is not None for b in bounds):
        low, high, suspect_low, suspect_high = (np.nan if b is None else b for b in bounds)
        flags["gross range"] = checks.gross_range_check(
            values, low=low, high=high, suspect_low=suspect_low, suspect_high=suspect_high
        )
    suspect, fail = limits("spike")
    if suspect == suspect or fail == fail:
        flags["spike"] = checks.spike_check(values, suspect=suspect, fail=fail)
    suspect, fail = limits("rate")
    if suspect == suspect or fail == fail:
        flags["rate of change"] = checks.rate_of_change_check(values, suspect=suspect, fail=fail)
    flat = (check.flat_suspect_hours, check.flat_fail_hours)
    if any(hours is not None for hours in flat):
        suspect, fail = (np.nan if hours is None else float(hours) for hours in flat)
        flags["flat line"] = checks.flat_line_check(
            values, suspect_hours=suspect, fail_hours=fail, resolution=check.flat_resolution
        )
    suspect, fail = limits("climatology")
    if suspect == suspect or fail == fail:
        flags["climatology"] = checks.climatology_check(values, suspect=suspect, fail=fail)
    suspect, fail = limits("neighbour")
    if check.neighbour and check.neighbour != key:
        other = grid.column(check.neighbour)
        flags["neighbour"] = checks.neighbour_check(values, other, suspect=suspect, fail=fail)
    return flags
