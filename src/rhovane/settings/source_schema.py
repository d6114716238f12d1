"""Settings of one feed: where its files are, how they are written, on which clock, and what is in them."""

from __future__ import annotations

import datetime as dt
import hashlib
import json
import re
from functools import cached_property
from typing import Literal, Self

from pydantic import Field, field_validator, model_validator

from rhovane.model import Flag, Stage
from rhovane.settings.section import Section

FIXED_OFFSET = re.compile(r"^[+-](0\d|1[0-4]):[0-5]\d$")
STEP = {"1min": 1, "5min": 5, "10min": 10, "15min": 15, "30min": 30, "1h": 60, "1d": 1440}


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
    form: Literal["long csv", "wide csv", "long parquet", "wide parquet", "long sensorthings"]
    files: str = Field(min_length=1, description="Glob pattern relative to work_folder.")
    clock: str = Field(description='"UTC", a fixed offset "+01:00", or "civil ZONE"; must be declared.')
    label: Literal["start", "end"] = Field(
        description="Whether a label names the start or end of its interval."
    )
    step: str = Field("1h", description="Interval of the readings.")
    time_format: str = Field("%Y-%m-%d %H:%M", description="strptime pattern of the time column.")
    settle_s: int = Field(
        0,
        ge=0,
        le=86_400,
        description="Seconds a file must have been left alone before it is read; 0: at once.",
    )
    size_limit_mb: int = Field(
        512, ge=1, le=65_536, description="MB; largest file that is read, counted unpacked."
    )
    table_schema: str = Field(
        "",
        description="Frictionless Table Schema to compare with, relative to work_folder; default: beside the file.",
    )
    preamble_lines: int = Field(0, ge=0, le=1000, description="Lines before the header, passed over.")
    comment: str = Field("", max_length=8, description="Lines that begin with this text are passed over.")
    header_rows: int = Field(
        1, ge=0, le=5, description="Rows that name the columns; their texts are joined by a space."
    )
    delimiter: str = Field(",", min_length=1, max_length=1)
    decimal: Literal[".", ","] = "."
    encoding: Literal["utf-8", "utf-16", "latin-1"] = "utf-8"
    missing: tuple[str, ...] = Field((), description="Texts in a value column that mean missing.")
    below_limit: Literal["reject", "half", "limit", "zero", "missing"] = Field(
        "reject", description='What a value marked "<0.5" or "0.5<" stands for; half: half the limit.'
    )
    not_detected: tuple[str, ...] = Field(
        (), description="Texts in a value column that mean below the limit without saying which, such as ND."
    )
    limits: dict[str, float] = Field(
        default_factory=dict, description="Code in the feed → detection limit, in the feed's unit."
    )
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
    flags: dict[str, Literal["pass", "not evaluated", "suspect", "fail", "below limit", "missing"]] = Field(
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
        if not _tells(value, dt.datetime(2004, 11, 23)):
            raise ValueError(_TIME_FORMAT)
        return value

    @model_validator(mode="after")
    def _format_fits_step(self) -> Self:
        if self.step != "1d" and not _tells(self.time_format, dt.datetime(2004, 11, 23, 17)):
            raise ValueError(
                f"time_format {self.time_format!r}: {_TIME_FORMAT}; only a step of 1d needs no hour"
            )
        return self

    @model_validator(mode="after")
    def _limits_fit(self) -> Self:
        for code, limit in self.limits.items():
            if code not in self.series:
                raise ValueError(f"limits.{code}: not a code listed under series")
            if not 0 < limit < float("inf"):
                raise ValueError(f"limits.{code}: a detection limit is above 0 (found {limit})")
        if self.below_limit == "reject" and (self.not_detected or self.limits):
            raise ValueError(
                'not_detected and limits need a rule: set below_limit = "half", "limit" or "zero"'
            )
        both = sorted(set(self.not_detected) & set(self.missing))
        if both:
            raise ValueError(f"{both[0]!r} cannot be missing and not_detected; keep one")
        return self

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

    @cached_property
    def reading_rules(self) -> str:
        """Changes when any setting does by which the readings of a file would come out differently.

        Settings at their defaults do not enter, so that a setting which is new in the program changes nothing.
        """
        beside = {"name", "files", "settle_s", "size_limit_mb", "table_schema"}
        text = json.dumps(self.model_dump(mode="json", exclude=beside, exclude_defaults=True), sort_keys=True)
        return hashlib.sha256(text.encode()).hexdigest()[:16]

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


_TIME_FORMAT = "write a strptime pattern that holds year, month, day and hour: %Y-%m-%d %H:%M"


def _tells(pattern: str, moment: dt.datetime) -> bool:
    """Whether a pattern can write a moment so that it can be read back."""
    if "%z" in pattern:
        moment = moment.replace(tzinfo=dt.UTC)
    try:
        return dt.datetime.strptime(moment.strftime(pattern), pattern) == moment
    except ValueError:
        return False


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
