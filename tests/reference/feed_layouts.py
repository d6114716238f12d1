"""Writes invented readings as feed files in any layout; imports nothing from ``src``."""

from __future__ import annotations

import csv
import io
import json
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta, timezone
from zoneinfo import ZoneInfo


@dataclass(frozen=True)
class Layout:
    """How a feed file is written; ``clock`` "UTC", "+01:00" or "civil ZONE"."""

    form: str
    clock: str = "UTC"
    label: str = "start"
    step_minutes: int = 60
    time_format: str = "%Y-%m-%d %H:%M"
    delimiter: str = ","
    decimal: str = "."
    encoding: str = "utf-8"
    line_end: str = "\n"
    final_line_end: bool = True
    quote_all: bool = False
    missing: str = "-999"


def label_of(instant: int, layout: Layout) -> str:
    """The label of the interval that starts at an instant (s UTC), as the clock of the layout shows it."""
    moment = datetime.fromtimestamp(instant, UTC)
    if layout.label == "end":
        moment += timedelta(minutes=layout.step_minutes)
    if layout.clock == "UTC":
        zone = UTC
    elif layout.clock.startswith("civil "):
        zone = ZoneInfo(layout.clock.removeprefix("civil "))
    else:
        sign = -1 if layout.clock[0] == "-" else 1
        zone = timezone(sign * timedelta(hours=int(layout.clock[1:3]), minutes=int(layout.clock[4:6])))
    return moment.astimezone(zone).strftime(layout.time_format)


def number_text(value: float | None, layout: Layout) -> str:
    """A value as text; None as the missing code."""
    return layout.missing if value is None else repr(value).replace(".", layout.decimal)


def write_long(readings: list[tuple[str, str, int, float | None]], layout: Layout) -> bytes:
    """Readings (station, quantity, start in s UTC, value or None) as a long CSV file, in the order given."""
    rows = [["time", "station", "quantity", "value"]]
    rows += [[label_of(t, layout), s, q, number_text(v, layout)] for s, q, t, v in readings]
    return _write(rows, layout)


def write_wide(starts: list[int], columns: dict[str, list[float | None]], layout: Layout) -> bytes:
    """One row a start (s UTC) and one column a name as a wide CSV file."""
    rows = [["time", *columns]]
    for i, start in enumerate(starts):
        rows.append([label_of(start, layout), *(number_text(v[i], layout) for v in columns.values())])
    return _write(rows, layout)


def _write(rows: list[list[str]], layout: Layout) -> bytes:
    stream = io.StringIO(newline="")
    quoting = csv.QUOTE_ALL if layout.quote_all else csv.QUOTE_MINIMAL
    csv.writer(stream, delimiter=layout.delimiter, lineterminator=layout.line_end, quoting=quoting).writerows(
        rows
    )
    text = stream.getvalue()
    if not layout.final_line_end:
        text = text.removesuffix(layout.line_end)
    return text.encode(layout.encoding)


SENSORTHINGS_SHAPES = ("page", "pages", "bare", "datastreams", "things", "data arrays")


def write_sensorthings(
    readings: list[tuple[tuple[str, str], int, float | None]],
    shape: str,
    *,
    label: str = "start",
    interval: bool = True,
    step_minutes: int = 60,
) -> bytes:
    """Readings ((Datastream id, name), start in s UTC, value or None) as SensorThings 1.1 JSON of a shape."""

    def iso(instant: int) -> str:
        return datetime.fromtimestamp(instant, UTC).strftime("%Y-%m-%dT%H:%M:%SZ")

    def phenomenon(start: int) -> str:
        end = start + 60 * step_minutes
        if interval:
            return f"{iso(start)}/{iso(end)}"
        return iso(end if label == "end" else start)

    def stream(one: tuple[str, str]) -> dict:
        unit = {"name": "microgram per cubic metre", "symbol": "µg/m3"}
        return {"@iot.id": one[0], "name": one[1], "unitOfMeasurement": unit}

    def body(start: int, value: float | None) -> dict:
        return {"phenomenonTime": phenomenon(start), "resultTime": iso(start + 7200), "result": value}

    whole = [body(t, v) | {"Datastream": stream(s)} for s, t, v in readings]
    streams = dict.fromkeys(s for s, _, _ in readings)
    expanded = [
        stream(s) | {"Observations": [body(t, v) for s2, t, v in readings if s2 == s]} for s in streams
    ]
    names = ["result", "phenomenonTime", "resultTime"]
    arrays = [
        {
            "Datastream": stream(s),
            "components": names,
            "dataArray": [[o[n] for n in names] for o in one["Observations"]],
        }
        for s, one in zip(streams, expanded, strict=True)
    ]
    half = len(whole) // 2
    documents = {
        "page": {"value": whole},
        "pages": [{"value": whole[:half], "@iot.nextLink": "http://x/?$skip=9"}, {"value": whole[half:]}],
        "bare": whole,
        "datastreams": {"value": expanded},
        "things": {"value": [{"name": "KEL", "Datastreams": expanded}]},
        "data arrays": arrays,
    }
    return json.dumps(documents[shape], ensure_ascii=False).encode()
