"""Suspicious signs in fresh readings, against what the store holds and against neighbours, in words with numbers."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from rhovane.ingest.units import MOLAR_MASS_G_PER_MOL, ug_m3_per_ppb
from rhovane.model import Flag, ParsedFile
from rhovane.pipeline.arrays import load_grid
from rhovane.prepare import Grid, days_of, to_grid
from rhovane.settings import Settings
from rhovane.stats.feed_signs import (
    Shift,
    Slip,
    equal_hours,
    longest_flat,
    nearest_factor,
    repeated_outliers,
    shifted_ratio,
    slipped,
)
from rhovane.store import Store

DAY_H = 24
BLOCK_DAYS = 14  # days in which a slip or a shift is looked for at a time
BEFORE_DAYS = 28  # days before a block that it is compared with
MOST_NEIGHBOURS = 5  # series of the same quantity that a series is compared with
T20_K, T25_K = 293.15, 298.15  # the two reference temperatures in use for gas concentrations


@dataclass(frozen=True)
class Sign:
    """Something about a series that a person should look at: what, with numbers, and what to do."""

    series: str
    kind: str
    text: str


@dataclass(frozen=True)
class _Fresh:
    """Fresh readings on the hourly grid, with the stored past before and beneath them."""

    grid: Grid
    is_fresh: NDArray[np.bool_]
    keys: tuple[str, ...]

    def moment(self, row: int) -> str:
        return f"{dt.datetime.fromtimestamp(int(self.grid.hour_start[row]), dt.UTC):%Y-%m-%d %H:%M} UTC"


def find_signs(settings: Settings, files: Sequence[ParsedFile], store: Store | None) -> list[Sign]:
    """Every sign in the readings of parsed files, series by series.

    Parameters
    ----------
    settings : Settings
    files : sequence of ParsedFile
        Files that the store has not read yet.
    store : Store or None
        Gives the past; None: there is none, and the files are compared with themselves.
    """
    fresh = _on_grid(settings, files, store)
    found = list(_values(settings, files))
    if fresh is None:
        return found
    found += _flats(settings, fresh)
    found += _twins(settings, fresh)
    for key in fresh.keys:
        others = _neighbours(settings, key, fresh)
        if others:
            found += _against(settings, key, others, fresh)
    return sorted(found, key=lambda sign: (sign.series, sign.kind))


def _values(settings: Settings, files: Sequence[ParsedFile]) -> Iterator[Sign]:
    series = settings.series_by_key()
    keys = np.concatenate([np.asarray(f.series_key, dtype=object) for f in files] or [np.empty(0, object)])
    value = np.concatenate([np.asarray(f.value, dtype=float) for f in files] or [np.empty(0)])
    flag = np.concatenate([np.asarray(f.flag, dtype=int) for f in files] or [np.empty(0, int)])
    for key in sorted(set(keys.tolist())):
        mine = keys == key
        # What the source itself calls failed is no reading, and needs no sign.
        usable = np.where(flag[mine] == Flag.FAIL, np.nan, value[mine])
        for code, count in repeated_outliers(usable):
            yield Sign(
                key,
                "sentinel",
                f"the value {code:g} {series[key].unit} comes {count} times, far outside the others: it looks like a code "
                'for "no value". If it is, list it, as the feed writes it, under missing of its source.',
            )
        below = int((flag[mine] == Flag.BELOW_LIMIT).sum())
        if below:
            share = below / int(mine.sum())
            yield Sign(
                key,
                "below limit",
                f"{below} of {int(mine.sum())} readings ({share:.0%}) are below the detection limit and tie. Above a third, "
                "read its correlations with care.",
            )


def _flats(settings: Settings, fresh: _Fresh) -> Iterator[Sign]:
    series = settings.series_by_key()
    for key in fresh.keys:
        column = fresh.grid.column(key)
        mine = fresh.is_fresh[:, fresh.grid.keys.index(key)]
        flat = longest_flat(np.where(mine, column, np.nan))
        if flat is not None:
            yield Sign(
                key,
                "flat",
                f"stands at {flat.value:g} {series[key].unit} for {flat.n_rows} hours from {fresh.moment(flat.first)}. Check "
                "whether the instrument or the logger was stuck.",
            )


def _twins(settings: Settings, fresh: _Fresh) -> Iterator[Sign]:
    series = settings.series_by_key()
    values = np.where(fresh.is_fresh, fresh.grid.values, np.nan)
    at = {key: i for i, key in enumerate(fresh.grid.keys)}
    for i, first in enumerate(fresh.keys):
        for second in fresh.keys[i + 1 :]:
            if series[first].unit != series[second].unit:
                continue
            equal = equal_hours(values[:, at[first]], values[:, at[second]])
            if equal is not None:
                yield Sign(
                    first,
                    "twin",
                    f"equals {second} in {equal[1]} of {equal[0]} hours: one feed may be delivered twice. Check the series "
                    "tables of their sources.",
                )


def _against(settings: Settings, key: str, others: list[str], fresh: _Fresh) -> Iterator[Sign]:
    """Clock slips and unit changes of a series, in the first block that shows each."""
    slip_told = shift_told = False
    for rows, before in _blocks(key, fresh):
        pairs = [
            (other, _pair(fresh.grid, key, other, rows), _pair(fresh.grid, key, other, before))
            for other in others
        ]
        slips = [(o, s) for o, now, then in pairs if (s := slipped(now, then)) is not None]
        if not slip_told and _most_agree(len(slips), len(others)):
            slip_told = True
            yield _slip_sign(key, slips, fresh.moment(rows.start))
        shifts = [(o, s) for o, now, then in pairs if (s := shifted_ratio(now, then)) is not None]
        if not shift_told and _most_agree(len(shifts), len(others)):
            sign = _shift_sign(settings, key, shifts, fresh.moment(rows.start))
            shift_told = sign is not None
            if sign is not None:
                yield sign


def _most_agree(n_seen: int, n_others: int) -> bool:
    return n_seen > n_others / 2 if n_others > 1 else n_seen == 1


def _slip_sign(key: str, slips: list[tuple[str, Slip]], since: str) -> Sign:
    other, slip = max(slips, key=lambda one: one[1].rho_now)
    hours = slip.lag_before - slip.lag_now
    way = "later" if hours > 0 else "earlier"
    return Sign(
        key,
        "clock",
        f"from about {since} it stands {abs(hours)} h {way} against {other} than before (rank correlation of hourly "
        f"changes {slip.rho_now:+.2f} there, {slip.rho_now_at_old_lag:+.2f} at the old lag; {len(slips)} neighbours agree). "
        "Check clock and label of its source, and the logger.",
    )


def _shift_sign(settings: Settings, key: str, shifts: list[tuple[str, Shift]], since: str) -> Sign | None:
    factor = float(np.exp(np.median([np.log(shift.factor) for _, shift in shifts])))
    one = settings.series_by_key()[key]
    known = _known_factors(one.quantity.upper(), one.unit)
    at = nearest_factor(factor, [value for _, value in known])
    if at is None:
        return None
    what, value = known[at]
    neighbours = ", ".join(other for other, _ in shifts)
    return Sign(
        key,
        "unit",
        f"from about {since} its ratio to {neighbours} is {factor:.3g} times what it was; {what} is a factor of {value:.3g}. "
        "Check the unit that its source delivers and declare it under units of this source; a source of the air that really "
        "became weaker or stronger can look the same.",
    )


@lru_cache(maxsize=64)
def _known_factors(quantity: str, unit: str) -> tuple[tuple[str, float], ...]:
    """Factors between units in use for a quantity."""
    found = []
    if quantity in MOLAR_MASS_G_PER_MOL:
        at_20 = ug_m3_per_ppb(quantity)
        found += [("ppb to µg/m³ at 20 °C", at_20), ("ppb to µg/m³ at 25 °C", at_20 * T20_K / T25_K)]
    if unit == "m/s":
        found += [("m/s to km/h", 3.6), ("m/s to knots", 3600 / 1852)]
    return (*found, ("milli to micro", 1000.0))


def _pair(
    grid: Grid, first: str, second: str, rows: slice
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    return grid.column(first)[rows], grid.column(second)[rows]


def _blocks(key: str, fresh: _Fresh) -> Iterator[tuple[slice, slice]]:
    """Blocks of fresh hours, each with the stretch before it."""
    mine = np.flatnonzero(fresh.is_fresh[:, fresh.grid.keys.index(key)])
    if not len(mine):
        return
    block, before = BLOCK_DAYS * DAY_H, BEFORE_DAYS * DAY_H
    first = int(mine[0]) // DAY_H * DAY_H
    for begin in range(first, int(mine[-1]) + 1, block // 2):
        if begin >= before // 2:
            yield slice(begin, begin + block), slice(max(0, begin - before), begin)


def _neighbours(settings: Settings, key: str, fresh: _Fresh) -> list[str]:
    """Series of the same quantity, those first that are watched together with it."""
    series = settings.series_by_key()
    if series[key].kind != "linear":
        return []
    watched = {p.second if p.first == key else p.first for p in settings.pair if key in (p.first, p.second)}
    same = [
        other
        for other in fresh.grid.keys
        if other != key and series[other].quantity == series[key].quantity and series[other].kind == "linear"
    ]
    return sorted(same, key=lambda other: (other not in watched, other))[:MOST_NEIGHBOURS]


def _on_grid(settings: Settings, files: Sequence[ParsedFile], store: Store | None) -> _Fresh | None:
    files = [file for file in files if len(file.value)]
    if not files:
        return None
    days = days_of(settings.network.standard_offset)
    second = np.concatenate([np.asarray(f.hour_start, dtype=np.int64) for f in files])
    first_day, last_day = days.day_of(int(second.min())), days.day_of(int(second.max()))
    series = settings.domain_series()
    position = {s.key: i for i, s in enumerate(series)}
    begin = first_day - dt.timedelta(days=BEFORE_DAYS)
    start, end = days.start_of(begin), days.end_of(last_day)
    # Of readings of one hour in several files the last one is looked at: this is a screen, not the store.
    where = np.concatenate([[position[k] for k in f.series_key] for f in files]).astype(np.int64)
    value = np.concatenate([np.asarray(f.value, dtype=float) for f in files])
    flag = np.concatenate([np.asarray(f.flag, dtype=np.int64) for f in files])
    slot = where * (int(second.max()) + 1) + second
    _, last = np.unique(slot[::-1], return_index=True)
    kept = len(slot) - 1 - last
    accepted = settings.accepted_flags()
    grid = to_grid(
        series,
        start,
        end,
        position=where[kept],
        second=second[kept],
        value=value[kept],
        flag=flag[kept],
        accepted_flags=accepted,
    )
    is_fresh = np.isfinite(grid.values)
    values = grid.values
    if store is not None:
        stored = _stored(settings, store, begin, last_day, grid)
        values = np.where(is_fresh, values, stored)
    keys = tuple(s.key for s in series if is_fresh[:, position[s.key]].any())
    return _Fresh(Grid(start, grid.keys, values), is_fresh, keys)


def _stored(
    settings: Settings, store: Store, first: dt.date, last: dt.date, grid: Grid
) -> NDArray[np.float64]:
    """Stored observations on the same grid; series that the store does not know have none."""
    known = store.known_series()
    past = load_grid(settings, store, [key for key in grid.keys if key in known], first, last)
    values = np.full(grid.values.shape, np.nan)
    for key in past.keys:
        values[:, grid.keys.index(key)] = past.column(key)
    return values


def by_source(signs: Sequence[Sign], settings: Settings) -> Mapping[str, list[Sign]]:
    """Signs by the name of the source that delivers the series."""
    delivers = {source.name: set(source.series.values()) for source in settings.source}
    return {name: [sign for sign in signs if sign.series in keys] for name, keys in delivers.items()}
