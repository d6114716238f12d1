"""Who holds the store's file: process number, command and since when it runs, as far as the system tells."""

from __future__ import annotations

import datetime as dt
import os
import re
from pathlib import Path

_NAMED = re.compile(r"held in (?P<program>.*?) \(PID (?P<pid>\d+)\)")
_LONGEST_COMMAND = 120  # characters
_START_FIELD = (
    19  # of /proc/PID/stat behind the name: start in clock ticks since boot; proc_pid_stat(5), field 22
)


def holder_of(message: str) -> str | None:
    """Who holds the file, from DuckDB's message; None when the message is about something else."""
    found = _NAMED.search(message)
    if found:
        return describe(int(found["pid"]), found["program"])
    if "Could not set lock" in message:
        return "another process"
    if "different configuration" in message:
        return f"this process ({os.getpid()}), which has opened it in another way"
    return None


def describe(pid: int, program: str, *, processes: Path = Path("/proc")) -> str:
    """A process in words; its command and start where the system shows them."""
    words = f"process {pid} ({_command(processes / str(pid)) or program}"
    start = _started(processes, pid)
    return f"{words}, running since {start:%Y-%m-%d %H:%M:%S} UTC)" if start else f"{words})"


def _command(process: Path) -> str:
    try:
        parts = (process / "cmdline").read_bytes().split(b"\0")
    except OSError:
        return ""
    text = " ".join(part.decode(errors="replace") for part in parts if part)
    return text if len(text) <= _LONGEST_COMMAND else text[: _LONGEST_COMMAND - 1] + "…"


def _started(processes: Path, pid: int) -> dt.datetime | None:
    try:
        fields = (processes / str(pid) / "stat").read_text(encoding="utf-8").rpartition(")")[2].split()
        boot = re.search(r"^btime (\d+)$", (processes / "stat").read_text(encoding="utf-8"), re.MULTILINE)
        ticks = int(fields[_START_FIELD])
    except (OSError, IndexError, ValueError):
        return None
    if boot is None:
        return None
    return dt.datetime.fromtimestamp(int(boot[1]) + ticks // os.sysconf("SC_CLK_TCK"), dt.UTC)
