"""OGC SensorThings API 1.1 (OGC 18-088): Observations in JSON → table in long form.

Understood wherever they stand: single Observations, pages (``value`` arrays), lists of pages, Datastreams with
expanded Observations, Things with expanded Datastreams, and data arrays. Rows are numbered from 1 in the order
of the file.
"""

from __future__ import annotations

import json
import re
from collections.abc import Iterable
from dataclasses import dataclass, field
from datetime import datetime
from typing import Any
from urllib.parse import unquote

from rhovane.ingest.cells import Cell, Fault, quoted, shown
from rhovane.ingest.table import Table
from rhovane.model import FeedError, RejectedRow
from rhovane.settings import SourceSettings

MEMBERS = ("phenomenonTime", "resultTime", "result", "resultQuality", "Datastream", "unitOfMeasurement")
MOST_LEVELS = 12  # of pages, Things and Datastreams around an Observation; four are usual
LONGEST_WHOLE = 18  # digits of a whole number that surely fits 64 bits
SHORTEST_DAY_S, LONGEST_DAY_S = 82_800, 90_000  # seconds; the civil days of 23 and 25 hours
_LINKED = re.compile(r"Datastreams\(([^)]*)\)")

Json = dict[str, Any]


@dataclass(frozen=True)
class _Stream:
    """What is known of the Datastream around an Observation."""

    id: str = ""
    name: str = ""
    unit: str = ""

    def code(self, known: Iterable[str]) -> str:
        """The text that stands for it in the settings: its id or name, whichever is listed there."""
        for text in (self.id, self.name):
            if text and text in known:
                return text
        return self.name or self.id


@dataclass
class _Found:
    """Observations in order, with their Datastreams; and what could not be taken for one."""

    observations: list[tuple[int, Json, _Stream]] = field(default_factory=list)
    rejected: list[RejectedRow] = field(default_factory=list)
    more: list[str] = field(default_factory=list)
    count: int = 0


def read_sensorthings_table(data: bytes, source: SourceSettings) -> Table:
    """Observations as rows.

    Parameters
    ----------
    data : bytes
        A JSON document in UTF-8.
    source : SourceSettings
        Its ``columns`` name members of an Observation, dotted where they are nested ("parameters.stage"), besides
        ``Datastream`` (id or name) and ``unitOfMeasurement`` (symbol). Of a ``phenomenonTime`` that is an
        interval the end is taken that ``label`` names; its length must be the step.

    Raises
    ------
    FeedError
        It is no JSON, names a member twice, or is nested too deeply.
    """
    document = _document(data)
    found = _Found()
    _gather(document, _Stream(), found, 0)
    rows: list[tuple[int, Json, _Stream, Cell]] = []
    for number, observation, stream in found.observations:
        label = _label(observation.get("phenomenonTime"), source)
        if isinstance(label, Fault):
            raw = shown(_plain(observation.get("phenomenonTime")))
            found.rejected.append(RejectedRow(number, "phenomenonTime", raw, label.reason))
        else:
            rows.append((number, observation, stream, label))
    if found.more:
        reason = "The file says that more observations follow elsewhere (nextLink). Have all pages delivered as files."
        found.rejected.append(RejectedRow(0, "", shown(found.more[-1]), reason))

    def column(name: str) -> list[Cell]:
        if name == "phenomenonTime":
            return [label for *_, label in rows]
        if name == "Datastream":
            return [stream.code(source.series) for _, _, stream, _ in rows]
        if name == "unitOfMeasurement":
            return [stream.unit for _, _, stream, _ in rows]
        if name == "resultTime":
            return [_time(observation.get(name)) for _, observation, _, _ in rows]
        if name == "resultQuality":
            return [_quality(observation.get(name)) for _, observation, _, _ in rows]
        return [_plain(_member(observation, name)) for _, observation, _, _ in rows]

    named = [name for name in source.columns.model_dump().values() if name and name not in MEMBERS]
    present = [name for name in named if any(_member(row[1], name) is not None for row in rows)]
    return Table(
        (*MEMBERS, *present),
        [number for number, *_ in rows],
        column,
        lambda row: shown(json.dumps(rows[row][1], ensure_ascii=False)),
        tuple(found.rejected),
    )


def _document(data: bytes) -> Any:
    if not data.strip():
        raise FeedError("The file is empty. Ask the source to deliver it again, or remove it.")
    try:
        return json.loads(
            data.decode("utf-8-sig"),
            object_pairs_hook=_object,
            parse_constant=str,
            parse_int=lambda text: int(text) if len(text) <= LONGEST_WHOLE else float(text),
        )
    except UnicodeDecodeError as error:
        raise FeedError(
            f"The file is not UTF-8 text ({error.reason} at byte {error.start}). Deliver it again."
        ) from None
    except json.JSONDecodeError as error:
        raise FeedError(
            f"The file is no JSON: {error.msg}, line {error.lineno}, column {error.colno}. It may be cut; deliver the "
            "whole file again."
        ) from None
    except RecursionError:
        raise FeedError("The JSON is nested too deeply to be observations. Deliver it again.") from None


def _object(members: list[tuple[str, Any]]) -> Json:
    made = dict(members)
    if len(made) < len(members):
        names = [name for name, _ in members]
        twice = next(name for name in names if names.count(name) > 1)
        raise FeedError(
            f"An object of the JSON names {quoted(twice)} twice, so it cannot be told which one is meant. Deliver it again."
        )
    return made


