"""The rules of ingest once more, one row at a time and as slowly as they are stated.

Independent of the program: it imports nothing from ``src`` and takes its own description of a feed. It knows
CSV without line breaks in fields, in UTF-8, and gives no reasons: only what is kept and where something is rejected.
"""

from __future__ import annotations

import itertools
from collections import defaultdict
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from decimal import Decimal
from zoneinfo import ZoneInfo

EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
PASS, NOT_EVALUATED, SUSPECT, FAIL, MISSING = 1, 2, 3, 4, 9


@dataclass
class NaiveFeed:
    """How a feed is written; ``form`` "long" or "wide", ``clock`` "UTC", "+01:00" or "civil ZONE"."""

    form: str
    clock: str
    label: str
    step_minutes: int
    time_format: str
    delimiter: str
    decimal: str
    missing: tuple[str, ...]
    columns: dict[str, str]
    series: dict[str, str]
    factors: dict[str, float] = field(default_factory=dict)  # unit in the feed → factor to the wanted unit
    units: dict[str, str] = field(default_factory=dict)
    flags: dict[str, int] = field(default_factory=dict)
    stages: dict[str, int] = field(default_factory=dict)


@dataclass
class NaiveReading:
    """One reading and where it stood; ``column`` is "" in long files."""

    key: str
    value: float
    flag: int
    stage: int
    line: int
    column: str
    hour_start: int


def naive_ingest(data: bytes, feed: NaiveFeed) -> tuple[list[tuple], list[tuple[int, str]]]:
    """Kept readings (key, hour start, value, flag, stage, line) in file order; rejected (line, column), sorted."""
    text = data.decode().removeprefix("\ufeff").replace("\r\n", "\n")
    ends_whole = text.endswith("\n")
    lines = text.split("\n")
    if ends_whole:
        lines.pop()
    header_at = next(i for i, line in enumerate(lines) if line.strip())
    header = _split(lines[header_at], feed.delimiter)
    assert header is not None
    rejected: list[tuple[int, str]] = []
    rows: list[tuple[int, dict[str, str]]] = []
    for number, line in enumerate(lines[header_at + 1 :], start=header_at + 2):
        if not line.strip():
            continue
        fields = _split(line, feed.delimiter)
        if "\0" in line or line == lines[header_at] or fields is None or len(fields) != len(header):
            rejected.append((number, ""))
        else:
            rows.append((number, dict(zip(header, fields, strict=True))))
    stamped = _stamp(rows, feed, rejected)
    read = _read_long if feed.form == "long" else _read_wide
    readings = read(stamped, feed, rejected)
    return _without_repeats(readings, rejected), sorted(rejected)


def _split(line: str, delimiter: str) -> list[str] | None:
    """Fields of a line by hand; None where a quote is never closed or is followed by more text."""
    fields, text, quoted, closed = [], "", False, False
    i = 0
    while i < len(line):
        character = line[i]
        if quoted:
            if character == '"' and line[i + 1 : i + 2] == '"':
                text += '"'
                i += 1
            elif character == '"':
                quoted, closed = False, True
            else:
                text += character
        elif character == delimiter:
            fields.append(text)
            text, closed = "", False
        elif closed:
            return None
        elif character == '"' and not text:
            quoted = True
        else:
            text += character
        i += 1
    return None if quoted else [*fields, text]


