"""Watching readings directly: one pair or a whole network, through the engine that the night runs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.daily_scores import pair_scores
from rhovane.stats.hourly_scores import series_scores
from rhovane.stats.watch import Incident, Watch, watch

Floats = NDArray[np.float64]

STEPS_PER_DAY = {"2h": 12, "1h": 24, "30min": 48, "15min": 96, "10min": 144, "5min": 288, "1min": 1440}
"""Known steps of the grid, and readings a day."""


class PairAlarm(NamedTuple):
    """A pair's relationship changed: (day, direction, kind).

    ``day`` counts from 0 at ``start``; ``direction`` is "weaker" or "stronger"; ``kind`` "strength", or
    "timing" where the best lag moved.
    """

    day: int
    direction: str
    kind: str


class NetworkAlarm(NamedTuple):
    """Relationships of a network changed: (day, direction, kind, pairs, suspect).

    ``pairs`` are the pairs concerned as (i, j); ``suspect`` says where to look first: ("series", i),
    ("station", name), ("pair", (i, j)) or ("network", None).
    """

    day: int
    direction: str
    kind: str
    pairs: tuple[tuple[int, int], ...]
    suspect: tuple[str, Any]


@dataclass(frozen=True)
class PairMonitor:
    """Alarms of one pair in order of their day, and the watch with its evidence."""

    alarms: tuple[PairAlarm, ...]
    watch: Watch


@dataclass(frozen=True)
class NetworkMonitor:
    """Alarms of a network in order of their day, and the watch with its evidence (columns: pairs as given)."""

    alarms: tuple[NetworkAlarm, ...]
    watch: Watch


def monitor_pair(
    x: Floats,
    y: Floats,
    *,
    start: Any,
    step: str = "1h",
    false_alarms_per_year: float = 0.1,
    baseline_days: int = 90,
) -> PairMonitor:
    """Alarms on sharp changes of one relationship, each day decided with the readings up to its end.

    Parameters
    ----------
    x, y : ndarray of float64, shape (n_hours,)
        Readings on the same regular grid; NaN marks a step without one.
    start : datetime
        Time of row 0 in UTC (an aware datetime of offset zero, a naive one meant as UTC, or datetime64).
        Day *d* is the 24 hours from ``24 d`` hours after it; a last day that is not complete is not judged.
    step : str
        Interval of the readings: "2h", "1h", "30min", "15min", "10min", "5min" or "1min".
    false_alarms_per_year : float
        Expected false alarms a year.
    baseline_days : int
        Days of learning before the first judgement, and length of the moving reference; 30 or more.

    Returns
    -------
    PairMonitor
        ``alarms``, a tuple of :class:`PairAlarm`. Missing readings never alarm.

    Raises
    ------
    ValueError
        When shapes, ``start``, ``step``, the rate or the baseline are not as described.

    Notes
    -----
    Decisions depend on ranks only: a strictly increasing transform of either series changes nothing.
    Realised rates are measured in tests/studies/alerting.

    Examples
    --------
    >>> rng = np.random.default_rng(2)
    >>> x = rng.normal(size=24 * 140)
    >>> y = np.where(np.arange(x.size) < 24 * 120, x, 0.0) + rng.normal(size=x.size)
    >>> [a.direction for a in monitor_pair(x, y, start=np.datetime64("2025-01-01")).alarms]
    ['weaker']
    """
    x, y = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    if x.ndim != 1 or x.shape != y.shape:
        raise ValueError(
            f"x has shape {x.shape} and y {y.shape}; pass two series of the same shape (n_hours,)."
        )
    network = monitor_network(
        np.stack([x, y], axis=1),
        [(0, 1)],
        start=start,
        step=step,
        false_alarms_per_year=false_alarms_per_year,
        baseline_days=baseline_days,
    )
    return PairMonitor(tuple(PairAlarm(a.day, a.direction, a.kind) for a in network.alarms), network.watch)


def monitor_network(
    values: Floats,
    pairs: Sequence[tuple[int, ...]],
    *,
    start: Any,
    step: str = "1h",
    false_alarms_per_year: float,
    names: Sequence[str] | None = None,
    baseline_days: int = 90,
) -> NetworkMonitor:
    """Alarms on sharp changes in a network of relationships that share one budget of false alarms.

    Parameters
    ----------
    values : ndarray of float64, shape (n_hours, n_series)
        Readings on a regular grid; NaN marks a step without one.
    pairs : sequence of (i, j) or (i, j, lag)
        Columns of each pair's two series, and the steps by which the first leads (default 0).
    start, step, baseline_days
        As for :func:`monitor_pair`.
    false_alarms_per_year : float
        Expected false alarms a year over the whole network.
    names : sequence of str, optional
        "STATION.quantity" of each column; stations and classes of pairs follow from it. Without names
        there are no stations, and every pair is a class of its own.

    Returns
    -------
    NetworkMonitor
        ``alarms``, a tuple of :class:`NetworkAlarm`: alerts only, no returns to normal.

    Raises
    ------
    ValueError
        When shapes, pairs, ``start``, ``step``, names, the rate or the baseline are not as described.
    """
    values = np.asarray(values, dtype=np.float64)
    if values.ndim != 2:
        raise ValueError(f"values has {values.ndim} dimensions; pass shape (n_hours, n_series).")
    _check_start(start)
    if step not in STEPS_PER_DAY:
        raise ValueError(f"step={step!r} is not known; choose one of {', '.join(STEPS_PER_DAY)}.")
    steps = STEPS_PER_DAY[step]
    links = [_checked_pair(p, position, values.shape[1]) for position, p in enumerate(pairs)]
    if names is not None and len(names) != values.shape[1]:
        raise ValueError(f"names has {len(names)} entries for {values.shape[1]} series; pass one a column.")
    for name in names or ():
        if not all(name.partition(".")):
            raise ValueError(f"names holds {name!r}; write STATION.quantity, such as DOR.NO2.")
    days = range(values.shape[0] // steps)
    shared = {k: series_scores(values[:, k], steps_per_day=steps) for i, j, _ in links for k in (i, j)}
    scores = [pair_scores(shared[i], shared[j], days=days, lag=lag) for i, j, lag in links]
    members = None if names is None else [(names[i], names[j]) for i, j, _ in links]
    seen = watch(
        scores, false_alarms_per_year=false_alarms_per_year, members=members, baseline_days=baseline_days
    )
    alarms = tuple(_alarm(incident, links, names) for incident in seen.incidents)
    return NetworkMonitor(alarms, seen)


def _alarm(
    incident: Incident, links: Sequence[tuple[int, int, int]], names: Sequence[str] | None
) -> NetworkAlarm:
    kind, what = incident.suspect
    if kind == "pair":
        suspect: tuple[str, Any] = ("pair", links[incident.lead][:2])
    elif kind == "series" and names is not None:
        suspect = ("series", list(names).index(str(what)))
    else:
        suspect = (kind, what)
    pairs = tuple(links[p][:2] for p in incident.pairs)
    return NetworkAlarm(incident.alarm_day, incident.direction, incident.kind, pairs, suspect)


def _check_start(start: Any) -> None:
    """ValueError unless ``start`` is a moment in UTC."""
    if isinstance(start, np.datetime64):
        if np.isnat(start):
            raise ValueError("start is not a time; pass the UTC time of row 0.")
        return
    if not hasattr(start, "utcoffset"):
        raise ValueError(f"start={start!r} is not a datetime; pass the UTC time of row 0.")
    offset = start.utcoffset()
    if offset:
        raise ValueError(f"start={start} is {offset} away from UTC; convert it to UTC.")


def _checked_pair(pair: tuple[int, ...], position: int, n_series: int) -> tuple[int, int, int]:
    """A pair as (i, j, lag); ValueError where it is not one."""
    if len(pair) not in (2, 3) or any(p != int(p) for p in pair):
        raise ValueError(f"pairs[{position}]={pair!r} is not (i, j) or (i, j, lag) of whole numbers.")
    i, j, lag = int(pair[0]), int(pair[1]), int(pair[2]) if len(pair) == 3 else 0
    if not (0 <= i < n_series and 0 <= j < n_series):
        raise ValueError(f"pairs[{position}]={pair!r} names a column outside 0 to {n_series - 1}.")
    if i == j:
        raise ValueError(f"pairs[{position}]={pair!r} pairs a series with itself; choose two series.")
    return i, j, lag
