"""A message, and settings with channels to receivers on this machine."""

from __future__ import annotations

import datetime as dt
import shutil
import tomllib
from collections.abc import Callable
from pathlib import Path

import pytest

from delivery.receivers import CERTIFICATE
from flow.small_network import SETTINGS
from rhovane.model import Message, MessageKind
from rhovane.settings import Settings, settings_from

AT = dt.datetime(2025, 3, 2, 3, 40, tzinfo=dt.UTC)


@pytest.fixture
def message() -> Message:
    return Message(
        MessageKind.DIGEST,
        "night 2025-03-01",
        AT,
        "Two stations: night of 2025-03-01 complete, no new alert",
        "All is quiet.\nDüsternbrook: 12 µg/m³",
        {"night": "2025-03-01", "silent": ["A.NO2: never seen"]},
    )


@pytest.fixture
def with_channels(tmp_path: Path) -> Callable[[str], Settings]:
    """Settings of the small network with further lines, in a folder of its own."""
    shutil.copyfile(CERTIFICATE, tmp_path / "ca.pem")

    def make(lines: str) -> Settings:
        return settings_from(tomllib.loads(SETTINGS + lines), tmp_path / "monitor.toml")

    return make
