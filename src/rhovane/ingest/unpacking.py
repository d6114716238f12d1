"""Compressed feed files: gzip and Zstandard, told by their first bytes, unpacked up to a limit and no further."""

from __future__ import annotations

import sys
import zlib
from collections.abc import Callable
from typing import Any

from rhovane.model import FeedError

if sys.version_info >= (3, 14):
    from compression import zstd
else:
    from backports import zstd

MB = 1_000_000  # bytes
GZIP_MARK = b"\x1f\x8b"  # RFC 1952, 2.3.1
ZSTD_MARK = b"\x28\xb5\x2f\xfd"  # RFC 8878, 3.1.1
ZIP_MARK = b"PK\x03\x04"
_GZIP_WINDOW = 31  # zlib's largest window, with a gzip header


class TooLarge(FeedError):
    """A file is larger than its source allows; it is not read and not remembered."""


def too_large(what: str, limit_mb: int) -> TooLarge:
    """The refusal of a file beyond its limit."""
    return TooLarge(
        f"The file {what} more than {limit_mb} MB. Nothing of it was read. If it is meant, raise size_limit_mb of "
        "this source; otherwise remove the file."
    )


def unpacked(data: bytes, limit_mb: int) -> bytes:
    """The content of a file: unpacked if it is compressed, as it is otherwise.

    Parameters
    ----------
    data : bytes
        The whole file. Members of a compressed file that follow each other are joined.
    limit_mb : int
        Most MB unpacked.

    Raises
    ------
    TooLarge
        The content is larger; no more than the limit was unpacked.
    FeedError
        The compressed file is cut or damaged, is compressed twice, or is a zip archive.
    """
    if data.startswith(GZIP_MARK):
        content = _unpack(data, limit_mb, "gzip", lambda: zlib.decompressobj(_GZIP_WINDOW), zlib.error)
    elif data.startswith(ZSTD_MARK):
        content = _unpack(data, limit_mb, "Zstandard", zstd.ZstdDecompressor, zstd.ZstdError)
    elif data.startswith(ZIP_MARK):
        raise FeedError("The file is a zip archive. Unpack it, or have it delivered as gzip or Zstandard.")
    else:
        return data
    if content.startswith((GZIP_MARK, ZSTD_MARK, ZIP_MARK)):
        raise FeedError("The file is compressed twice. Unpack it once and deliver it again.")
    return content


def _unpack(
    data: bytes, limit_mb: int, kind: str, begin: Callable[[], Any], broken: type[Exception]
) -> bytes:
    parts: list[bytes] = []
    room = limit_mb * MB
    rest = data
    while rest:
        member = begin()
        try:
            # One byte more than allowed tells a file that fits from one that does not.
            part = member.decompress(rest, room + 1)
        except (broken, EOFError) as error:
            raise FeedError(
                f"The {kind} file is damaged ({error}). Nothing of it was read. Deliver the whole file again."
            ) from None
        if len(part) > room:
            raise too_large("unpacks to", limit_mb)
        if not member.eof:
            raise FeedError(
                f"The {kind} file seems cut: its end is missing. Nothing of it was read. Deliver the whole file again."
            )
        parts.append(part)
        room -= len(part)
        rest = member.unused_data
        if kind == "gzip" and not rest.strip(b"\0"):
            break  # zeros after the last member are padding (RFC 1952 readers ignore them)
    return b"".join(parts)
