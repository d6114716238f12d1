"""Frictionless Table Schema (version 1) beside a feed file: compared with what the settings declare.

The settings decide how a file is read; a schema that says something else is told, with the file it belongs to.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from rhovane.ingest.cells import quoted
from rhovane.ingest.table import Table, listed
from rhovane.model import RejectedRow
from rhovane.settings import SourceSettings

SUFFIX = ".schema.json"
LARGEST_SCHEMA = 1_000_000  # bytes; a schema of thousands of columns has less
NUMBERS = ("number", "integer")
TIMES = ("datetime", "date", "time", "year", "yearmonth")


def schema_place(path: Path, source: SourceSettings, work_folder: Path) -> Path | None:
    """The schema that goes with a feed file: the one its source names, or FILE.schema.json; None without one."""
    if source.table_schema:
        return work_folder / source.table_schema
    beside = path.with_name(path.name + SUFFIX)
    return beside if beside.exists() else None


def schema_notes(place: Path, table: Table, source: SourceSettings) -> list[RejectedRow]:
    """What a schema contradicts, each with the remedy, as entries about the file (line 0)."""
    try:
        with place.open("rb") as stream:
            text = stream.read(LARGEST_SCHEMA + 1)
        if len(text) > LARGEST_SCHEMA:
            return [
                _note(place, f"is larger than {LARGEST_SCHEMA // 1_000_000} MB. Correct it, or remove it.")
            ]
        schema = json.loads(text)
    except OSError as error:
        return [_note(place, f"cannot be read ({error.strerror}). Correct table_schema of this source.")]
    except (ValueError, RecursionError) as error:
        return [_note(place, f"is no JSON ({error}). Correct it, or remove it.")]
    fields = schema.get("fields") if isinstance(schema, dict) else None
    if not isinstance(fields, list) or not all(
        isinstance(one, dict) and isinstance(one.get("name"), str) for one in fields
    ):
        return [
            _note(place, 'is no Table Schema: it has no list "fields" of objects with names. Correct it.')
        ]
    return [_note(place, text) for text in _contradictions(schema, fields, table, source)]


def _contradictions(
    schema: dict[str, Any], fields: list[dict[str, Any]], table: Table, source: SourceSettings
) -> list[str]:
    found = []
    names = [one["name"].strip() for one in fields]
    absent = [name for name in names if name not in table.header]
    extra = [name for name in table.header if name not in names]
    if absent:
        found.append(f"lists columns that the file lacks: {listed(absent)}. Correct the schema, or the file.")
    if extra:
        found.append(f"lacks columns of the file: {listed(extra)}. Correct the schema, or the file.")
    by_name = dict(zip(names, fields, strict=True))
    long = source.form.startswith("long")
    values = [source.columns.value] if long else [name for name in source.series if name in by_name]
    for name in values:
        if name in by_name:
            found += _value_field(name, by_name[name], source)
    time = by_name.get(source.columns.time)
    if time is not None:
        found += _time_field(source.columns.time, time, source)
    missing = schema.get("missingValues", [""])
    if isinstance(missing, list):
        unlisted = sorted(str(text) for text in missing if str(text) not in source.missing and text != "")
        if unlisted:
            found.append(
                f"calls {listed(unlisted)} missing. List {'it' if len(unlisted) == 1 else 'them'} under missing of this "
                "source, or correct the schema."
            )
        only_here = sorted(text for text in source.missing if text not in missing)
        if only_here and "missingValues" in schema:
            found.append(
                f"does not call {listed(only_here)} missing, as missing of this source does. Correct one of them."
            )
    return found


def _value_field(name: str, one: dict[str, Any], source: SourceSettings) -> list[str]:
    found = []
    kind = one.get("type", "string")
    if kind not in NUMBERS:
        found.append(
            f"gives column {quoted(name)} the type {quoted(str(kind))}, not a number. Correct the columns or series of this "
            "source, or the schema."
        )
    decimal = str(one.get("decimalChar", "."))
    if kind in NUMBERS and decimal != source.decimal:
        found.append(
            f"writes column {quoted(name)} with decimalChar {quoted(decimal)}, the settings with decimal "
            f'"{source.decimal}". Set decimal = "{decimal}" if the schema is right.'
        )
    group = one.get("groupChar")
    if group:
        found.append(
            f"lets column {quoted(name)} group digits with {quoted(str(group))}, which is never accepted. Have numbers "
            "delivered without it."
        )
    if one.get("bareNumber") is False:
        found.append(
            f"lets numbers of column {quoted(name)} carry other characters (bareNumber false), which is never accepted. "
            "Have plain numbers delivered."
        )
    return found


def _time_field(name: str, one: dict[str, Any], source: SourceSettings) -> list[str]:
    kind, pattern = str(one.get("type", "string")), str(one.get("format", "default"))
    if kind not in (*TIMES, "string"):
        return [
            f"gives the time column {quoted(name)} the type {quoted(kind)}. Correct columns.time, or the schema."
        ]
    if "%" in pattern and pattern != source.time_format:
        return [
            f"writes the time column {quoted(name)} as {quoted(pattern)}, the settings as {quoted(source.time_format)}. Set "
            f"time_format to it if the schema is right."
        ]
    if kind == "datetime" and pattern == "default" and source.form.endswith("csv"):
        iso = {"%Y-%m-%dT%H:%M:%SZ", "%Y-%m-%dT%H:%M:%S", "%Y-%m-%dT%H:%M:%S%z"}
        if source.time_format not in iso:
            return [
                f"writes the time column {quoted(name)} in the default format (2024-03-01T05:00:00Z), the settings as "
                f"{quoted(source.time_format)}. Set time_format, or give the schema this format."
            ]
    return []


def _note(place: Path, what: str) -> RejectedRow:
    return RejectedRow(0, "", "", f"The schema {place.name} {what}")
