"""Keeping the store from the command line: verify, backup, restore by README's recipe, tidy."""

from __future__ import annotations

import json
import re
import shlex
import subprocess
import threading
from pathlib import Path

import duckdb
import pytest
from click.testing import CliRunner, Result

from flow.small_network import HEADER, SETTINGS, related_series, row
from rhovane.cli import main
from rhovane.model import ExitCode
from rhovane.store import open_store
from store.building import hold, processes

README = (Path(__file__).parents[2] / "README.md").read_text("utf-8")
N_DAYS = 20


def run(*args: str) -> Result:
    return CliRunner().invoke(main, list(args), catch_exceptions=False)


def deliver(folder: Path, first: int, last: int) -> None:
    x, y = related_series(24 * N_DAYS, 0.9, seed=3)
    hours = range(24 * first, 24 * last)
    text = HEADER + "".join(row(h, "A", x[h]) + row(h, "B", y[h]) for h in hours)
    (folder / "feed" / f"{first:02d}.csv").write_text(text, encoding="utf-8")


@pytest.fixture
def config(tmp_path: Path) -> str:
    """A network with eighteen days taken in by a night."""
    (tmp_path / "feed").mkdir()
    settings = SETTINGS.replace(
        'unit = "ug/m3"', 'unit = "ug/m3"\nsegments = [{first_day = 2025-01-10, what = "new inlet"}]', 1
    )
    (tmp_path / "monitor.toml").write_text(settings, encoding="utf-8")
    deliver(tmp_path, 0, 18)
    path = str(tmp_path / "monitor.toml")
    assert run("nightly", "--as-of", "2025-01-18", "--config", path).exit_code == ExitCode.WELL
    return path


def test_whole_store_verifies_and_a_damaged_one_ends_with_its_code_and_a_remedy(config: str, tmp_path: Path):
    well = run("verify", "--config", config)
    assert well.exit_code == ExitCode.WELL
    assert "every value of every table" in well.output
    assert "864 readings" in well.output
    assert "FAULTY" not in well.output
    with duckdb.connect(str(tmp_path / "rhovane.duckdb")) as connection:
        connection.execute("update ingest set rows_rejected = 1")
    faulty = run("verify", "--config", config)
    assert faulty.exit_code == ExitCode.STORE_DAMAGED
    assert "FAULTY the counts of the ingest ledger" in faulty.output
    assert "ingest 1: rejected rows of each file = quarantine: 0 and 1" in faulty.output
    assert "rhovane restore" in faulty.output
    told = json.loads(run("verify", "--json", "--config", config).output)
    assert [c["what"] for c in told["checks"] if c["faults"]] == ["the counts of the ingest ledger"]


def test_copies_are_made_listed_and_checked(config: str, tmp_path: Path):
    none = run("backup", "--list", "--config", config)
    assert "No copies in" in none.output
    made = json.loads(run("backup", "--json", "--config", config).output)
    assert made["readings"] == 864
    assert Path(made["copy"]).parent == tmp_path / "backup"
    listed = json.loads(run("backup", "--list", "--json", "--config", config).output)
    assert listed == sorted([made["copy"], made["archive"]])
    assert run("verify", "--file", made["copy"], "--config", config).exit_code == ExitCode.WELL
    again = run("backup", "--config", config)
    assert "864 readings of 1 files, read back" in again.output
    assert "Parquet" not in again.output, "this week's archive is there"


def test_the_archive_needs_no_store_to_be_read(config: str):
    made = json.loads(run("backup", "--json", "--config", config).output)
    found = duckdb.sql(
        f"""
        select s.key, count(*), count(r.value) from '{made["archive"]}/reading.parquet' r
        join '{made["archive"]}/series.parquet' s on s.id = r.series_id group by all order by all
        """
    ).fetchall()
    assert found == [("A.NO2", 432, 432), ("B.NO2", 432, 432)]


def recipe() -> list[str]:
    """The lines of README's recipe for a store that is damaged or gone."""
    section = README.partition("## Keeping the store")[2].partition("\n## ")[0]
    return [
        line.partition("#")[0].strip()
        for line in re.findall(r"```sh\n(.*?)```", section, re.DOTALL)[0].splitlines()
    ]


