"""The log: one JSON object a line, to standard error or to files that are rotated."""

from __future__ import annotations

import datetime as dt
import json
import logging
import logging.handlers
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

from rhovane.model import RhovaneError
from rhovane.settings import Settings

MB = 1_000_000


class JsonLines(logging.Formatter):
    """A record as one line of JSON: moment (UTC), level, text, and whatever facts it carries."""

    def format(self, record: logging.LogRecord) -> str:
        """The line."""
        facts: dict[str, Any] = getattr(record, "facts", {})
        line = {
            "moment": dt.datetime.fromtimestamp(record.created, dt.UTC).isoformat(timespec="milliseconds"),
            "level": record.levelname.lower(),
            "text": record.getMessage(),
            **facts,
        }
        if record.exc_info and record.exc_info[0] is not None:
            line["error"] = f"{record.exc_info[0].__name__}: {record.exc_info[1]}"
        return json.dumps(line, ensure_ascii=False, default=str)


class Log:
    """Writes lines with facts such as ``night`` and ``step``."""

    def __init__(self, logger: logging.Logger) -> None:
        self._logger = logger

    def info(self, text: str, **facts: Any) -> None:
        """Something went as it should."""
        self._write(logging.INFO, text, facts)

    def warning(self, text: str, **facts: Any) -> None:
        """Something to be looked at."""
        self._write(logging.WARNING, text, facts)

    def error(self, text: str, **facts: Any) -> None:
        """Something failed."""
        self._write(logging.ERROR, text, facts)

    def _write(self, level: int, text: str, facts: dict[str, Any]) -> None:
        self._logger.log(level, "%s", text, extra={"facts": facts})


@contextmanager
def open_log(settings: Settings, *, also: tuple[str, ...] = ()) -> Iterator[Log]:
    """The log that the settings name; ``also`` are loggers of libraries whose warnings belong into it.

    Raises
    ------
    RhovaneError
        The log file cannot be written.
    """
    handler = _handler(settings)
    handler.setFormatter(JsonLines())
    own = logging.Logger("rhovane", logging.INFO)  # not in the process-wide registry
    own.addHandler(handler)
    others = [logging.getLogger(name) for name in also]
    for other in others:
        other.addHandler(handler)
        other.setLevel(logging.WARNING)
    try:
        yield Log(own)
    finally:
        for other in others:
            other.removeHandler(handler)
        handler.close()


def _handler(settings: Settings) -> logging.Handler:
    service = settings.service
    if not service.log_file:
        return logging.StreamHandler(sys.stderr)
    path = settings.work_folder / service.log_file
    try:
        return logging.handlers.RotatingFileHandler(
            path, maxBytes=service.log_mb * MB, backupCount=service.log_files, encoding="utf-8"
        )
    except OSError as error:
        raise RhovaneError(
            f"{path} cannot be written ({error.strerror}); change service.log_file in the settings."
        ) from error
