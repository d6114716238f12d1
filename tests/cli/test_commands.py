"""The commands as a person or a script runs them: what they print, what they write, how they end."""

from __future__ import annotations

import json
import re
import subprocess
import sys
from pathlib import Path

import duckdb
import pandas as pd
import pytest
from click.testing import CliRunner, Result

from flow.small_network import HEADER, SETTINGS, related_series, row
from rhovane.cli import main
from rhovane.model import ExitCode

N_DAYS = 170
CHANGE_DAY = 140
LAST = "2025-06-19"  # day 169 after 2025-01-01


def run(*args: str) -> Result:
    return CliRunner().invoke(main, list(args), catch_exceptions=False)


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A network whose one relation breaks on day 140, with its night run."""
    place = tmp_path_factory.mktemp("network")
    (place / "feed").mkdir()
    (place / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    x, y = related_series(24 * N_DAYS, 0.9, seed=3)
    y[24 * CHANGE_DAY :] = related_series(24 * N_DAYS, 0.0, seed=4)[1][24 * CHANGE_DAY :]
    text = HEADER + "".join(row(h, "A", x[h]) + row(h, "B", y[h]) for h in range(24 * N_DAYS))
    (place / "feed" / "all.csv").write_text(text + row(0, "A", "?"), encoding="utf-8")
    return place


@pytest.fixture(scope="module")
def config(folder: Path) -> str:
    path = str(folder / "monitor.toml")
    result = run("nightly", "--as-of", LAST, "--config", path)
    assert result.exit_code == ExitCode.WELL, result.output
    return path


def test_check_says_what_would_happen_and_writes_nothing(tmp_path: Path):
    (tmp_path / "feed").mkdir()
    (tmp_path / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    (tmp_path / "feed" / "a.csv").write_text(HEADER + row(0, "A", 1.5) + row(1, "A", "?"), encoding="utf-8")
    before = sorted(tmp_path.rglob("*"))
    result = run("check", "--config", str(tmp_path / "monitor.toml"))
    assert result.exit_code == ExitCode.WELL
    assert "air: 1 files (0 already read), 2 rows, 1 readings, 1 rejected" in result.output
    assert "feed/a.csv:3, column value" in result.output
    assert sorted(tmp_path.rglob("*")) == before


def test_check_of_a_feed_already_read_says_so(config: str):
    result = run("check", "--config", config, "--json")
    (source,) = json.loads(result.output)
    assert source["known_files"] == source["files"] == 1
    assert sum(source["rejected_by_reason"].values()) == 1


def test_a_second_night_ends_with_nothing_new(config: str):
    result = run("nightly", "--as-of", LAST, "--config", config)
    assert result.exit_code == ExitCode.NOTHING_NEW


def test_alerts_are_listed_for_people_and_for_machines(config: str):
    text = run("alerts", "--config", config)
    assert text.exit_code == ExitCode.WELL
    assert "A.NO2~B.NO2" in text.output
    assert max(len(line) for line in text.output.splitlines()) <= 80
    (alert,) = json.loads(run("alerts", "--config", config, "--json").output)
    assert alert["pair_key"] == "A.NO2~B.NO2"
    assert alert["direction"] == "weaker"
    assert alert["before"]["statistic"] > 0.7
    assert alert["events"][0]["kind"] == "raised"


def test_data_notes_are_listed_for_people_and_for_machines_and_under_the_alerts(tmp_path: Path):
    (tmp_path / "feed").mkdir()
    (tmp_path / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    x, y = related_series(24 * 40, 0.9, seed=3)
    text = HEADER + "".join(
        row(h, "A", x[h]) + (row(h, "B", y[h]) if h < 24 * 30 else "") for h in range(24 * 40)
    )
    (tmp_path / "feed" / "a.csv").write_text(text, encoding="utf-8")
    path = str(tmp_path / "monitor.toml")
    assert run("nightly", "--as-of", "2025-02-09", "--config", path).exit_code == ExitCode.WELL
    listed = run("notes", "--config", path)
    assert listed.exit_code == ExitCode.WELL
    assert "2025-01-31 00:00  B.NO2: gap: no observation [lasts]" in listed.output
    assert max(len(line) for line in listed.output.splitlines()) <= 80
    notes = json.loads(run("notes", "--json", "--config", path).output)
    assert {(n["subject"], n["kind"], n["end"]) for n in notes} == {
        ("B.NO2", "gap", None),
        ("B.NO2", "low coverage", None),
        ("A.NO2~B.NO2", "not computable", None),
    }
    assert "B.NO2: gap: no observation" in run("alerts", "--config", path).output
    status = run("status", "--as-of", "2025-02-09", "--config", path).output
    assert "Series without data (no data is not no change): 1 of 2" in status
    assert "Data notes that last: 3" in status


def test_one_alert_shows_what_it_rests_on_and_the_cautions(config: str):
    output = run("alert", "1", "--config", config).output
    for words in (
        "before",
        "after",
        "change",
        "evidence",
        "threshold",
        "Rests on",
        "settings",
        "median",
        "slope of",
    ):
        assert words in output
    assert "feed/all.csv lines" in output
    assert re.search(r"onset +\S+ \(.*90 %|onset +about .*90 %", output)
    assert "Association is not cause" in " ".join(output.split())
    assert max(len(line) for line in output.splitlines()) <= 80


def test_an_alert_for_machines_holds_its_sheet_and_the_origin_of_its_readings(config: str):
    alert = json.loads(run("alert", "1", "--config", config, "--json").output)
    assert alert["sheet"]["change"]["high"] < 0
    assert {o["path"] for o in alert["provenance"]["origins"]} == {"feed/all.csv"}
    assert len(alert["provenance"]["origins"][0]["sha256"]) == 64
    now = json.loads(run("alert", "1", "--now", "--config", config, "--json").output)
    assert now["sheet"] == alert["sheet"]
    assert "As seen now: nights to 2025-06-19" in run("alert", "1", "--now", "--config", config).output


def test_an_alert_is_reproduced_bit_for_bit(config: str):
    same = run("alert", "1", "--reproduce", "--config", config)
    assert same.exit_code == ExitCode.WELL, same.output
    assert "the same in every bit" in " ".join(same.output.split())
    assert json.loads(run("alert", "1", "--reproduce", "--config", config, "--json").output)["matches"]


def test_an_alert_that_does_not_exist_ends_with_a_message(config: str):
    result = run("alert", "99", "--config", config)
    assert result.exit_code == ExitCode.FAILED
    assert "alert 99: no such alert" in result.output


def test_a_person_acknowledges_decides_and_the_log_keeps_all_of_it(config: str):
    assert run("acknowledge", "1", "--note", "seen", "--who", "ana", "--config", config).exit_code == 0
    twice = run("acknowledge", "1", "--who", "bo", "--config", config)
    assert twice.exit_code == ExitCode.FAILED
    assert "already acknowledged by ana" in twice.output
    done = run("outcome", "1", "real-change", "--note", "works", "--who", "ana", "--config", config)
    assert "(real change)" in done.output
    (alert,) = json.loads(run("alerts", "--config", config, "--json").output)
    assert [e["kind"] for e in alert["events"]] == ["raised", "acknowledged", "outcome"]
    assert [e["who"] for e in alert["events"]] == ["rhovane", "ana", "ana"]
    assert alert["outcome"] == "real change"
    assert json.loads(run("alerts", "--unreviewed", "--config", config, "--json").output) == []


def test_an_unknown_outcome_is_refused_with_the_known_ones(config: str):
    result = run("outcome", "1", "sabotage", "--config", config)
    assert result.exit_code == ExitCode.SETTINGS_MISTAKE
    assert "weather-or-season" in result.output


def test_status_tells_missed_nights_and_ends_with_its_code(config: str):
    result = run("status", "--config", config, "--as-of", "2025-06-30")
    assert result.exit_code == ExitCode.NIGHT_INCOMPLETE
    assert "11 NIGHTS MISSED" in result.output
    well = run("status", "--config", config, "--as-of", LAST)
    assert well.exit_code == ExitCode.WELL
    assert (
        json.loads(run("status", "--config", config, "--as-of", LAST, "--json").output)["nights_missed"] == 0
    )


def test_status_before_any_night_says_that_silence_means_nothing(tmp_path: Path):
    (tmp_path / "feed").mkdir()
    (tmp_path / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    (tmp_path / "feed" / "a.csv").write_text(HEADER + row(0, "A", 1.5), encoding="utf-8")
    path = str(tmp_path / "monitor.toml")
    assert run("ingest", "--config", path).exit_code == ExitCode.WELL
    result = run("status", "--config", path)
    assert result.exit_code == ExitCode.NIGHT_INCOMPLETE
    assert "NO NIGHT HAS RUN" in result.output


def test_ingest_takes_files_by_name_and_refuses_strangers(tmp_path: Path):
    (tmp_path / "feed").mkdir()
    (tmp_path / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    path = str(tmp_path / "monitor.toml")
    (tmp_path / "feed" / "a.csv").write_text(HEADER + row(0, "A", 1.5), encoding="utf-8")
    (tmp_path / "other.txt").write_text(HEADER + row(1, "A", 2.5), encoding="utf-8")
    first = run("ingest", str(tmp_path / "feed" / "a.csv"), "--config", path)
    assert first.exit_code == ExitCode.WELL
    assert "1 rows: 1 new" in first.output
    missing = run("ingest", str(tmp_path / "feed" / "none.csv"), "--config", path)
    assert missing.exit_code == ExitCode.NIGHT_INCOMPLETE
    assert "none.csv: there is no such file" in missing.output
    stranger = run("ingest", str(tmp_path / "other.txt"), "--config", path)
    assert stranger.exit_code == ExitCode.FAILED
    assert "--source" in stranger.output
    named = run("ingest", str(tmp_path / "other.txt"), "--source", "air", "--config", path)
    assert named.exit_code == ExitCode.WELL
    again = run("ingest", str(tmp_path / "other.txt"), "--source", "air", "--config", path)
    assert again.exit_code == ExitCode.NOTHING_NEW


@pytest.mark.parametrize("suffix", [".csv", ".parquet"])
@pytest.mark.parametrize("what", ["readings", "windows", "alerts"])
def test_exports_are_written_and_counted(config: str, tmp_path: Path, what: str, suffix: str):
    target = tmp_path / f"{what}{suffix}"
    result = run("export", what, str(target), "--config", config)
    assert result.exit_code == ExitCode.WELL
    n = int(result.output.split()[0])
    frame = pd.read_csv(target, comment="#") if suffix == ".csv" else None
    table = duckdb.sql(f"from '{target}'").fetchall() if frame is None else frame.values.tolist()
    assert len(table) == n > 0
    if frame is not None:
        assert target.read_text("utf-8").startswith("# Two stations")
        assert "Association is not cause" in target.read_text("utf-8")[:600]
    else:
        about = duckdb.sql(f"select value from parquet_kv_metadata('{target}')").fetchall()
        assert any("Association is not cause" in bytes(value).decode() for (value,) in about)


def test_recompute_changes_no_result(config: str, tmp_path: Path):
    before, after = tmp_path / "before.csv", tmp_path / "after.csv"
    run("export", "windows", str(before), "--config", config)
    assert run("recompute", "--from", "2025-03-01", "--config", config).exit_code == ExitCode.WELL
    run("export", "windows", str(after), "--config", config)

    def rows(path: Path) -> list[str]:
        return [line.rpartition(",")[0] for line in path.read_text("utf-8").splitlines()]

    assert rows(before) == rows(after)
    assert len(json.loads(run("alerts", "--config", config, "--json").output)) == 1


def test_a_settings_mistake_ends_with_its_code_and_all_mistakes(tmp_path: Path):
    path = tmp_path / "monitor.toml"
    path.write_text(SETTINGS.replace("window_hours = 168", "window_hours = 1\nwindow = 3"), encoding="utf-8")
    result = run("status", "--config", str(path))
    assert result.exit_code == ExitCode.SETTINGS_MISTAKE
    assert "has 2 mistakes" in result.output


def test_looking_before_there_is_a_store_says_what_to_run(tmp_path: Path):
    (tmp_path / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    result = run("alerts", "--config", str(tmp_path / "monitor.toml"))
    assert result.exit_code == ExitCode.FAILED
    assert "rhovane" in result.output


def test_help_loads_no_heavy_library():
    code = (
        "import sys; from rhovane.cli import main\n"
        "try: main(['--help'])\n"
        "except SystemExit: pass\n"
        "print([m for m in ('numpy', 'pandas', 'scipy', 'numba', 'duckdb', 'pydantic', 'apscheduler') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "[]"
