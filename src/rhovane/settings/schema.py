"""Every setting with its unit, range and default: the one source of defaults."""

from __future__ import annotations

import datetime as dt
import hashlib
import itertools
import json
import re
from collections.abc import Sequence
from functools import cached_property
from pathlib import Path
from typing import Annotated, Any, Literal, Self

from pydantic import Field, PrivateAttr, field_validator, model_validator

from rhovane.model import Flag, Pair, Segment, Series, Stage
from rhovane.settings.calendar import CalendarEntry
from rhovane.settings.data_quality import CheckSettings, DataNoteSettings
from rhovane.settings.section import Section
from rhovane.settings.unattended import DeliverySettings, NightSettings, ServiceSettings

FIXED_OFFSET = re.compile(r"^[+-](0\d|1[0-4]):[0-5]\d$")
STEP = {"1min": 1, "5min": 5, "10min": 10, "15min": 15, "30min": 30, "1h": 60}


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


class ColumnSettings(Section):
    """Names of the columns of a source; empty means the file has no such column."""

    time: str = Field(min_length=1, description="Column with the time label.")
    station: str = Field("", description="Long form: column with the station code.")
    quantity: str = Field("", description="Long form: column with the quantity code.")
    value: str = Field("", description="Long form: column with the value.")
    unit: str = Field("", description="Long form: column with the unit of the value.")
    flag: str = Field("", description="Long form: column with the quality code.")
    stage: str = Field("", description="Long form: column with the verification stage.")
    issued: str = Field("", description="Long form: column with the time the value was issued.")


class SourceSettings(Section):
    """One feed: where its files are, how they are written, on which clock, and what is in them."""

    name: str = Field(min_length=1)
    form: Literal["long csv", "wide csv", "long parquet", "wide parquet"]
    files: str = Field(min_length=1, description="Glob pattern relative to work_folder.")
    clock: str = Field(description='"UTC", a fixed offset "+01:00", or "civil ZONE"; must be declared.')
    label: Literal["start", "end"] = Field(
        description="Whether a label names the start or end of its interval."
    )
    step: str = Field("1h", description="Interval of the readings.")
    time_format: str = Field("%Y-%m-%d %H:%M", description="strptime pattern of the time column.")
    delimiter: str = Field(",", min_length=1, max_length=1)
    decimal: Literal[".", ","] = "."
    encoding: Literal["utf-8", "utf-16", "latin-1"] = "utf-8"
    missing: tuple[str, ...] = Field((), description="Texts in a value column that mean missing.")
    columns: ColumnSettings
    series: dict[str, str] = Field(
        min_length=1,
        description='Code in the feed → series key. Long: "STATION QUANTITY" codes joined by a space; wide: column.',
    )
    units: dict[str, str] = Field(
        default_factory=dict,
        description="Code in the feed → unit of its values, where the file does not say; default: the series' unit.",
    )
    unit_names: dict[str, str] = Field(
        default_factory=dict, description="Spelling of a unit in the feed → spelling used here."
    )
    flags: dict[str, Literal["pass", "not evaluated", "suspect", "fail", "missing"]] = Field(
        default_factory=dict, description="Quality code in the feed → meaning."
    )
    stages: dict[str, Literal["not verified", "preliminary", "verified"]] = Field(
        default_factory=dict, description="Stage code in the feed → meaning."
    )

    @field_validator("clock")
    @classmethod
    def _clock(cls, value: str) -> str:
        if value == "UTC" or FIXED_OFFSET.match(value):
            return value
        kind, _, zone = value.partition(" ")
        if kind == "civil" and zone:
            known_zone(zone)
            return value
        raise ValueError('write "UTC", a fixed offset such as "+01:00", or "civil ZONE" such as "civil CET"')

    @field_validator("step")
    @classmethod
    def _step(cls, value: str) -> str:
        if value not in STEP:
            raise ValueError(f"known steps: {', '.join(STEP)}")
        return value

    @field_validator("time_format")
    @classmethod
    def _time_format(cls, value: str) -> str:
        moment = dt.datetime(2004, 11, 23, 17, tzinfo=dt.UTC if "%z" in value else None)
        try:
            complete = dt.datetime.strptime(moment.strftime(value), value) == moment
        except ValueError:
            complete = False
        if not complete:
            raise ValueError("write a strptime pattern that holds year, month, day and hour: %Y-%m-%d %H:%M")
        return value

    @model_validator(mode="after")
    def _columns_fit_form(self) -> Self:
        if self.form.startswith("long"):
            for name in ("quantity", "value"):
                if not getattr(self.columns, name):
                    raise ValueError(f"form {self.form!r} needs columns.{name}")
        else:
            for name in ("station", "quantity", "value", "unit"):
                if getattr(self.columns, name):
                    raise ValueError(
                        f"columns.{name} is for long forms; form {self.form!r} names series by column"
                    )
        for code in self.units:
            if code not in self.series:
                raise ValueError(f"units.{code}: not a code listed under series")
        return self

    @property
    def step_minutes(self) -> int:
        """Interval of the readings in minutes."""
        return STEP[self.step]

    def flag_of(self, code: str) -> Flag | None:
        """The inner flag of a quality code; None when the code is not mapped."""
        word = self.flags.get(code)
        return None if word is None else Flag[word.upper().replace(" ", "_")]

    def stage_of(self, code: str) -> Stage | None:
        """The inner stage of a stage code; None when the code is not mapped."""
        word = self.stages.get(code)
        return None if word is None else Stage[word.upper().replace(" ", "_")]


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
    accepted_flags: tuple[Literal["pass", "not evaluated", "suspect"], ...] = Field(
        ("pass", "not evaluated"), min_length=1, description="Quality of readings that enter statistics."
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
                tuple(Segment(one.first_day, one.what) for one in s.segments),
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
        digest = hashlib.sha256(json.dumps(parts, sort_keys=True).encode()).hexdigest()[:16]
        return Pair(pair.key, pair.first, pair.second, digest, pair.label)

    def series_of(self, pair: PairSettings) -> tuple[str, ...]:
        """Every series that a pair's numbers rest on: members, controls, wind direction."""
        direction = (pair.sector.direction,) if pair.sector else ()
        return (pair.first, pair.second, *pair.adjusted_for, *direction)

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
        for i, pair in enumerate(self.pair):
            found += self._pair_mistakes(f"pair[{i}] ({pair.key})", pair, known)
        for i, check in enumerate(self.check):
            where = f"check[{i}] ({check.applies_to})"
            found += check.mistakes(where, {key: one.quantity for key, one in known.items()})
        return found

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


def parse_offset(text: str) -> dt.timedelta:
    """A fixed offset ``+HH:MM`` as a time span."""
    sign = -1 if text[0] == "-" else 1
    return sign * dt.timedelta(hours=int(text[1:3]), minutes=int(text[4:6]))


def known_zone(name: str) -> str:
    """The zone name itself, when the zone is known."""
    from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

    try:
        ZoneInfo(name)
    except (ZoneInfoNotFoundError, ValueError):
        raise ValueError(f"{name!r} is not a known IANA time zone") from None
    return name


def describe(value: Any) -> str:
    """A setting's value as it is shown in a message."""
    text = repr(value)
    return text if len(text) <= 60 else text[:57] + "..."
