"""The demo world as a feed: files by the night that first sees them, with the untidiness of real ones."""

from __future__ import annotations

import os
from collections import defaultdict
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from pathlib import Path
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from rhovane_demo import clocks
from rhovane_demo.instruments import PASS
from rhovane_demo.layouts import (
    LONG_SOURCES,
    PARQUET_SOURCE,
    SOURCES,
    WIDE_SOURCES,
    LongSource,
    Source,
    WideSource,
    delivered_values,
    long_text,
    wide_text,
    write_parquet_days,
)
from rhovane_demo.noise import Noise
from rhovane_demo.physics import Hourly
from rhovane_demo.planted import BY_ID
from rhovane_demo.world import World

DAY = timedelta(days=1)
LATE_SHARE = 0.03  # of day files
LATE_DAYS = (1, 5)
OVERLAP_SHARE = 0.02  # of day files repeat the day before
REVISED_SHARE = 0.05  # of preliminary values differ from the verified ones ...
REVISION_SD = 0.03  # ... by a few per cent
VERIFIED_ON_DAY = (18, 22)  # of the next month
BACKFILL_AFTER = 14 * DAY
# Minutes after midnight UTC at which files are written: before the night begins at 02:40 UTC.
WRITTEN_MINUTES = (20, 140)
CUT = "\0"  # stands for the line end that a truncated file lacks

DefectKind = Literal[
    "text value",
    "empty value",
    "missing cell",
    "impossible time",
    "repeated row",
    "unknown code",
    "truncated line",
]


@dataclass(frozen=True)
class Defect:
    """A malformed row: the reading of ``key`` at ``hour`` of the source's clock day ``day`` is spoiled."""

    source: str
    day: date
    hour: int
    key: str
    kind: DefectKind

    @property
    def loses_reading(self) -> bool:
        """Whether the reading cannot be used from this file; a repeated row loses nothing."""
        return self.kind != "repeated row"


DEFECTS = (
    Defect("kelvane", date(2024, 9, 17), 10, "KEL.NO2", "text value"),
    Defect("kelvane", date(2025, 6, 5), 7, "KEL.PM25", "empty value"),
    Defect("kelvane", date(2025, 10, 15), 19, "KEL.NO2", "impossible time"),
    Defect("dorrimoor", date(2024, 10, 8), 14, "DOR.O3", "impossible time"),
    Defect("dorrimoor", date(2025, 3, 12), 9, "DOR.NO2", "unknown code"),
    Defect("pellhask", date(2025, 2, 6), 12, "PEL.O3", "repeated row"),
    Defect("skarnet", date(2024, 12, 3), 8, "SKA.NO2", "unknown code"),
    Defect("skarnet", date(2025, 5, 22), 23, "SKA.PM10", "truncated line"),
    Defect("tivrel", date(2025, 8, 27), 16, "TIV.NO2", "missing cell"),
    Defect("uvenholt", date(2024, 11, 26), 5, "UVE.temperature", "empty value"),
    Defect("counters", date(2025, 7, 9), 15, "TIV.traffic", "text value"),
)


@dataclass(frozen=True)
class FeedFile:
    """One file: ``arrives`` is the night (named by the last day it covers, standard time) that first sees it.

    ``path`` is relative to the feed folder, with forward slashes; ``modified`` is UTC, before the night begins.
    """

    arrives: date
    path: str
    content: bytes
    modified: datetime


@dataclass(frozen=True)
class Delivery:
    """What one night finds new; ``files`` may be empty."""

    night: date
    files: tuple[FeedFile, ...]


@dataclass(frozen=True)
class Truth:
    """What a store holds in the end, on the world's grid (n_hours, 27).

    ``delivered``: some file holds the reading in a usable row. ``values``: NaN where missing or not delivered;
    check gas included. ``flag``: 1 pass, 3 suspect, 4 fail, 9 missing, 0 where the source has no quality codes or
    nothing was delivered. ``verified``: a verified file holds it.
    """

    values: Hourly
    delivered: NDArray[np.bool_]
    flag: NDArray[np.uint8]
    verified: NDArray[np.bool_]


def deliveries(world: World) -> Iterator[Delivery]:
    """Every night from the first day to the last, with the files that are new to it."""
    arriving: dict[date, list[FeedFile]] = defaultdict(list)
    for file in feed_files(world):
        arriving[file.arrives].append(file)
    for night in clocks.all_days():
        yield Delivery(night, tuple(arriving[night]))


def feed_files(world: World) -> list[FeedFile]:
    """All files of the feed, in order of arrival and then of path; the same for the same world."""
    files: list[FeedFile] = []
    for source in LONG_SOURCES:
        files += long_files(source, world)
    for source in WIDE_SOURCES:
        files += wide_files(source, world)
    files += parquet_files(world)
    return sorted(files, key=lambda f: (f.arrives, f.path))


