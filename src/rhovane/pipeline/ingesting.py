"""Step "ingest": new and changed feed files into the store, file by file, with what was wrong in them."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from pathlib import Path

from rhovane.ingest import describe_rejections, list_files, parse_file
from rhovane.model import FeedError, IngestOutcome, ParsedFile, RhovaneError, StoreDamaged
from rhovane.pipeline.context import OUT_OF_TIME, PART_ERRORS, Night, reason_of
from rhovane.settings import Settings, SourceSettings
from rhovane.store import Store, read_parquet

STEP = "ingest"


def read_feed(night: Night) -> str:
    """Read what arrived since the last look and append it to the store."""
    parsed: list[ParsedFile] = []
    known = night.store.known_files()
    for source, place in _new_files(night, known):
        if not night.may_go_on():
            night.failed(STEP, "the rest of the feed", OUT_OF_TIME)
            break
        one = parse_or_note(night, night.settings.work_folder / place, source, place)
        if one is not None:
            parsed.append(one)
    append(night, parsed)
    new, revised, rejected = (night.counts[k] for k in ("readings new", "readings revised", "rows rejected"))
    return f"{len(parsed)} files: {new} readings new, {revised} revised, {rejected} rows rejected"


def _new_files(night: Night, known: dict[str, tuple[int, int]]) -> Iterator[tuple[SourceSettings, str]]:
    """Source and place of every file that arrived or changed since it was read last."""
    if night.arrived is not None:
        for path in night.arrived:
            yield source_of(path, night.settings), shown_path(path, night.settings)
        return
    for source in night.settings.source:
        try:
            listed = list_files(source, night.settings.work_folder)
        except (FeedError, OSError) as error:
            night.failed(STEP, f"source {source.name}", str(error))
            continue
        for file in listed:
            if known.get(file.place) != (file.size_bytes, file.modified_ns):
                yield source, file.place


def source_of(path: Path, settings: Settings, source_name: str | None = None) -> SourceSettings:
    """The source a file belongs to: the named one, or the one whose pattern it matches.

    Raises
    ------
    RhovaneError
        There is no such source, or the file matches the pattern of none.
    """
    names = [s.name for s in settings.source]
    if source_name is not None:
        for source in settings.source:
            if source.name == source_name:
                return source
        raise RhovaneError(f"source {source_name!r} is not in the settings; known: {', '.join(names)}")
    shown = Path(shown_path(path, settings))
    for source in settings.source:
        if shown.match(source.files):
            return source
    raise RhovaneError(
        f"{path}: matches the files of no source; name one with --source ({', '.join(names)}). Nothing was read."
    )


def parse_or_note(night: Night, path: Path, source: SourceSettings, shown: str) -> ParsedFile | None:
    """One feed file as readings and rejected rows; None, with the reason noted, when it cannot be opened."""
    try:
        one = parse_feed_file(path, source, night.settings, shown, night.store)
    except FeedError as error:
        night.failed(STEP, shown, str(error))
        return None
    except PART_ERRORS as error:
        night.failed(STEP, shown, reason_of(error))
        return None
    if not one.sha256:  # not even its bytes could be read: it is tried again, not remembered
        night.failed(STEP, shown, " ".join(r.reason for r in one.rejected))
        return None
    return one


def append(night: Night, parsed: Iterable[ParsedFile]) -> None:
    """Append parsed files and add what they did to the night's counts."""
    files = list(parsed)
    night.ingested = _append_or_note(night, files) if files else []
    fresh = [o for o in night.ingested if not o.already_known]
    night.counts.update(
        {
            "files": len(fresh),
            "readings new": sum(o.new for o in fresh),
            "readings revised": sum(o.revised for o in fresh),
            "rows rejected": sum(o.rejected for o in fresh),
        }
    )
    night.rejections = [line for file in files if file.rejected for line in describe_rejections(file)]


def _append_or_note(night: Night, files: list[ParsedFile]) -> list[IngestOutcome]:
    """Append all files at once; if one of them is refused, one by one, so that the others go in."""
    try:
        return night.store.append_files(files, now=night.now, checkpoint=night.checkpoint_ingest)
    except StoreDamaged:
        raise
    except RhovaneError as error:
        if len(files) == 1:
            night.failed(STEP, files[0].path, str(error))
            return []
        return [outcome for file in files for outcome in _append_or_note(night, [file])]


def parse_feed_file(
    path: Path, source: SourceSettings, settings: Settings, shown: str, store: Store | None
) -> ParsedFile:
    """One feed file as readings and rejected rows, known to the ledger by the place ``shown``."""
    reader = read_parquet if store is None else store.read_parquet
    return parse_file(path, source, settings.series_by_key(), read_parquet=reader, shown_as=shown)


def shown_path(path: Path, settings: Settings) -> str:
    """A feed file's place as the ledger and people see it: relative to the work folder where it is inside."""
    folder = settings.work_folder
    return path.relative_to(folder).as_posix() if path.is_relative_to(folder) else str(path)