def _gather(item: Any, stream: _Stream, found: _Found, level: int) -> None:
    """Collect the Observations of a part of the document, in order."""
    if level > MOST_LEVELS:
        raise FeedError("The JSON is nested too deeply to be observations. Deliver it again.")
    if isinstance(item, list):
        for part in item:
            _gather(part, stream, found, level + 1)
        return
    if not isinstance(item, dict):
        _refuse(item, "is no object", found)
        return
    next_links = [
        text for name, text in item.items() if name.endswith("@iot.nextLink") and isinstance(text, str)
    ]
    if "components" in item and "dataArray" in item:
        _gather_array(item, _stream_of(item, stream), found)
    elif "result" in item or "phenomenonTime" in item:
        found.count += 1
        found.observations.append((found.count, item, _stream_of(item, stream)))
    elif "Observations" in item:
        _gather(item["Observations"], _described(item, stream), found, level + 1)
    elif "Datastreams" in item:
        _gather(item["Datastreams"], stream, found, level + 1)
    elif isinstance(item.get("value"), list):
        linked = _LINKED.search(next_links[0]) if next_links else None
        if linked and stream == _Stream():
            stream = _Stream(id=_id_of_link(linked))
        _gather(item["value"], stream, found, level + 1)
    else:
        _refuse(item, "holds no observations", found)
    found.more += next_links


def _refuse(item: Any, what: str, found: _Found) -> None:
    found.count += 1
    found.rejected.append(
        RejectedRow(
            found.count,
            "",
            shown(_plain(item)),
            f"This entry {what}. Ask for Observations, or for Datastreams with $expand=Observations.",
        )
    )


def _gather_array(item: Json, stream: _Stream, found: _Found) -> None:
    names, rows = item["components"], item["dataArray"]
    if not isinstance(names, list) or not isinstance(rows, list):
        _refuse(item, "has a data array that is no list", found)
        return
    for row in rows:
        if isinstance(row, list) and len(row) == len(names):
            found.count += 1
            observation = {str(name): value for name, value in zip(names, row, strict=True)}
            found.observations.append((found.count, observation, stream))
        else:
            _refuse(row, f"has not the {len(names)} components of its data array", found)


def _stream_of(observation: Json, around: _Stream) -> _Stream:
    """The Datastream that an Observation names, or the one around it."""
    inside = observation.get("Datastream")
    if isinstance(inside, dict):
        return _described(inside, around)
    link = observation.get("Datastream@iot.navigationLink")
    linked = _LINKED.search(link) if isinstance(link, str) else None
    if linked and around == _Stream():
        return _Stream(id=_id_of_link(linked))
    return around


def _described(stream: Json, around: _Stream) -> _Stream:
    unit = stream.get("unitOfMeasurement")
    symbol = unit.get("symbol") or unit.get("name") if isinstance(unit, dict) else ""
    return _Stream(
        _text(stream.get("@iot.id")) or around.id,
        _text(stream.get("name")) or around.name,
        _text(symbol) or around.unit,
    )


def _id_of_link(linked: re.Match[str]) -> str:
    return unquote(linked[1]).strip("'")


def _text(value: Any) -> str:
    return str(value).strip() if isinstance(value, str | int | float) else ""


def _label(value: Any, source: SourceSettings) -> Cell | Fault:
    """The time label: an instant as it stands, or the declared end of an interval."""
    if not isinstance(value, str) or not value.strip():
        return Fault("There is no phenomenonTime. Correct the observation.")
    ends = [_instant(part) for part in value.split("/")]
    if len(ends) > 2 or None in ends:
        return Fault(f"{quoted(value)} is neither a time of ISO 8601 nor an interval of two.")
    first, last = ends[0], ends[-1]
    assert first is not None
    assert last is not None
    if len(ends) == 1:
        return first
    if (first.tzinfo is None) != (last.tzinfo is None):
        return Fault(f"{quoted(value)}: one end has an offset from UTC and the other has none.")
    length = (last - first).total_seconds()
    step = source.step_minutes * 60
    if length != step and not (source.step == "1d" and SHORTEST_DAY_S <= length <= LONGEST_DAY_S):
        return Fault(
            f"{quoted(value)} lasts {length:g} s, but the step of this source is {source.step}. Correct the step, or "
            "give these observations a source of their own."
        )
    return last if source.label == "end" else first


def _instant(text: str) -> datetime | None:
    try:
        return datetime.fromisoformat(text.strip())
    except ValueError:
        return None


def _time(value: Any) -> Cell:
    found = _instant(value) if isinstance(value, str) else None
    return found if found is not None else _plain(value)


def _quality(value: Any) -> Cell:
    """A quality code: as it stands, or the ``code`` inside a data quality element."""
    element = value[0] if isinstance(value, list) and len(value) == 1 else value
    for _ in range(3):  # DQ_Element > DQ_Result > code
        if not isinstance(element, dict):
            break
        if "code" in element:
            return _plain(element["code"])
        if len(element) != 1:
            break
        element = next(iter(element.values()))
    return _plain(element)


def _member(observation: Json, dotted: str) -> Any:
    here: Any = observation
    for name in dotted.split("."):
        if not isinstance(here, dict) or name not in here:
            return None
        here = here[name]
    return here


def _plain(value: Any) -> Cell:
    """A JSON value as a cell; what is neither text nor number becomes its JSON text."""
    if value is None or (isinstance(value, str | int | float) and not isinstance(value, bool)):
        return value
    return json.dumps(value, ensure_ascii=False)