def write_files(files: Iterable[FeedFile], feed_folder: Path) -> list[Path]:
    """Write files below the feed folder with their times of modification; returns where they are."""
    written = []
    for file in files:
        place = feed_folder / file.path
        place.parent.mkdir(parents=True, exist_ok=True)
        place.write_bytes(file.content)
        os.utime(place, (file.modified.timestamp(), file.modified.timestamp()))
        written.append(place)
    return written


def truth(world: World) -> Truth:
    """What a store must hold after all nights, whatever the order in which the files were read."""
    values, delivered = world.values.copy(), np.ones(world.values.shape, dtype=bool)
    flag, verified = np.zeros(world.values.shape, dtype=np.uint8), np.zeros(world.values.shape, dtype=bool)
    for source in SOURCES:
        local = source.local_time(world.hour_start)
        day = local.astype("datetime64[D]")
        in_verified_month = np.zeros(len(local), dtype=bool)
        if isinstance(source, LongSource) and source.verified:
            in_verified_month = local.astype("datetime64[M]") < np.datetime64(clocks.LAST_DAY, "M")
        for key in source.series.values():
            column = world.column(key)
            values[:, column] = delivered_values(world, key)
            verified[:, column] = in_verified_month
            delivered[:, column] = day <= np.datetime64(clocks.LAST_DAY, "D")
            if isinstance(source, LongSource):
                flag[:, column] = world.quality[:, column]
        for defect in DEFECTS:
            if defect.source == source.name and defect.loses_reading:
                at = np.datetime64(defect.day, "s") + np.timedelta64(defect.hour, "h")
                delivered[(local == at) & ~in_verified_month, world.column(defect.key)] = False
    values[~delivered], flag[~delivered] = np.nan, 0
    return Truth(values, delivered, flag, verified)


class Arrivals:
    """When the files of a source arrive and when they were written, drawn from the world's seed."""

    def __init__(self, source: Source, world: World) -> None:
        noise = Noise(world.seed, len(world.hour_start))
        days = clocks.all_days()
        random = noise.stream(f"{source.name} arrivals")
        late = random.random(len(days)) < LATE_SHARE
        delay = random.integers(LATE_DAYS[0], LATE_DAYS[1] + 1, len(days)) * late
        overlap = random.random(len(days)) < OVERLAP_SHARE
        self.night = {
            day: min(day + DAY * int(by), clocks.LAST_DAY) for day, by in zip(days, delay, strict=True)
        }
        spoiled = {defect.day for defect in DEFECTS if defect.source == source.name}
        # A file repeats the day before only where that does not undo a malformed row or a gap.
        self.repeats = {
            day
            for day, repeat in zip(days, overlap, strict=True)
            if repeat and day > days[0] and day - DAY not in spoiled
        }
        self.minutes = noise.stream(f"{source.name} written").integers(*WRITTEN_MINUTES, len(days))
        self.first = days[0]

    def written(self, night: date) -> datetime:
        """When the files that arrive in a night were written, UTC."""
        minutes = int(self.minutes[(night - self.first).days])
        return datetime(night.year, night.month, night.day, tzinfo=UTC) + DAY + timedelta(minutes=minutes)


def long_files(source: LongSource, world: World) -> list[FeedFile]:
    """Day files, the back-fill of a gap, and monthly verified files of a long source."""
    final = [delivered_values(world, key) for key in source.series.values()]
    early = [preliminary(world, key, v) for key, v in zip(source.series.values(), final, strict=True)]
    text = long_text(source, world, early if source.verified else final)
    arrivals = Arrivals(source, world)
    rows = source.day_rows(world.hour_start)
    gap = gap_days(source, world)

    def day_lines(day: date, written: datetime) -> list[str]:
        return spoil_long(source, source.lines(text, rows[day], "P", written), day)

    files = []
    for day, night in arrivals.night.items():
        if day not in gap:
            written = arrivals.written(night)
            lines = day_lines(day, written)
            if day in arrivals.repeats and day - DAY not in gap:
                lines = day_lines(day - DAY, written) + lines
            files.append(as_file(source, f"{source.name}/{day}.csv", night, written, lines))
    if gap:
        night = gap[-1] + BACKFILL_AFTER
        written = arrivals.written(night)
        lines = [line for day in gap for line in day_lines(day, written)]
        files.append(as_file(source, f"{source.name}/{gap[0]}_{gap[-1]}.csv", night, written, lines))
    if source.verified:
        files += verified_files(source, world, final, arrivals)
    return files


