"""The calendar: days on which people live otherwise, hours of maintenance, days that are not judged.

A plain TOML file of ``[[entry]]`` tables. An entry is a span of days, on the civil clock, that may come
again by a recurrence rule of RFC 5545 (section 3.3.10).
"""

from __future__ import annotations

import datetime as dt
import tomllib
from collections.abc import Iterable
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError

from rhovane.model import SettingsError

if TYPE_CHECKING:
    from dateutil.rrule import rrule

DAY = dt.timedelta(days=1)
KINDS = ("other days", "maintenance", "not judged")
RULE_PARTS = [
    "FREQ",
    "UNTIL",
    "COUNT",
    "INTERVAL",
    "BYDAY",
    "BYMONTHDAY",
    "BYYEARDAY",
    "BYWEEKNO",
    "BYMONTH",
    "BYSETPOS",
    "WKST",
]  # of RFC 5545, those that speak of days
FREQUENCIES = ("DAILY", "WEEKLY", "MONTHLY", "YEARLY")
LONGEST_SEARCH = dt.timedelta(days=366 * 30)  # a rule without a day in so long has none


class CalendarEntry(BaseModel):
    """One entry: what, of which kind, from which day to which, how it comes again, and whom it concerns."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    title: str = Field(min_length=1, description="What it is, in a few words.")
    kind: Literal["other days", "maintenance", "not judged"]
    first: dt.date = Field(description="First day, civil clock.")
    last: dt.date | None = Field(None, description="Last day of the span, included; default: the first.")
    rule: str = Field("", description="RFC 5545 recurrence rule of the first day, such as FREQ=YEARLY.")
    hours: Annotated[tuple[int, ...], Field(min_length=2, max_length=2)] = Field(
        (0, 24), description="Maintenance: hours of the civil day, from (included) to (excluded)."
    )
    series: tuple[str, ...] = Field((), description="Series concerned; with stations empty too: all.")
    stations: tuple[str, ...] = Field((), description="Stations concerned; with series empty too: all.")

    def concerns(self, series_key: str) -> bool:
        """Whether the entry concerns a series."""
        everyone = not self.series and not self.stations
        return everyone or series_key in self.series or series_key.partition(".")[0] in self.stations

    def spans(self, first: dt.date, last: dt.date) -> list[tuple[dt.date, dt.date]]:
        """The spans of days of the entry that touch the days from ``first`` to ``last``, in order."""
        length = (self.last or self.first) - self.first
        if not self.rule:
            begins = [self.first]
        else:
            low, high = first - length, max(last, first)
            begins = [
                d.date() for d in _recurrence(self.rule, self.first).between(*_midnights(low, high), inc=True)
            ]
        return [(b, b + length) for b in begins if b <= last and b + length >= first]

    def dates(self, first: dt.date, last: dt.date) -> frozenset[dt.date]:
        """The days of the entry among those from ``first`` to ``last``."""
        return frozenset(
            day
            for begin, end in self.spans(first, last)
            for day in (begin + i * DAY for i in range((end - begin).days + 1))
            if first <= day <= last
        )

    def mistakes(self, known_series: Iterable[str]) -> list[tuple[str, str]]:
        """What contradicts itself or the network, as (key, what is wrong and what to do)."""
        found = []
        keys = set(known_series)
        stations = {key.partition(".")[0] for key in keys}
        if self.last is not None and self.last < self.first:
            found.append(("last", f"{self.last} is before the first day {self.first}; put them in order"))
        if self.rule:
            wrong = rule_mistake(self.rule, self.first)
            if wrong:
                found.append(("rule", wrong))
        begin, end = self.hours
        if not 0 <= begin < end <= 24:
            found.append(("hours", f"{list(self.hours)} is no part of a day; write [from, to] from 0 to 24"))
        elif (begin, end) != (0, 24) and self.kind != "maintenance":
            found.append(("hours", f'hours are for kind "maintenance"; {self.kind!r} means whole days'))
        if self.kind == "other days" and (self.series or self.stations):
            where = "series" if self.series else "stations"
            found.append((where, '"other days" are those of all people; leave series and stations out'))
        found += [
            ("series", f"series {k!r} is not defined; known: {', '.join(sorted(keys))}")
            for k in self.series
            if k not in keys
        ]
        found += [
            ("stations", f"station {s!r} has no series; known: {', '.join(sorted(stations))}")
            for s in self.stations
            if s not in stations
        ]
        return found


def rule_mistake(rule: str, first: dt.date) -> str | None:
    """What is wrong with a recurrence rule that begins on a day; None when nothing is."""
    parts = dict.fromkeys(rule.split(";"))
    names = [part.partition("=")[0] for part in parts]
    unknown = [name for name in names if name not in RULE_PARTS]
    if unknown:
        return f"{unknown[0]!r} is no part of a rule for days; known: {', '.join(RULE_PARTS)}"
    frequency = next((part.partition("=")[2] for part in parts if part.startswith("FREQ=")), "")
    if frequency not in FREQUENCIES:
        return f"write FREQ={'|'.join(FREQUENCIES)}, then other parts joined by semicolons"
    try:
        recurrence = _recurrence(rule, first)
        found = recurrence.between(*_midnights(first, first + LONGEST_SEARCH), inc=True, count=1)
    except (ValueError, TypeError) as error:
        return f"{rule!r} is not a rule of RFC 5545 ({error}); an example: FREQ=WEEKLY;BYDAY=TU"
    nearest = next(iter(found), None)
    if nearest is None:
        return f"{rule!r} has no day within 30 years; correct it, or leave it out for a single span"
    if nearest.date() != first:
        return f"the first day {first} does not follow it; begin on {nearest.date()}, or correct the rule"
    return None


def _recurrence(rule: str, first: dt.date) -> rrule:
    from dateutil.rrule import rrulestr

    found: rrule = rrulestr(rule, dtstart=dt.datetime.combine(first, dt.time()))
    return found


def _midnights(first: dt.date, last: dt.date) -> tuple[dt.datetime, dt.datetime]:
    return dt.datetime.combine(first, dt.time()), dt.datetime.combine(last, dt.time())


def load_calendar(path: Path, known_series: Iterable[str]) -> tuple[CalendarEntry, ...]:
    """The entries of a calendar file.

    Raises
    ------
    SettingsError
        The file is missing, is not TOML, or holds mistakes; the message lists all of them.
    """
    try:
        raw = tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise SettingsError(
            f"{path}: the calendar cannot be read ({error.strerror}). Write the file, correct calendar.file in "
            'the settings, or set it to "" for no calendar.'
        ) from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise SettingsError(
            f"{path}: not valid TOML: {error}. Nothing was run. Edit the file and retry."
        ) from error
    found = [(key, "not known here; a calendar holds [[entry]] tables only") for key in raw if key != "entry"]
    tables = raw.get("entry", [])
    entries = []
    if not isinstance(tables, list):
        found.append(("entry", "write each entry as a table of its own that begins with [[entry]]"))
        tables = []
    keys = tuple(known_series)
    for i, table in enumerate(tables):
        where = f"entry[{i}]" + (
            f" ({table['title']})" if isinstance(table, dict) and table.get("title") else ""
        )
        try:
            one = CalendarEntry.model_validate(table)
        except ValidationError as error:
            found += [(f"{where}.{_key(e)}", _words(e)) for e in error.errors()]
            continue
        entries.append(one)
        found += [(f"{where}.{key}", what) for key, what in one.mistakes(keys)]
    if found:
        count = "1 mistake" if len(found) == 1 else f"{len(found)} mistakes"
        lines = "\n".join(f"  {key}: {what}" for key, what in found)
        raise SettingsError(f"{path} has {count}:\n{lines}\nNothing was run. Edit the file and retry.")
    return tuple(entries)


def _key(error: Any) -> str:
    return str(error["loc"][0]) if error["loc"] else "entry"


def _words(error: Any) -> str:
    """What is wrong with one key of an entry, and what is allowed."""
    field = CalendarEntry.model_fields.get(_key(error))
    if error["type"] == "extra_forbidden":
        return f"not known; known here: {', '.join(CalendarEntry.model_fields)}"
    if error["type"] == "missing":
        meaning = f": {field.description}" if field is not None and field.description else ""
        return f"must be given{meaning}"
    if _key(error) == "kind":
        return f"{error['input']!r} is not a kind; write one of {', '.join(repr(k) for k in KINDS)}"
    meaning = f". Meaning: {field.description}" if field is not None and field.description else ""
    return f"{error['msg']} (found {error['input']!r}){meaning}"
