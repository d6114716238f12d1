"""Parse a text as a feed file of the small network."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path

import pytest

from ingest.small_network import NETWORK, WRITTEN, read_parquet
from rhovane.ingest import parse_file
from rhovane.model import ParsedFile
from rhovane.settings import SourceSettings

Parse = Callable[[str | bytes, SourceSettings], ParsedFile]


@pytest.fixture
def parse(tmp_path: Path) -> Parse:
    """Parse a text as a feed file named day.csv, written at a known time."""

    def run(content: str | bytes, source: SourceSettings) -> ParsedFile:
        path = tmp_path / "day.csv"
        path.write_bytes(content if isinstance(content, bytes) else content.encode(source.encoding))
        os.utime(path, (WRITTEN, WRITTEN))
        parsed = parse_file(path, source, NETWORK, read_parquet=read_parquet, shown_as="day.csv")
        counted = len(parsed.value) + sum(row.line > 0 for row in parsed.rejected)
        assert parsed.rows_read == counted
        return parsed

    return run
