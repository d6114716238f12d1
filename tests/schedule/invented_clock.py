"""A clock that tests move, suspend and set; a log that they read."""

from __future__ import annotations

import datetime as dt
import logging
from dataclasses import dataclass
from typing import Any

from rhovane.schedule.logs import Log


@dataclass
class InventedClock:
    """``wall`` is what the clock on the wall shows."""

    wall: dt.datetime
    seconds_awake: float = 1000.0
    seconds_elapsed: float = 5000.0

    def now(self) -> dt.datetime:
        return self.wall

    def awake(self) -> float:
        return self.seconds_awake

    def elapsed(self) -> float:
        return self.seconds_elapsed

    def pass_time(self, span: dt.timedelta, *, asleep: bool = False) -> None:
        self.wall += span
        self.seconds_elapsed += span.total_seconds()
        self.seconds_awake += 0 if asleep else span.total_seconds()

    def set_to(self, moment: dt.datetime) -> None:
        self.wall = moment


class LogReader(logging.Handler):
    """Keeps every record with its facts."""

    def __init__(self) -> None:
        super().__init__()
        self.lines: list[dict[str, Any]] = []

    def emit(self, record: logging.LogRecord) -> None:
        self.lines.append({"text": record.getMessage(), "level": record.levelname, **record.facts})

    def log(self) -> Log:
        logger = logging.Logger("test", logging.INFO)
        logger.addHandler(self)
        return Log(logger)
