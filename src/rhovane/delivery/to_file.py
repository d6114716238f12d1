"""Messages to a file: one CloudEvent a line."""

from __future__ import annotations

import os
from pathlib import Path

from rhovane.delivery.cloudevents import cloudevent_text
from rhovane.delivery.failure import Undelivered
from rhovane.model import Message


def append_line(path: Path, message: Message, source: str) -> None:
    """Append a message and have the disk confirm it.

    A line that an earlier attempt left unfinished is closed first, so that it spoils nothing but itself.

    Raises
    ------
    Undelivered
        The file cannot be written.
    """
    line = (cloudevent_text(message, source) + "\n").encode()
    try:
        with path.open("ab+") as stream:
            if stream.seek(0, os.SEEK_END):
                stream.seek(-1, os.SEEK_END)
                if stream.read(1) != b"\n":
                    line = b"\n" + line
            stream.write(line)
            stream.flush()
            os.fsync(stream.fileno())
    except OSError as error:
        raise Undelivered(f"{path} cannot be written ({error.strerror})") from error