def _stamp(rows, feed: NaiveFeed, rejected) -> list[tuple[int, dict[str, str], int]]:
    """Rows with the instant of their label; rows whose label names none are rejected."""
    labelled = []
    for number, row in rows:
        if feed.form == "long" and _key(row, feed) is None:
            known = any(
                code.rpartition(" ")[0] == row[feed.columns["station"]].strip() for code in feed.series
            )
            rejected.append((number, feed.columns["quantity" if known else "station"]))
            continue
        label = _label(row[feed.columns["time"]], feed)
        if label is None:
            rejected.append((number, feed.columns["time"]))
        else:
            labelled.append((number, row, label))
    groups = defaultdict(list)
    for entry in labelled:
        groups[_key(entry[1], feed) if feed.form == "long" else ""].append(entry)
    instant_of: dict[int, int] = {}
    for entries in groups.values():
        for (number, _, _), instant in zip(entries, _instants([e[2] for e in entries], feed), strict=True):
            if instant is None:
                rejected.append((number, feed.columns["time"]))
            else:
                instant_of[number] = instant
    shift = feed.step_minutes * 60 if feed.label == "end" else 0
    return [(n, row, instant_of[n] - shift) for n, row, _ in labelled if n in instant_of]


def _key(row: dict[str, str], feed: NaiveFeed) -> str | None:
    codes = [row[feed.columns[name]].strip() for name in ("station", "quantity") if feed.columns.get(name)]
    return feed.series.get(" ".join(codes))


def _label(text: str, feed: NaiveFeed) -> datetime | None:
    """Clock reading of a label, if there is such a reading on the step."""
    try:
        label = datetime.strptime(text.strip(), feed.time_format)
    except ValueError:
        return None
    midnight = label.replace(hour=0, minute=0, second=0, microsecond=0)
    if (label - midnight) % timedelta(minutes=feed.step_minutes):
        return None
    return label if _candidates(label, feed) else None


def _candidates(label: datetime, feed: NaiveFeed) -> list[int]:
    """Every instant at which the clock shows the label, found by looking at the clock in each of them."""
    naive = round((label.replace(tzinfo=UTC) - EPOCH).total_seconds())
    if feed.clock == "UTC":
        return [naive]
    if not feed.clock.startswith("civil "):
        sign = -1 if feed.clock[0] == "-" else 1
        return [naive - sign * (int(feed.clock[1:3]) * 3600 + int(feed.clock[4:6]) * 60)]
    zone = ZoneInfo(feed.clock.removeprefix("civil "))
    tried = range(naive - 15 * 3600, naive + 15 * 3600, 900)
    return [t for t in tried if datetime.fromtimestamp(t, zone).replace(tzinfo=None) == label]


def _instants(labels: list[datetime], feed: NaiveFeed) -> list[int | None]:
    """One instant a label: the one it has in every choice under which time runs forward."""
    steps = [(b > a) - (b < a) for a, b in itertools.pairwise(labels)]
    backwards = sum(steps) < 0
    if backwards:
        labels = labels[::-1]
    candidates = [_candidates(label, feed) for label in labels]
    settled: list[int | None] = [c[0] if len(c) == 1 else None for c in candidates]
    begin = 0
    while begin < len(labels):
        if settled[begin] is not None:
            begin += 1
            continue
        end = begin
        # One stretch: neighbouring rows shown twice, of the same clock change.
        while end < len(labels) and len(candidates[end]) == 2:
            if end > begin and abs(labels[end] - labels[end - 1]) >= timedelta(hours=1):
                break
            end += 1
        before = candidates[begin - 1][0] if begin else float("-inf")
        after = candidates[end][0] if end < len(labels) else float("inf")
        possible = [
            choice
            for choice in itertools.product(*candidates[begin:end])
            if all(a < b for a, b in itertools.pairwise([before, *choice, after]))
            and before < min(c[0] for c in candidates[begin:end])
            and after > max(c[1] for c in candidates[begin:end])
        ]
        chosen = [set(column) for column in zip(*possible, strict=True)]
        settled[begin:end] = [c.pop() if len(c) == 1 else None for c in chosen] or [None] * (end - begin)
        begin = end
    return settled[::-1] if backwards else settled


