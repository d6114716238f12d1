"""The site log as people write it: a plain table, one line an entry."""

from __future__ import annotations

import csv
import datetime as dt
from collections.abc import Collection, Mapping
from pathlib import Path

from rhovane.model import ReadingsUse, SettingsError, SiteLogEntry
from rhovane.model.site_log import WHOLE_NETWORK

COLUMNS = ("subject", "from", "to", "what", "readings")
DAY = dt.timedelta(days=1)
MOMENT = "%Y-%m-%d %H:%M"


def load_site_log(
    path: Path, known_series: Collection[str], standard_offset: dt.timedelta
) -> tuple[SiteLogEntry, ...]:
    """The entries of a site log file; lines that begin with ``#`` are comments.

    Raises
    ------
    SettingsError
        The file cannot be read, or holds mistakes; the message lists all of them with line and column.
    """
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        why = error.strerror if isinstance(error, OSError) else "not UTF-8 text"
        raise SettingsError(
            f'{path}: the site log cannot be read ({why}). Write the file, or set site_log.file to "" for none.'
        ) from error
    lines = ["" if line.lstrip().startswith("#") else line for line in text.splitlines()]
    rows = csv.reader(lines)
    header: list[str] | None = None
    entries: list[SiteLogEntry] = []
    found: list[tuple[str, str]] = []
    for row in rows:
        if not any(cell.strip() for cell in row):
            continue
        cells = [cell.strip() for cell in row]
        where = f"line {rows.line_num}"
        if header is None:
            header = cells
            if sorted(header) != sorted(COLUMNS):
                found.append((where, f"the columns are {','.join(header)}; write {','.join(COLUMNS)}"))
                break
            continue
        if len(cells) != len(header):
            found.append(
                (
                    where,
                    f"{len(cells)} cells for {len(header)} columns; put quotes around a text with commas",
                )
            )
            continue
        entry, mistakes = site_log_entry(dict(zip(header, cells, strict=True)), known_series, standard_offset)
        found += [(f"{where}, column {column}", what) for column, what in mistakes]
        if entry is not None and entry in entries:
            found.append((where, "the same entry stands further up; keep one"))
        elif entry is not None:
            entries.append(entry)
    if found:
        count = "1 mistake" if len(found) == 1 else f"{len(found)} mistakes"
        told = "\n".join(f"  {place}: {what}" for place, what in found)
        raise SettingsError(
            f"{path} has {count}:\n{told}\nNothing of it was taken over. Edit the file and retry."
        )
    return tuple(entries)


def site_log_entry(
    cells: Mapping[str, str], known_series: Collection[str], standard_offset: dt.timedelta
) -> tuple[SiteLogEntry | None, list[tuple[str, str]]]:
    """One entry from its cells, or None and its mistakes as (column, what is wrong and what to do).

    Times are standard time, ``standard_offset`` ahead of UTC.
    """
    found: list[tuple[str, str]] = []
    subject = cells["subject"]
    stations = {key.partition(".")[0] for key in known_series}
    if subject != WHOLE_NETWORK and subject not in known_series and subject not in stations:
        found.append(
            (
                "subject",
                f"{subject!r} is no series or station; write one of {', '.join(sorted(stations))}, a series such as "
                f"{min(known_series, default='STATION.quantity')}, or {WHOLE_NETWORK} for all",
            )
        )
    start = _moment(cells["from"], standard_offset, whole_day=False)
    end = _moment(cells["to"], standard_offset, whole_day=True) if cells["to"] else None
    for column, moment in (("from", start), ("to", end)):
        if moment is None and (column == "from" or cells["to"]):
            found.append((column, f"{cells[column]!r} is no time; write YYYY-MM-DD or YYYY-MM-DD HH:MM"))
    if start is not None and end is not None and end <= start:
        found.append(("to", f"{cells['to']} is not after {cells['from']}; put them in order"))
    if not cells["what"]:
        found.append(("what", "is empty; say in a few words what happened"))
    word = cells["readings"] or ReadingsUse.NO_REFERENCE.value
    if word not in {use.value for use in ReadingsUse}:
        known = ", ".join(use.value for use in ReadingsUse)
        found.append(("readings", f"{word!r} is not known; write one of {known}"))
    if found or start is None:
        return None, found
    return SiteLogEntry(subject, start, end, cells["what"], ReadingsUse(word)), []


def _moment(text: str, standard_offset: dt.timedelta, *, whole_day: bool) -> dt.datetime | None:
    """A date or time of standard time in UTC; None where it is neither. ``whole_day``: a date means its end."""
    try:
        moment = dt.datetime.strptime(text, MOMENT)
    except ValueError:
        try:
            moment = dt.datetime.strptime(text, "%Y-%m-%d") + (DAY if whole_day else dt.timedelta(0))
        except ValueError:
            return None
    return (moment - standard_offset).replace(tzinfo=dt.UTC)
