"""Commands for a watch that nobody watches: nights with delivery, catch-up, the outbox."""

from __future__ import annotations

import datetime as dt
import json
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from delivery.receivers import HttpReceiver
from flow.small_network import HEADER, SETTINGS, related_series, row
from rhovane.cli import main
from rhovane.model import ExitCode

N_DAYS = 12
LAST = "2025-01-12"


def run(*args: str) -> Result:
    return CliRunner().invoke(main, list(args), catch_exceptions=False)


def network_in(folder: Path, lines: str) -> str:
    (folder / "feed").mkdir()
    (folder / "monitor.toml").write_text(SETTINGS + lines, encoding="utf-8")
    x, y = related_series(24 * N_DAYS, 0.9, seed=3)
    text = "".join(row(h, "A", x[h]) + row(h, "B", y[h]) for h in range(24 * N_DAYS))
    (folder / "feed" / "all.csv").write_text(HEADER + text, encoding="utf-8")
    return str(folder / "monitor.toml")


def test_a_night_sends_its_digest_unless_told_not_to(tmp_path):
    config = network_in(tmp_path, '[delivery.file]\npath = "out.jsonl"\n')
    held = run("nightly", "--as-of", LAST, "--no-send", "--config", config)
    assert held.exit_code == ExitCode.WELL
    assert not (tmp_path / "out.jsonl").exists()
    (waiting,) = json.loads(run("deliver", "--list", "--json", "--config", config).output)
    assert (waiting["subject"], waiting["attempts"]) == (f"night {LAST}", 0)
    assert f"file  night {LAST}, 0 attempts" in run("deliver", "--list", "--config", config).output
    sent = run("deliver", "--config", config)
    assert (sent.exit_code, sent.output) == (ExitCode.WELL, "Messages: 1 delivered, 0 waiting\n")
    assert json.loads((tmp_path / "out.jsonl").read_text("utf-8"))["id"] == waiting["id"]
    assert run("deliver", "--list", "--config", config).output == "Nothing waits.\n"


def test_what_cannot_be_delivered_is_told_with_its_code_and_goes_later(tmp_path):
    receiver = HttpReceiver(answers=[503, 503, 204])
    with receiver.listen() as port:
        config = network_in(tmp_path, f'[delivery.http]\nurl = "http://localhost:{port}/"\n')
        night = run("nightly", "--as-of", LAST, "--config", config)
        assert night.exit_code == ExitCode.WELL, "the night itself is well"
        assert f"http failed: http://localhost:{port} answered 503" in night.output
        failed = run("deliver", "--json", "--config", config)
        assert failed.exit_code == ExitCode.NEEDS_ATTENTION
        assert json.loads(failed.output)["waiting"] == 1
        assert run("deliver", "--config", config).exit_code == ExitCode.WELL
    assert len({json.loads(body)["id"] for _, _, body in receiver.requests}) == 1


def test_catching_up_runs_what_is_due_and_then_says_that_nothing_is(tmp_path):
    config = network_in(tmp_path, "[service]\ncatch_up_nights = 2\n")
    today = dt.datetime.now(dt.UTC).date()
    first = run("nightly", "--as-of", str(today - dt.timedelta(days=5)), "--config", config)
    assert first.exit_code == ExitCode.WELL
    caught = run("nightly", "--catch-up", "--config", config)
    assert caught.exit_code == ExitCode.NOTHING_NEW, caught.output
    assert caught.output.count("Night of ") == 2
    assert list((tmp_path / "backup").glob("*.duckdb"))
    again = run("nightly", "--catch-up", "--config", config)
    assert (again.exit_code, "No night is due." in again.output) == (ExitCode.NOTHING_NEW, True)


@pytest.mark.parametrize("more", [["--as-of", LAST], ["--no-send"]])
def test_catching_up_goes_by_the_ledger_alone(tmp_path, more):
    config = network_in(tmp_path, "")
    refused = run("nightly", "--catch-up", *more, "--config", config)
    assert refused.exit_code == ExitCode.SETTINGS_MISTAKE
    assert "the ledger says what is due" in refused.output