def _number(text: str, feed: NaiveFeed) -> float | str | None:
    """A number, None for missing, or "bad"."""
    stripped = text.strip()
    if stripped in feed.missing or text in feed.missing:
        return None
    if not stripped or set(stripped) - set("0123456789+-eE" + feed.decimal):
        return "bad"
    try:
        number = float(Decimal(stripped.replace(feed.decimal, ".")))
        codes = [
            float(Decimal(m.replace(feed.decimal, ".")))
            for m in feed.missing
            if m.strip("-0123456789") == "" and m
        ]
    except ArithmeticError:
        return "bad"
    if number in codes:
        return None
    return "bad" if abs(number) == float("inf") else number


def _status(row: dict[str, str], feed: NaiveFeed) -> tuple[int, int] | str:
    """Flag and stage of a row, or the column that cannot be understood."""
    flag, stage = NOT_EVALUATED, 0
    if feed.columns.get("flag"):
        code = row[feed.columns["flag"]].strip()
        if code not in feed.flags:
            return feed.columns["flag"]
        flag = feed.flags[code]
    if feed.columns.get("stage"):
        code = row[feed.columns["stage"]].strip()
        if code not in feed.stages:
            return feed.columns["stage"]
        stage = feed.stages[code]
    return flag, stage


def _value(text: str, flag: int, feed: NaiveFeed) -> float | str | None:
    number = _number(text, feed)
    if flag == MISSING and (number != "bad" or not text.strip()):
        return None
    return number


def _read_long(stamped, feed: NaiveFeed, rejected) -> list[NaiveReading]:
    readings = []
    for number, row, hour_start in stamped:
        status = _status(row, feed)
        if isinstance(status, str):
            rejected.append((number, status))
            continue
        flag, stage = status
        value = _value(row[feed.columns["value"]], flag, feed)
        if value == "bad":
            rejected.append((number, feed.columns["value"]))
            continue
        if value is not None:
            code = " ".join(
                row[feed.columns[n]].strip() for n in ("station", "quantity") if feed.columns.get(n)
            )
            unit_column = feed.columns.get("unit")
            unit = row[unit_column].strip() if unit_column else ""
            unit = unit or feed.units.get(code, "" if unit_column else next(iter(feed.factors), ""))
            if feed.factors and unit not in feed.factors:
                rejected.append((number, unit_column or feed.columns["value"]))
                continue
            value *= feed.factors.get(unit, 1.0)
        key = _key(row, feed)
        readings.append(_reading(key, value, flag, stage, number, "", hour_start))
    return readings


def _read_wide(stamped, feed: NaiveFeed, rejected) -> list[NaiveReading]:
    readings = []
    for number, row, hour_start in stamped:
        status = _status(row, feed)
        if isinstance(status, str):
            rejected.append((number, status))
            continue
        flag, stage = status
        for name, text in row.items():
            if name not in feed.series:
                continue
            value = _value(text, flag, feed)
            if value == "bad":
                rejected.append((number, name))
            else:
                readings.append(_reading(feed.series[name], value, flag, stage, number, name, hour_start))
    return readings


def _reading(key, value, flag, stage, line, column, hour_start) -> NaiveReading:
    nothing = value is None
    number = float("nan") if nothing else value
    return NaiveReading(key, number, MISSING if nothing else flag, stage, line, column, hour_start)


def _without_repeats(readings: list[NaiveReading], rejected) -> list[tuple]:
    """One reading a series and hour: the highest stage, then the later line; of equal ones the first."""
    kept: list[NaiveReading] = []
    for one in readings:
        twin = next((k for k in kept if (k.key, k.hour_start) == (one.key, one.hour_start)), None)
        if twin is None:
            kept.append(one)
            continue
        same = (str(twin.value), twin.flag, twin.stage) == (str(one.value), one.flag, one.stage)
        if same or twin.stage > one.stage:
            rejected.append((one.line, one.column))
        else:
            rejected.append((twin.line, twin.column))
            kept.remove(twin)
            kept.append(one)
    order = [id(one) for one in readings]
    kept.sort(key=lambda one: order.index(id(one)))
    return [(r.key, r.hour_start, r.value, r.flag, r.stage, r.line) for r in kept]
