"""Every setting with its unit, range and default: the one source of defaults."""

from __future__ import annotations

import datetime as dt
import hashlib
import itertools
import json
from collections.abc import Sequence
from functools import cached_property
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import Field, PrivateAttr, field_validator

from rhovane.model import Flag, Pair, Segment, Series
from rhovane.settings.calendar import CalendarEntry
from rhovane.settings.data_quality import CheckSettings, DataNoteSettings
from rhovane.settings.section import Section
from rhovane.settings.source_schema import FIXED_OFFSET, SourceSettings, known_zone, parse_offset
from rhovane.settings.unattended import DeliverySettings, NightSettings, ServiceSettings


class NetworkSettings(Section):
    """Whose data this is and which clocks people there use."""

    name: str = Field(min_length=1, description="Name shown on every page and export.")
    work_folder: str = Field(
        ".", description="Folder for store, feed and reports; relative to the settings file."
    )
    standard_time: str = Field(
        "+00:00", description="Fixed offset of the network's standard time; days begin at its midnight."
    )
    civil_zone: str = Field("UTC", description="IANA zone of the civil clock (working hours, holidays).")

    @field_validator("standard_time")
    @classmethod
    def _offset(cls, value: str) -> str:
        if not FIXED_OFFSET.match(value):
            raise ValueError("write a fixed offset such as +01:00 or -05:30")
        return value

    @field_validator("civil_zone")
    @classmethod
    def _zone(cls, value: str) -> str:
        return known_zone(value)

    @property
    def standard_offset(self) -> dt.timedelta:
        """Standard time minus UTC."""
        return parse_offset(self.standard_time)


class StoreSettings(Section):
    """The DuckDB file and what it may use."""

    file: str = Field("rhovane.duckdb", description="Store file; relative to work_folder.")
    memory_limit_mb: int = Field(1024, ge=128, le=1_048_576, description="MB; most memory DuckDB may take.")
    threads: int = Field(2, ge=1, le=256, description="Threads DuckDB may use.")
    lock_wait_s: float = Field(10.0, ge=0, le=600, description="Seconds to wait for another process.")


class CalendarSettings(Section):
    """Where the calendar is."""

    file: str = Field(
        "",
        description="Calendar file, relative to the settings file; empty: no days but weekends are special.",
    )


class SiteLogSettings(Section):
    """Where the site log is."""

    file: str = Field("", description="Site log file, relative to the settings file; empty: none is read.")


class SegmentSettings(Section):
    """A day from which on a series was measured with something else, or somewhere else."""

    first_day: dt.date = Field(
        description="First day, standard time; a day with both belongs to the new segment."
    )
    what: str = Field(min_length=1, description="What changed: instrument, inlet, place.")


class SeriesSettings(Section):
    """One series of the network."""

    key: str = Field(pattern=r"^[A-Za-z0-9_-]+\.[A-Za-z0-9_.-]+$", description="STATION.quantity")
    unit: str = Field(min_length=1, description="Unit in which values are kept.")
    kind: Literal["linear", "circular", "accumulated"] = "linear"
    speed: str = Field(
        "", description="Of a wind direction: key of the wind speed that weights its mean over an hour."
    )
    label: str = ""
    segments: tuple[SegmentSettings, ...] = Field(
        (), description="Changes of instrument and moves of the station, in order of day."
    )

    @field_validator("segments")
    @classmethod
    def _in_order(cls, value: tuple[SegmentSettings, ...]) -> tuple[SegmentSettings, ...]:
        days = [s.first_day for s in value]
        for earlier, later in itertools.pairwise(days):
            if later <= earlier:
                raise ValueError(f"{later} comes after {earlier}; give each day once, in order")
        return value

    @field_validator("unit")
    @classmethod
    def _unit(cls, value: str) -> str:
        if value == "?":
            raise ValueError("name the unit in which values are kept, such as ug/m3")
        return value

    @property
    def quantity(self) -> str:
        """What is measured: the part of the key after the first dot."""
        return self.key.partition(".")[2]


