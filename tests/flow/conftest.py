"""A small network of two stations, and helpers to run its nights."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from flow.small_network import SETTINGS
from rhovane.settings import Settings, load_settings


@pytest.fixture
def network(tmp_path: Path) -> Settings:
    """Settings of the small network in a folder of its own, with an empty feed folder."""
    (tmp_path / "feed").mkdir()
    (tmp_path / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    return load_settings(tmp_path / "monitor.toml")


@pytest.fixture
def deliver(network: Settings) -> Callable[[str, str], Path]:
    """Write a feed file whole."""

    def write(name: str, text: str) -> Path:
        path = network.work_folder / "feed" / name
        path.write_text(text, encoding="utf-8")
        return path

    return write