def verified_files(
    source: LongSource, world: World, final: list[Hourly], arrivals: Arrivals
) -> list[FeedFile]:
    """One file a month with the verified values, about the 20th of the next month; none after the last day."""
    text = long_text(source, world, final)
    day = Noise(world.seed, 1).stream(f"{source.name} verified").integers(*VERIFIED_ON_DAY, 24, endpoint=True)
    month = world.hour_start.astype("datetime64[M]")
    files = []
    for i, this in enumerate(np.unique(month)[:-1]):
        covered = np.flatnonzero(month == this)
        night = (this + 1).astype("datetime64[D]").item() + DAY * (int(day[i]) - 1)
        written = arrivals.written(night)
        lines = source.lines(text, range(int(covered[0]), int(covered[-1]) + 1), "V", written)
        files.append(as_file(source, f"{source.name}/verified-{this}.csv", night, written, lines))
    return files


def wide_files(source: WideSource, world: World) -> list[FeedFile]:
    """Day files of a wide source."""
    text = wide_text(source, world)
    arrivals = Arrivals(source, world)
    rows = source.day_rows(world.hour_start)
    files = []
    for day, night in arrivals.night.items():
        lines = spoil_wide(source, source.lines(text, rows[day]), day)
        if day in arrivals.repeats:
            lines = source.lines(text, rows[day - DAY]) + lines
        files.append(as_file(source, f"{source.name}/{day}.csv", night, arrivals.written(night), lines))
    return files


def parquet_files(world: World) -> list[FeedFile]:
    """Day files of the Parquet source."""
    source = PARQUET_SOURCE
    arrivals = Arrivals(source, world)
    content = write_parquet_days(source, world)
    return [
        FeedFile(night, f"{source.name}/{day}.parquet", content[day], arrivals.written(night))
        for day, night in arrivals.night.items()
    ]


def gap_days(source: Source, world: World) -> list[date]:
    """Days whose files do not come, because the line to the station is down."""
    gap = BY_ID["D4"]
    if not world.events or not set(gap.series) <= set(source.series.values()):
        return []
    return [gap.first + DAY * i for i in range((gap.last - gap.first).days + 1)]


def preliminary(world: World, key: str, final: Hourly) -> Hourly:
    """Values before verification: a few differ by a few per cent; none in the last month, which is never verified."""
    noise = Noise(world.seed, len(final))
    chosen = noise.stream(f"{key} revised").random(len(final)) < REVISED_SHARE
    chosen &= world.quality[:, world.column(key)] == PASS
    chosen &= world.hour_start.astype("datetime64[M]") < np.datetime64(clocks.LAST_DAY, "M")
    factor = 1 + REVISION_SD * noise.white(f"{key} revision")
    return np.where(chosen, np.round(final * factor, 1) + 0.0, final)


def as_file(
    source: LongSource | WideSource, path: str, night: date, written: datetime, lines: list[str]
) -> FeedFile:
    """Header and rows as a file; a row that was cut off by :func:`spoil_long` keeps its missing line end."""
    text = "\n".join([source.header, *lines])
    content = text.removesuffix(CUT) if text.endswith(CUT) else text + "\n"
    return FeedFile(night, path, content.encode(source.encoding), written)


def spoil_long(source: LongSource, lines: list[str], day: date) -> list[str]:
    """The day's rows with its malformed row, if it has one."""
    lines = list(lines)
    for defect in DEFECTS:
        if (defect.source, defect.day) == (source.name, day):
            keys = list(source.series.values())
            at = defect.hour * len(keys) + keys.index(defect.key)
            lines[at : at + 1] = spoiled_rows(lines[at], defect, source)
    return lines


def spoiled_rows(row: str, defect: Defect, source: LongSource) -> list[str]:
    """What stands in the file instead of a row."""
    delimiter = source.delimiter
    cells = dict(zip(source.fields, row.split(delimiter), strict=True))
    match defect.kind:
        case "text value":
            cells["value"] = "fault"
        case "empty value":
            cells["value"] = ""
        case "missing cell":
            del cells["value"]
        case "impossible time":
            impossible = (
                f"{defect.day:%Y-%m-%d} 25:00" if source.name == "kelvane" else f"31.02.{defect.day:%Y} 14:00"
            )
            cells["time"] = impossible
        case "repeated row":
            return [row, row]
        case "unknown code":
            cells["code"] = "?"
        case "truncated line":
            whole = list(cells)
            kept = [cells[name] for name in whole[: whole.index("value")]]
            return [delimiter.join(kept) + CUT]
    return [delimiter.join(cells.values())]


def spoil_wide(source: WideSource, lines: list[str], day: date) -> list[str]:
    """The day's rows with its malformed cell, if it has one."""
    lines = list(lines)
    for defect in DEFECTS:
        if (defect.source, defect.day) == (source.name, day):
            cells = lines[defect.hour].split(source.delimiter)
            cells[1 + list(source.series.values()).index(defect.key)] = (
                "" if defect.kind == "empty value" else "fault"
            )
            lines[defect.hour] = source.delimiter.join(cells)
    return lines