class SectorMask(Section):
    """Keep only hours with the wind from a sector (clockwise from ``from`` to ``to``)."""

    direction: str = Field(description="Key of a wind direction series.")
    from_deg: float = Field(ge=0, lt=360, description="Degrees; where the sector begins, clockwise.")
    to_deg: float = Field(ge=0, le=360, description="Degrees; where the sector ends, clockwise.")


class PairSettings(Section):
    """Two series whose relationship is watched, and how."""

    first: str
    second: str
    label: str = Field("", description="Shown beside the key; tells two recipes of the same series apart.")
    lags: Annotated[tuple[int, ...], Field(min_length=2, max_length=2)] | None = Field(
        None, description="Hours, first to last; positive: the first series leads. Default: correlation.lags."
    )
    adjusted_for: tuple[str, ...] = Field((), description="Control series of a partial rank correlation.")
    sector: SectorMask | None = None
    hours: Annotated[tuple[int, ...], Field(min_length=2, max_length=2)] | None = Field(
        None, description="Keep only hours of the civil day from (included) to (excluded)."
    )
    working_days_only: bool = False
    wet_only: bool = Field(False, description="Keep only hours in which at least one side is above zero.")
    score: Literal["auto", "innovation", "day shape", "day course"] = Field(
        "auto",
        description="Daily evidence: changes from hour to hour, the day's departure from its usual shape, its course "
        "with the daily cycle kept, or chosen on the baseline.",
    )

    @property
    def variant(self) -> str:
        """Short words for what sets this recipe apart; empty for the plain one."""
        parts = []
        if self.adjusted_for:
            parts.append("adjusted")
        if self.sector:
            parts.append(f"{self.sector.from_deg:g}-{self.sector.to_deg:g}deg")
        if self.hours:
            parts.append(f"{self.hours[0]:02d}-{self.hours[1]:02d}h")
        if self.working_days_only:
            parts.append("workdays")
        if self.wet_only:
            parts.append("wet")
        return ",".join(parts)

    @property
    def key(self) -> str:
        """``FIRST~SECOND``, with the variant in brackets where there is one."""
        plain = f"{self.first}~{self.second}"
        return f"{plain}[{self.variant}]" if self.variant else plain


class CorrelationSettings(Section):
    """Rolling-window rank correlation."""

    statistic: Literal["spearman", "kendall"] = "spearman"
    window_hours: int = Field(672, ge=24, le=4096, description="Hours; length of the rolling window.")
    lags: Annotated[tuple[int, ...], Field(min_length=2, max_length=2)] = Field(
        (-3, 3), description="Hours, first to last lag examined."
    )
    min_coverage: float = Field(
        0.75, gt=0, le=1, description="Share of the window's hours with both observations (data capture)."
    )
    accepted_flags: tuple[Literal["pass", "not evaluated", "suspect", "below limit"], ...] = Field(
        ("pass", "not evaluated", "below limit"),
        min_length=1,
        description="Quality of readings that enter statistics.",
    )
    min_effective: float = Field(10.0, ge=4, le=1000, description="Fewest effective pairs for a p-value.")
    significance: float = Field(0.05, gt=0, lt=0.5, description="Level of the nightly significance screen.")


class AlertSettings(Section):
    """How many false alarms the analyst accepts, and what a change is compared with."""

    false_alarms_per_year: float = Field(
        4.0, gt=0, le=365, description="Expected false alarms a year over the whole network."
    )
    baseline_days: int = Field(90, ge=30, le=730, description="Days of the moving reference.")
    guard_days: int = Field(14, ge=1, le=90, description="Days between the reference and the day judged.")
    rebaseline_days: int = Field(
        110, ge=14, le=1000, description="Days after which a lasting change becomes the new normal, visibly."
    )


class BackupSettings(Section):
    """Copies of the store."""

    folder: str = Field("backup", min_length=1, description="Folder of the copies; relative to work_folder.")
    daily: int = Field(7, ge=1, le=366, description="Days of which a copy is kept.")
    weekly: int = Field(
        5,
        ge=0,
        le=520,
        description="Weeks of which the last copy and the Parquet archive are kept; 0: no archive.",
    )


