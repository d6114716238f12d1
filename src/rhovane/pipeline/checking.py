"""The feed outside a night: a dry run that writes nothing, and ingest on demand."""

from __future__ import annotations

import dataclasses
import datetime as dt
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from rhovane.ingest import describe_rejections, list_files
from rhovane.model import FeedError, IngestOutcome
from rhovane.pipeline.context import Night, Trouble
from rhovane.pipeline.ingesting import (
    append,
    parse_feed_file,
    parse_or_note,
    read_feed,
    shown_path,
    source_of,
)
from rhovane.settings import Settings, SourceSettings
from rhovane.store import Store


@dataclass(frozen=True)
class SourceCheck:
    """What reading one source would do."""

    name: str
    files: int
    known_files: int
    rows: int
    good: int
    first: dt.datetime | None
    last: dt.datetime | None
    rejected_by_reason: dict[str, int]
    rejections: tuple[str, ...]
    trouble: str | None = None

    def summary(self) -> str:
        """One line."""
        if self.trouble is not None:
            return self.trouble
        if not self.files:
            return "no files"
        span = f", {self.first:%Y-%m-%d %H:%M} to {self.last:%Y-%m-%d %H:%M} UTC" if self.first else ""
        return (
            f"{self.files} files ({self.known_files} already read), {self.rows} rows, "
            f"{self.good} readings, {sum(self.rejected_by_reason.values())} rejected{span}"
        )

    def as_json(self) -> dict[str, Any]:
        """Plain values for ``--json``."""
        return {
            **dataclasses.asdict(self),
            "first": None if self.first is None else self.first.isoformat(),
            "last": None if self.last is None else self.last.isoformat(),
        }


def dry_run(settings: Settings, store: Store | None) -> list[SourceCheck]:
    """Parse every file of every source and say what is in it; nothing is written."""
    known = set() if store is None else {str(sha) for sha in store.ingests()["sha256"]}
    return [_check_source(source, settings, known, store) for source in settings.source]


def _check_source(
    source: SourceSettings, settings: Settings, known: set[str], store: Store | None
) -> SourceCheck:
    try:
        listed = list_files(source, settings.work_folder)
    except FeedError as error:
        return SourceCheck(source.name, 0, 0, 0, 0, None, None, {}, (), str(error))
    reasons: Counter[str] = Counter()
    lines: list[str] = []
    rows = good = already = 0
    first = last = None
    for file in listed:
        try:
            parsed = parse_feed_file(settings.work_folder / file.place, source, settings, file.place, store)
        except FeedError as error:
            reasons["file cannot be read"] += 1
            lines.append(str(error))
            continue
        already += parsed.sha256 in known
        rows += parsed.rows_read
        good += len(parsed.value)
        reasons.update(r.reason for r in parsed.rejected)
        lines += describe_rejections(parsed)
        if len(parsed.hour_start):
            low, high = int(min(parsed.hour_start)), int(max(parsed.hour_start))
            first = low if first is None else min(first, low)
            last = high if last is None else max(last, high)
    return SourceCheck(
        source.name,
        len(listed),
        already,
        rows,
        good,
        _moment(first),
        _moment(last),
        dict(reasons.most_common()),
        tuple(lines),
    )


def _moment(second: int | None) -> dt.datetime | None:
    return None if second is None else dt.datetime.fromtimestamp(second, dt.UTC)


@dataclass(frozen=True)
class Ingested:
    """What an ingest on demand did."""

    outcomes: tuple[IngestOutcome, ...]
    rejections: tuple[str, ...]
    troubles: tuple[Trouble, ...]

    @property
    def anything_new(self) -> bool:
        """Whether any reading was new or revised."""
        return any((o.new or o.revised) and not o.already_known for o in self.outcomes)

    def lines(self) -> list[str]:
        """For a terminal."""
        out = []
        for o in self.outcomes:
            what = (
                "already read, nothing added"
                if o.already_known
                else f"{o.rows_read} rows: {o.new} new, {o.revised} revised, "
                f"{o.unchanged} unchanged, {o.rejected} rejected"
            )
            out.append(f"{o.path}: {what}")
        out += [f"  rejected {line}" for line in self.rejections]
        out += [f"failed: {t.part}: {t.reason}" for t in self.troubles]
        return out or ["Nothing new in the feed."]

    def as_json(self) -> dict[str, Any]:
        """Plain values for ``--json``."""
        return {
            "files": [
                {
                    **dataclasses.asdict(o),
                    "first": None if o.first is None else o.first.isoformat(),
                    "last": None if o.last is None else o.last.isoformat(),
                }
                for o in self.outcomes
            ],
            "rejected": list(self.rejections),
            "failed": [dataclasses.asdict(t) for t in self.troubles],
        }


def ingest_now(
    settings: Settings, store: Store, files: Sequence[Path], source_name: str | None, *, now: dt.datetime
) -> Ingested:
    """Append the named files, or whatever is new in the feed folders.

    Raises
    ------
    RhovaneError
        A named file belongs to no source (by its pattern), or the named source is not known.
    """
    series = settings.domain_series()
    store.ensure_series(series)
    store.keep_segments(series, now=now)
    night = Night(settings, store, now.date(), now)
    if not files:
        read_feed(night)
    else:
        parsed = []
        for path in files:
            if not path.is_file():
                night.failed(
                    "ingest", str(path), "there is no such file; check the name. The others were read"
                )
                continue
            source = source_of(path.resolve(), settings, source_name)
            one = parse_or_note(night, path.resolve(), source, shown_path(path.resolve(), settings))
            if one is not None:
                parsed.append(one)
        append(night, parsed)
    return Ingested(tuple(night.ingested), tuple(night.rejections), tuple(night.troubles))
