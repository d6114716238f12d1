"""The log: one JSON object a line, with moment, level and facts; files are rotated."""

from __future__ import annotations

import datetime as dt
import json
import tomllib
import warnings
from pathlib import Path

import pytest

from flow.small_network import SETTINGS
from rhovane.model import RhovaneError
from rhovane.schedule import open_log
from rhovane.settings import settings_from


def network(folder: Path, lines: str):
    return settings_from(tomllib.loads(SETTINGS + lines), folder / "monitor.toml")


def test_each_line_is_json_with_the_moment_in_utc(tmp_path, capsys):
    with open_log(network(tmp_path, "")) as log:
        log.info('said "so"\nin two lines', night="2025-03-01", step="windows")
        log.warning("look", channel="mail")
    lines = [json.loads(line) for line in capsys.readouterr().err.splitlines()]
    assert [line["level"] for line in lines] == ["info", "warning"]
    assert lines[0]["text"] == 'said "so"\nin two lines'
    assert (lines[0]["night"], lines[0]["step"]) == ("2025-03-01", "windows")
    moment = dt.datetime.fromisoformat(lines[0]["moment"])
    assert moment.utcoffset() == dt.timedelta(0)
    assert abs(dt.datetime.now(dt.UTC) - moment) < dt.timedelta(minutes=5)


def test_log_files_are_rotated_and_the_oldest_removed(tmp_path):
    settings = network(tmp_path, '[service]\nlog_file = "watch.log"\nlog_mb = 1\nlog_files = 2\n')
    with open_log(settings) as log:
        for _ in range(35):
            log.info("x" * 100_000)
    assert sorted(p.name for p in tmp_path.iterdir()) == ["watch.log", "watch.log.1", "watch.log.2"]
    assert all(p.stat().st_size <= 1_000_000 for p in tmp_path.iterdir())


def test_a_log_file_that_cannot_be_written_is_told_with_its_setting(tmp_path):
    settings = network(tmp_path, '[service]\nlog_file = "none/watch.log"\n')
    with (
        pytest.raises(RhovaneError, match=r"watch\.log cannot be written.*service\.log_file"),
        open_log(settings),
    ):
        warnings.warn("not reached", stacklevel=1)
