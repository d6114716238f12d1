"""Feed files → readings with their status, in UTC and in the units of their series; bad rows → quarantine."""

from rhovane.ingest.drafting import draft_settings
from rhovane.ingest.feed import ReadParquet, StillWritten, describe_rejections, parse_file
from rhovane.ingest.listing import ListedFile, list_files

__all__ = [
    "ListedFile",
    "ReadParquet",
    "StillWritten",
    "describe_rejections",
    "draft_settings",
    "list_files",
    "parse_file",
]
