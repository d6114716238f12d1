"""Sample files → a draft of the settings, with the questions that only the analyst can answer left open.

The draft does not load until every line with "?" is answered: clock and label of each source, and whatever else
the files do not say. What was seen stands beside it as comments.
"""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Iterable
from datetime import datetime, timedelta
from itertools import combinations
from pathlib import Path

from rhovane.ingest.clock import EPOCH, Moment, text_reader
from rhovane.ingest.sampling import (
    MISSING_WORDS,
    MOST_CODES,
    Column,
    Sample,
    clock_evidence,
    read_sample,
    step_of,
)
from rhovane.model import FeedError
from rhovane.settings.source_schema import STEP

OPEN = "?"
MOST_FILES = 30  # files of a folder that are looked at, evenly spread
MOST_PAIRS = 40  # candidate pairs that are drafted
STATION = re.compile(r"station|site|loc|sensor|place|stelle|ort", re.IGNORECASE)
QUANTITY = re.compile(r"component|quantity|pollutant|parameter|species|code|variable|measure", re.IGNORECASE)
VALUE = re.compile(r"value|reading|mean|result|conc|val\b|wert", re.IGNORECASE)
UNIT = re.compile(r"unit", re.IGNORECASE)
PLAIN_UNITS = {"µg/m³": "ug/m3", "µg/m3": "ug/m3", "ug/m^3": "ug/m3", "°C": "degC"}


class _Draft:
    """Lines of the draft, and what is needed across sources."""

    def __init__(self) -> None:
        self.lines: list[str] = []
        self.series: dict[str, str] = {}
        self.circular: set[str] = set()

    def add(self, *lines: str) -> None:
        self.lines += lines


