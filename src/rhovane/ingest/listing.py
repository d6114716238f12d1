"""Which files a source has now, with what tells a new or changed one from one already read."""

from __future__ import annotations

import fnmatch
import glob
import os
import re
from collections.abc import Iterator
from pathlib import Path
from typing import NamedTuple

from rhovane.ingest.table_schema import SUFFIX
from rhovane.model import FeedError
from rhovane.settings import SourceSettings


class ListedFile(NamedTuple):
    """A feed file as the file system shows it.

    ``place`` is its path relative to the work folder with forward slashes; ``modified_ns`` its time of
    change in nanoseconds since 1970 UTC, cut to whole microseconds.
    """

    place: str
    size_bytes: int
    modified_ns: int


def list_files(source: SourceSettings, work_folder: Path) -> list[ListedFile]:
    """The files of a source, sorted by place.

    Parameters
    ----------
    source : SourceSettings
        Its ``files`` is a glob pattern relative to ``work_folder``; ``**`` crosses folders.

    Raises
    ------
    FeedError
        The folder does not exist or cannot be listed, or nothing in it matches. It concerns this source
        alone: a caller with several sources notes it and goes on to the next.
    """
    pattern = Path(source.files)
    fixed = Path()
    for part in pattern.parts[:-1]:
        if glob.has_magic(part):
            break
        fixed /= part
    folder = work_folder / fixed
    try:
        if fixed == pattern.parent:
            found = sorted(_in_folder(folder, fixed.as_posix(), pattern.name))
        else:
            with os.scandir(folder):
                pass
            found = sorted(_below(work_folder, source.files))
    except (FileNotFoundError, NotADirectoryError):
        raise FeedError(
            f"Source {source.name}: there is no folder {folder}. Create it, or correct files = {source.files!r} "
            "of this source (relative to work_folder)."
        ) from None
    except OSError as error:
        raise FeedError(
            f"Source {source.name}: the folder {folder} cannot be listed ({error.strerror}). Correct its permissions."
        ) from error
    if not found:
        raise FeedError(
            f"Source {source.name}: no file in {folder} matches files = {source.files!r}. Check whether the source "
            "delivers, or correct the pattern."
        )
    return found


def _in_folder(folder: Path, prefix: str, name_pattern: str) -> Iterator[ListedFile]:
    """Files of one folder; hidden ones only where the pattern asks for them, as with glob."""
    fits = re.compile(fnmatch.translate(name_pattern)).match
    before = "" if prefix == "." else f"{prefix}/"
    hidden_too = name_pattern.startswith(".")
    with os.scandir(folder) as entries:
        for entry in entries:
            name = entry.name
            if (
                fits(name)
                and (hidden_too or name[0] != ".")
                and not name.endswith(SUFFIX)
                and entry.is_file()
            ):
                yield _listed(entry.stat(), before + name)


def _below(work_folder: Path, pattern: str) -> Iterator[ListedFile]:
    for name in glob.iglob(pattern, root_dir=work_folder, recursive=True):
        path = work_folder / name
        if path.is_file() and not name.endswith(SUFFIX):
            yield _listed(path.stat(), Path(name).as_posix())


def _listed(stat: os.stat_result, place: str) -> ListedFile:
    return ListedFile(place, stat.st_size, stat.st_mtime_ns // 1000 * 1000)