class Settings(Section):
    """All settings, as read from one TOML file; ``origin`` is that file."""

    network: NetworkSettings
    store: StoreSettings = Field(default_factory=lambda: StoreSettings())
    backup: BackupSettings = Field(default_factory=lambda: BackupSettings())
    night: NightSettings = Field(default_factory=lambda: NightSettings())
    calendar: CalendarSettings = Field(default_factory=lambda: CalendarSettings())
    site_log: SiteLogSettings = Field(default_factory=lambda: SiteLogSettings())
    correlation: CorrelationSettings = Field(default_factory=lambda: CorrelationSettings())
    alerts: AlertSettings = Field(default_factory=lambda: AlertSettings())
    data_notes: DataNoteSettings = Field(default_factory=lambda: DataNoteSettings())
    check: tuple[CheckSettings, ...] = ()
    service: ServiceSettings = Field(default_factory=lambda: ServiceSettings())
    delivery: DeliverySettings = Field(default_factory=lambda: DeliverySettings())
    source: tuple[SourceSettings, ...] = Field(min_length=1)
    series: tuple[SeriesSettings, ...] = Field(min_length=1)
    pair: tuple[PairSettings, ...] = Field(min_length=1)
    origin: Path = Field(default=Path("settings.toml"), exclude=True)
    _calendar: tuple[CalendarEntry, ...] = PrivateAttr(default=())

    @cached_property
    def work_folder(self) -> Path:
        """Folder that relative places are under."""
        return (self.origin.parent / self.network.work_folder).resolve()

    @property
    def store_path(self) -> Path:
        """The DuckDB file."""
        return self.work_folder / self.store.file

    @property
    def backup_folder(self) -> Path:
        """The folder of the store's copies."""
        return self.work_folder / self.backup.folder

    @cached_property
    def settings_hash(self) -> str:
        """Changes when any setting or the calendar does; recorded with every night."""
        return hash_of(self.text)

    @cached_property
    def text(self) -> str:
        """All settings and the calendar as JSON, defaults included; :func:`rhovane.settings.settings_of_text` reads it again."""
        calendar = [entry.model_dump(mode="json") for entry in self.calendar_entries]
        return json.dumps([self.model_dump(mode="json"), calendar], sort_keys=True)

    @property
    def calendar_entries(self) -> tuple[CalendarEntry, ...]:
        """The entries of the calendar file."""
        return self._calendar

    def with_calendar(self, entries: Sequence[CalendarEntry]) -> Settings:
        """The same settings with these entries in the calendar."""
        other = self.model_copy()
        other._calendar = tuple(entries)
        for name in ("settings_hash", "text"):
            other.__dict__.pop(name, None)
        return other

    def other_days(self, first: dt.date, last: dt.date) -> frozenset[dt.date]:
        """Days from ``first`` to ``last`` on which people do not work as usual, besides weekends."""
        entries = [e for e in self.calendar_entries if e.kind == "other days"]
        return frozenset(day for entry in entries for day in entry.dates(first, last))

    @property
    def site_log_path(self) -> Path | None:
        """The site log file; None when none is named."""
        return self.origin.parent / self.site_log.file if self.site_log.file else None

    def series_by_key(self) -> dict[str, SeriesSettings]:
        """Series settings by key."""
        return {s.key: s for s in self.series}

    def domain_series(self) -> list[Series]:
        """All series as words of the domain, with the step of the source that delivers them."""
        step = {key: source.step_minutes for source in self.source for key in source.series.values()}
        return [
            Series(
                s.key,
                s.unit,
                s.kind,
                step[s.key],
                s.label,
                segments=tuple(Segment(one.first_day, one.what) for one in s.segments),
                speed=s.speed,
            )
            for s in self.series
        ]

    @cached_property
    def pairs(self) -> tuple[tuple[PairSettings, Pair], ...]:
        """Every watched pair: its settings, and the pair as a word of the domain."""
        return tuple((pair, self.pair_of(pair)) for pair in self.pair)

    def pair_of(self, pair: PairSettings) -> Pair:
        """A pair as a word of the domain; its recipe hash covers every setting that its numbers rest on.

        Of the calendar that is the other days, for a pair of working days. Hours of maintenance take readings
        away, as a revision does, and make no other recipe.
        """
        other_days = [e.model_dump(mode="json") for e in self.calendar_entries if e.kind == "other days"]
        parts = {
            "pair": pair.model_dump(mode="json", exclude={"label"}),
            "lags": list(self.lags_of(pair)),
            "correlation": self.correlation.model_dump(mode="json", exclude={"significance"}),
            "other days": other_days if pair.working_days_only else [],
            "clocks": [self.network.standard_time, self.network.civil_zone],
            "splits": self.data_notes.model_dump(mode="json", include={"split_at", "step_strength"}),
            "checks": [c.model_dump(mode="json") for k in self.series_of(pair) for c in self.checks_of(k)],
        }
        keys = set(self.series_of(pair))
        borders = {
            s.key: [one.first_day.isoformat() for one in s.segments]
            for s in self.series
            if s.key in keys and s.segments
        }
        if borders:  # only then, so that recipes without segments keep their hash
            parts["segments"] = borders
        if pair.sector is not None and self.speed_of(pair.sector.direction):
            parts["weighted by"] = self.speed_of(pair.sector.direction)
        digest = hashlib.sha256(json.dumps(parts, sort_keys=True).encode()).hexdigest()[:16]
        return Pair(pair.key, pair.first, pair.second, digest, pair.label)

    def series_of(self, pair: PairSettings) -> tuple[str, ...]:
        """Every series that a pair's numbers rest on: members, controls, wind direction."""
        wind: tuple[str, ...] = ()
        if pair.sector:
            speed = self.speed_of(pair.sector.direction)
            wind = (pair.sector.direction, speed) if speed else (pair.sector.direction,)
        return (pair.first, pair.second, *pair.adjusted_for, *wind)

    def speed_of(self, direction: str) -> str:
        """Key of the wind speed that weights a wind direction; "" where none does."""
        return next((s.speed for s in self.series if s.key == direction), "")

    def checks_of(self, key: str) -> list[CheckSettings]:
        """Own quality checks that apply to a series."""
        return [c for c in self.check if c.applies_to in (key, key.partition(".")[2])]

    @cached_property
    def notes_hash(self) -> str:
        """Changes when a setting does on which data notes depend."""
        parts = {
            "notes": self.data_notes.model_dump(mode="json"),
            "checks": [c.model_dump(mode="json") for c in self.check],
            "flags": self.correlation.accepted_flags,
            "windows": [self.correlation.window_hours, self.correlation.min_coverage],
            "series": [s.model_dump(mode="json", exclude={"label"}) for s in self.series],
            "clock": self.network.standard_time,
        }
        return hashlib.sha256(json.dumps(parts, sort_keys=True).encode()).hexdigest()[:16]

    def lags_of(self, pair: PairSettings) -> range:
        """Lags examined for a pair, in hours."""
        first, last = pair.lags or self.correlation.lags
        return range(first, last + 1)

    def accepted_flags(self) -> frozenset[int]:
        """Flags of the readings that count as observations."""
        return frozenset(
            int(Flag[word.upper().replace(" ", "_")]) for word in self.correlation.accepted_flags
        )

    def mistakes(self) -> list[tuple[str, str]]:
        """Contradictions between sections, as (key, what is wrong and what to do)."""
        found: list[tuple[str, str]] = []
        known = self.series_by_key()
        found += _repeated("series", [s.key for s in self.series])
        found += _repeated("source", [s.name for s in self.source])
        found += _repeated("pair", [p.key for p in self.pair])
        delivered: dict[str, str] = {}  # series key → step
        for i, source in enumerate(self.source):
            for code, key in source.series.items():
                where = f"source[{i}] ({source.name}).series.{code}"
                if key not in known:
                    found.append((where, f"series {key!r} is not defined; add a [[series]] with this key"))
                if delivered.setdefault(key, source.step) != source.step:
                    found.append(
                        (
                            where,
                            f"{key} comes with a step of {delivered[key]} elsewhere; one series has one step",
                        )
                    )
        for i, one in enumerate(self.series):
            if one.key not in delivered:
                found.append(
                    (f"series[{i}] ({one.key})", "no source delivers it; add it to a source's series table")
                )
            if one.speed:
                found += self._speed_mistakes(f"series[{i}] ({one.key}).speed", one, known, delivered)
        for i, pair in enumerate(self.pair):
            for role, key in (("first", pair.first), ("second", pair.second)):
                if delivered.get(key) == "1d":
                    found.append(
                        (
                            f"pair[{i}] ({pair.key}).{role}",
                            f"{key} has one value a day and cannot be ranked hour by hour; it is kept, and can be "
                            "exported",
                        )
                    )
            found += self._pair_mistakes(f"pair[{i}] ({pair.key})", pair, known)
        for i, check in enumerate(self.check):
            where = f"check[{i}] ({check.applies_to})"
            found += check.mistakes(where, {key: one.quantity for key, one in known.items()})
        return found

    @staticmethod
    def _speed_mistakes(
        where: str, one: SeriesSettings, known: dict[str, SeriesSettings], delivered: dict[str, str]
    ) -> list[tuple[str, str]]:
        if one.kind != "circular":
            return [(where, 'only a series of kind "circular" has a speed that weights it; remove it')]
        if one.speed not in known:
            return [(where, f"series {one.speed!r} is not defined")]
        if known[one.speed].kind != "linear":
            return [(where, f"{one.speed} is no speed: its kind is {known[one.speed].kind!r}")]
        if delivered.get(one.speed) != delivered.get(one.key):
            return [
                (where, f"{one.speed} and {one.key} have different steps; they must be measured together")
            ]
        return []

    def _pair_mistakes(
        self, where: str, pair: PairSettings, known: dict[str, SeriesSettings]
    ) -> list[tuple[str, str]]:
        found: list[tuple[str, str]] = []
        for role, key in (("first", pair.first), ("second", pair.second)):
            if key not in known:
                found.append((f"{where}.{role}", f"series {key!r} is not defined"))
            elif known[key].kind == "circular":
                found.append(
                    (
                        f"{where}.{role}",
                        f"{key} is circular and is never ranked; use a sector mask, or a component along a bearing",
                    )
                )
        if pair.first == pair.second:
            found.append((where, "a series cannot be paired with itself"))
        for key in pair.adjusted_for:
            if key in (pair.first, pair.second):
                found.append(
                    (f"{where}.adjusted_for", f"{key} is a member of the pair and cannot be its control")
                )
            elif key not in known:
                found.append((f"{where}.adjusted_for", f"series {key!r} is not defined"))
            elif known[key].kind == "circular":
                found.append((f"{where}.adjusted_for", f"{key} is circular and is never ranked"))
        if pair.sector is not None:
            direction = known.get(pair.sector.direction)
            if direction is None:
                found.append(
                    (f"{where}.sector.direction", f"series {pair.sector.direction!r} is not defined")
                )
            elif direction.kind != "circular":
                found.append((f"{where}.sector.direction", f'{direction.key} is not of kind "circular"'))
        lags = pair.lags or self.correlation.lags
        if lags[0] > lags[1]:
            found.append((f"{where}.lags", f"first lag {lags[0]} is after last lag {lags[1]}"))
        if max(abs(lags[0]), abs(lags[1])) > self.correlation.window_hours // 4:
            limit = self.correlation.window_hours // 4
            found.append(
                (f"{where}.lags", f"lags reach beyond a quarter of the window; stay within ±{limit} hours")
            )
        return found


def _repeated(section: str, names: list[str]) -> list[tuple[str, str]]:
    return [
        (section, f"{name!r} is defined {names.count(name)} times; keep one")
        for name in sorted(set(names))
        if names.count(name) > 1
    ]


def hash_of(text: str) -> str:
    """The hash that settings of this text are known by."""
    return hashlib.sha256(text.encode()).hexdigest()[:16]


def describe(value: Any) -> str:
    """A setting's value as it is shown in a message."""
    text = repr(value)
    return text if len(text) <= 60 else text[:57] + "..."