def draft_settings(folder: Path, work_folder: str) -> str:
    """A draft of a settings file for the delimited text files below a folder; a folder of files is a feed.

    Parameters
    ----------
    folder : Path
        Holds sample files, or folders of them.
    work_folder : str
        How the settings file reaches the folder: becomes ``network.work_folder``.

    Raises
    ------
    FeedError
        There is no folder, or nothing in it can be read as a feed; says what each file lacks.
    """
    if not folder.is_dir():
        raise FeedError(f"{folder}: there is no such folder. Name one that holds sample files of the feed.")
    groups: dict[tuple[Path, str], list[Path]] = {}
    for path in sorted(p for p in folder.rglob("*") if p.is_file() and not p.name.startswith(".")):
        if not path.name.endswith(".schema.json"):
            groups.setdefault((path.parent, "".join(path.suffixes[-2:])), []).append(path)
    draft = _Draft()
    draft.add(
        '# Draft, made from sample files. Lines with "?" are questions that the files cannot answer for sure: answer',
        "# them all, check the rest, then run `rhovane check` with this file. Nothing loads before.",
        "",
        "[network]",
        f"name = {_text(folder.resolve().name or 'network')}",
        f"work_folder = {_text(work_folder)}",
        'standard_time = "?"  # fixed offset of the network\'s standard time, such as "+01:00"',
        'civil_zone = "?"     # IANA zone that people live by, such as "Europe/Berlin", or "UTC"',
    )
    refused = []
    names: set[str] = set()
    for (place, ending), paths in groups.items():
        samples = []
        for path in paths[:: -(-len(paths) // MOST_FILES)]:
            try:
                samples.append(read_sample(path))
            except FeedError as error:
                refused.append(str(error))
        if samples:
            pattern = (place.relative_to(folder) / f"*{ending}").as_posix()
            name = _free_name(place.name if place != folder else "feed", names)
            try:
                _add_source(draft, name, pattern, samples, len(paths))
            except FeedError as error:
                refused.append(str(error))
    if not draft.series:
        told = "\n".join(f"  {line}" for line in refused) or "  it holds no files"
        raise FeedError(f"{folder}: nothing in it can be drafted as a feed:\n{told}\nNothing was written.")
    draft.add(*(f"# Not understood: {line}" for line in refused))
    _add_series(draft)
    _add_pairs(draft)
    return "\n".join(draft.lines) + "\n"


def _free_name(wanted: str, taken: set[str]) -> str:
    name, n = wanted, 2
    while name in taken:
        name, n = f"{wanted} {n}", n + 1
    taken.add(name)
    return name


def _add_source(draft: _Draft, name: str, pattern: str, samples: list[Sample], n_files: int) -> None:
    sample = max(samples, key=lambda one: len(one.columns[0].cells))
    alike = [s for s in samples if [c.name for c in s.columns] == [c.name for c in sample.columns]]
    time = _time_column(sample)
    formats = [
        f
        for f in time.time_formats
        if all(f in c.time_formats for s in alike for c in s.columns if c.name == time.name)
    ]
    formats = formats or time.time_formats
    texts = [c for c in sample.columns if c.share_numbers < 0.5 and c is not time and not c.time_formats]
    codes = [c for c in texts if len(set(c.cells)) <= MOST_CODES]
    values = [c for c in sample.columns if c.share_numbers >= 0.5 and c is not time and not c.time_formats]
    quantity = _named(codes, QUANTITY) if len(values) <= 1 or _named(values, VALUE) else None
    value = (_named(values, VALUE) or (values[0] if len(values) == 1 else None)) if quantity else None
    long = quantity is not None and value is not None
    draft.add(
        "",
        "[[source]]",
        f"name = {_text(name)}",
        f'form = "{"long" if long else "wide"} csv"',
        f"files = {_text(pattern)}",
        f"# {len(samples)} of {n_files} files were looked at, with {sum(len(s.columns[0].cells) for s in samples)} rows.",
    )
    draft.add(
        *_time_lines(
            alike, time, formats, _named(codes, STATION) if long else None, quantity if long else None
        )
    )
    draft.add(
        f"delimiter = {_text(sample.delimiter)}",
        f'decimal = "{sample.decimal}"',
        f'encoding = "{sample.encoding}"',
    )
    if sample.preamble_lines:
        draft.add(f"preamble_lines = {sample.preamble_lines}  # lines above the header")
    if sample.comment:
        draft.add(f"comment = {_text(sample.comment)}")
    measured = [value] if long and value else values
    draft.add(*_missing_lines(alike, [c.name for c in measured]))
    if long and quantity and value:
        _add_long(draft, alike, time, quantity, value, codes)
    else:
        _add_wide(draft, name, sample, time, measured, texts)


def _time_column(sample: Sample) -> Column:
    if not sample.times:
        raise FeedError(f"{sample.path}: no column holds times in a known pattern; write its source by hand.")
    return sample.times[0]


def _named(columns: Iterable[Column], pattern: re.Pattern[str]) -> Column | None:
    return next((column for column in columns if pattern.search(column.name)), None)


def _time_lines(
    alike: list[Sample],
    time: Column,
    formats: list[str],
    station: Column | None,
    quantity: Column | None,
) -> list[str]:
    lines = []
    if len(formats) > 1:
        lines.append(
            f'time_format = "?"  # the labels fit {" and ".join(map(_text, formats))}, such as {_text(time.cells[0])}: which?'
        )
    else:
        lines.append(f"time_format = {_text(formats[0])}  # such as {_text(time.cells[0])}")
    read = text_reader(formats[0])
    evidence: list[str] = []
    steps = []
    for one in alike:
        labels = _labels_of_one_series(one, time, read, station, quantity)
        step = step_of(labels)
        if step is not None:
            steps.append(step)
            evidence += [text for text in clock_evidence(labels, step) if text not in evidence]
    known = {timedelta(minutes=minutes): word for word, minutes in STEP.items()}
    step = max(set(steps), key=steps.count) if steps else None
    word = known.get(step) if step is not None else None
    said = f"labels are {step} apart" if step is not None else "one label a file"
    lines.append(f'step = "{word or OPEN}"  # {said}; known: {", ".join(STEP)}')
    if "%z" in formats[0] or formats[0].endswith("Z"):
        evidence.append("labels say their offset from UTC or end in Z")
    lines += [f"# Seen: {text}." for text in evidence]
    lines.append(
        'clock = "?"  # the clock of the labels: "UTC", a fixed offset such as "+01:00", or "civil Europe/Berlin"'
    )
    lines.append('label = "?"  # which end of its interval a label names: "start" or "end"')
    return lines


def _labels_of_one_series(
    sample: Sample,
    time: Column,
    read: Callable[[str], Moment | None],
    station: Column | None,
    quantity: Column | None,
) -> list[datetime]:
    by_name = {column.name: column for column in sample.columns}
    cells = by_name[time.name].cells
    keys = [by_name[c.name].cells for c in (station, quantity) if c is not None]
    rows = list(zip(*keys, strict=True)) if keys else [()] * len(cells)
    labels = []
    for cell, key in zip(cells, rows, strict=True):
        moment = read(cell) if key == rows[0] else None
        if moment is not None:
            labels.append(EPOCH + timedelta(seconds=moment[0]))
    return labels


def _missing_lines(samples: list[Sample], names: list[str]) -> list[str]:
    found: dict[str, int] = {}
    for sample in samples:
        for column in sample.columns:
            if column.name in names:
                for text, count in column.others.items():
                    found[text] = found.get(text, 0) + count
    words = [
        text
        for text in found
        if text in MISSING_WORDS or (re.fullmatch(r"-?9{2,}(\.\d+)?", text) and found[text] > 1)
    ]
    lines = [f"missing = [{', '.join(map(_text, sorted(words)))}]"]
    if words:
        lines[0] += "  # " + ", ".join(f"{_text(text)} stands {found[text]} times" for text in sorted(words))
    bounds = sorted(text for text in found if text.strip("<") != text)
    if bounds:
        lines.append(
            f'below_limit = "?"  # such as {_text(bounds[0])}: "half", "limit", "zero", "missing" or "reject"'
        )
    rest = sorted(text for text in found if text not in words and text not in bounds)
    if rest:
        lines.append(
            f"# Neither number nor missing, and rejected as it stands: {', '.join(map(_text, rest[:10]))}"
        )
    return lines


def _add_long(
    draft: _Draft, samples: list[Sample], time: Column, quantity: Column, value: Column, codes: list[Column]
) -> None:
    station = _named((c for c in codes if c is not quantity), STATION)
    unit = _named((c for c in codes if c not in (quantity, station)), UNIT)
    rest = [c for c in codes if c not in (quantity, station, unit)]
    draft.add("[source.columns]", f"time = {_text(time.name)}")
    if station:
        draft.add(f"station = {_text(station.name)}")
    draft.add(f"quantity = {_text(quantity.name)}", f"value = {_text(value.name)}")
    if unit:
        draft.add(f"unit = {_text(unit.name)}")
    for column in rest:
        held = {cell for one in samples for c in one.columns if c.name == column.name for cell in c.cells}
        some = ", ".join(map(_text, sorted(held)[:8]))
        draft.add(
            f"# Column {_text(column.name)} holds {some}: quality codes (flag = {_text(column.name)}, meanings under",
            "# [source.flags]) or verification stages (stage, [source.stages])? Left out, it is not read.",
        )
    units: dict[str, str] = {}
    found: dict[str, str] = {}
    for sample in samples:
        by_name = {column.name: column.cells for column in sample.columns}
        stations = by_name[station.name] if station else [""] * len(by_name[quantity.name])
        written = by_name[unit.name] if unit else [""] * len(stations)
        for place, what, how in zip(stations, by_name[quantity.name], written, strict=True):
            code = f"{place} {what}" if station else what
            found.setdefault(code, f"{_key(place or 'STATION')}.{_key(what)}")
            units.setdefault(found[code], how)
    draft.add("[source.series]", *(f"{_text(code)} = {_text(key)}" for code, key in sorted(found.items())))
    spellings = {how: PLAIN_UNITS[how] for how in units.values() if how in PLAIN_UNITS}
    if spellings:
        draft.add("[source.unit_names]", *(f"{_text(a)} = {_text(b)}" for a, b in spellings.items()))
    for key, how in units.items():
        draft.series.setdefault(key, PLAIN_UNITS.get(how, how) or OPEN)


def _add_wide(
    draft: _Draft, name: str, sample: Sample, time: Column, values: list[Column], texts: list[Column]
) -> None:
    if not values:
        raise FeedError(f"{sample.path}: no column holds numbers; write its source by hand.")
    draft.add("[source.columns]", f"time = {_text(time.name)}")
    for column in texts:
        some = ", ".join(map(_text, sorted(set(column.cells))[:6]))
        draft.add(
            f"# Column {_text(column.name)} holds {some}: if quality codes of the whole row, name it: flag."
        )
    draft.add("[source.series]")
    for column in values:
        key = f"{_key(name)}.{_key(column.name)}"
        draft.add(f"{_text(column.name)} = {_text(key)}")
        draft.series.setdefault(key, OPEN)


def _add_series(draft: _Draft) -> None:
    for key, unit in sorted(draft.series.items()):
        draft.add("", "[[series]]", f"key = {_text(key)}")
        draft.add(f"unit = {_text(unit)}" + ("  # the files do not say" if unit == OPEN else ""))
        name = key.partition(".")[2].lower()
        if "dir" in name or unit in ("deg", "°"):
            draft.circular.add(key)
            draft.add('kind = "circular"    # by its name a direction: never ranked')
        elif "rain" in name or "precip" in name:
            draft.add('kind = "accumulated"  # by its name a sum over the step')


def _add_pairs(draft: _Draft) -> None:
    """Candidates: the same quantity at two stations first, then two quantities of one station."""
    keys = [key for key in sorted(draft.series) if key not in draft.circular]
    split = {key: key.partition(".")[::2] for key in keys}
    same = [(a, b) for a, b in combinations(keys, 2) if split[a][1].lower() == split[b][1].lower()]
    beside = [(a, b) for a, b in combinations(keys, 2) if split[a][0] == split[b][0]]
    pairs = [*same, *beside][:MOST_PAIRS] or list(combinations(keys, 2))[:MOST_PAIRS]
    draft.add(
        "",
        "# Candidate pairs: keep those that have a reason to hang together; each shares the budget of false alarms.",
    )
    for first, second in pairs:
        draft.add("", "[[pair]]", f"first = {_text(first)}", f"second = {_text(second)}")


def _key(text: str) -> str:
    """A code as part of a series key."""
    return re.sub(r"[^A-Za-z0-9_-]+", "_", text.strip()).strip("_") or "x"


def _text(text: str) -> str:
    """A TOML string: JSON's escapes are TOML's."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")