@pytest.mark.parametrize("loss", ["deleted", "damaged"])
def test_store_is_restored_by_the_recipe_of_the_readme_and_the_next_night_goes_on(
    config: str, tmp_path: Path, loss: str
):
    store = tmp_path / "rhovane.duckdb"
    run("backup", "--config", config)
    deliver(tmp_path, 18, 19)
    assert run("nightly", "--as-of", "2025-01-19", "--config", config).exit_code == ExitCode.WELL
    run("export", "windows", str(tmp_path / "before.csv"), "--plain", "--config", config)
    if loss == "deleted":
        store.unlink()
    else:
        store.write_bytes(store.read_bytes()[:20_000])
    assert run("status", "--config", config).exit_code == ExitCode.STORE_DAMAGED
    lines = recipe()
    assert [shlex.split(line)[:2] for line in lines][1:] == [
        ["rhovane", w] for w in ("restore", "verify", "nightly")
    ]
    for line in lines:
        if line.startswith("rhovane "):
            words = [config if word == "my/monitor.toml" else word for word in shlex.split(line)[1:]]
            done = run(*words, *(["--as-of", "2025-01-19"] if words[0] == "nightly" else []))
            assert done.exit_code == ExitCode.WELL, done.output
        else:
            subprocess.run(line, shell=True, check=True, cwd=tmp_path)
    run("export", "windows", str(tmp_path / "after.csv"), "--plain", "--config", config)
    assert (tmp_path / "after.csv").read_text() == (tmp_path / "before.csv").read_text()
    deliver(tmp_path, 19, 20)
    assert run("nightly", "--as-of", "2025-01-20", "--config", config).exit_code == ExitCode.WELL
    assert run("verify", "--config", config).exit_code == ExitCode.WELL


def test_a_store_that_is_there_is_not_overwritten_and_a_missing_copy_is_told(config: str):
    missing = run("restore", "--config", config)
    assert missing.exit_code == ExitCode.FAILED
    assert "There is no copy in" in missing.output
    run("backup", "--config", config)
    there = run("restore", "--config", config)
    assert there.exit_code == ExitCode.FAILED
    assert "is not overwritten. Move it away" in there.output


def test_tidying_tells_size_and_time_before_and_after(config: str):
    told = run("tidy", "--config", config)
    assert re.search(r"[\d.]+ → [\d.]+ MB; one series is read in [\d.]+ → [\d.]+ ms", told.output)
    assert json.loads(run("tidy", "--json", "--config", config).output)["bytes_after"] > 0
    assert run("verify", "--config", config).exit_code == ExitCode.WELL


def test_segments_are_shown_by_status_and_kept_in_exports(config: str, tmp_path: Path):
    status = run("status", "--as-of", "2025-01-18", "--config", config)
    assert "A.NO2 from 2025-01-10: new inlet" in status.output
    told = json.loads(run("status", "--json", "--as-of", "2025-01-18", "--config", config).output)
    assert told["segments"] == [{"series": "A.NO2", "first_day": "2025-01-10", "what": "new inlet"}]
    run("export", "readings", str(tmp_path / "r.csv"), "--config", config)
    assert "# Segment: A.NO2 from 2025-01-10 (standard time): new inlet\n" in (tmp_path / "r.csv").read_text()
    before = run("status", "--as-of", "2025-01-09", "--config", config)
    assert "new inlet" not in before.output
    with open_store(tmp_path / "rhovane.duckdb", read_only=True) as store:
        assert [g.what for g in store.segments()] == ["new inlet"]


def test_a_copy_waits_for_a_night_that_holds_the_store_and_then_says_who_does(config: str, tmp_path: Path):
    ready, release = processes.Event(), processes.Event()
    holder = processes.Process(target=hold, args=(tmp_path / "rhovane.duckdb", ready, release))
    holder.start()
    assert ready.wait(60)
    settings = Path(config)
    text = settings.read_text(encoding="utf-8")
    settings.write_text(text + "[store]\nlock_wait_s = 0.2\n", encoding="utf-8")
    for command in ("backup", "verify", "tidy"):
        held = run(command, "--config", config)
        assert held.exit_code == ExitCode.STORE_LOCKED
        assert f"process {holder.pid} (" in held.output
        assert "running since" in held.output
    settings.write_text(text + "[store]\nlock_wait_s = 60\n", encoding="utf-8")
    threading.Timer(0.5, release.set).start()
    assert run("backup", "--config", config).exit_code == ExitCode.WELL
    holder.join(60)
