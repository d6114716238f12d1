"""From sample files to a settings file: drafted, questioned, answered, loaded and ingested."""

from __future__ import annotations

import datetime as dt
import re
from pathlib import Path
from zoneinfo import ZoneInfo

import pytest
from click.testing import CliRunner

from reference.feed_layouts import Layout, write_long, write_wide
from rhovane.cli import main
from rhovane.ingest import draft_settings
from rhovane.model import ExitCode, FeedError, SettingsError
from rhovane.pipeline.checking import dry_run, ingest_now
from rhovane.settings import load_settings
from rhovane.store import open_store

OCTOBER_24 = int(dt.datetime(2025, 10, 23, 22, tzinfo=dt.UTC).timestamp())  # midnight in Berlin
HOUR = 3600


@pytest.fixture
def samples(tmp_path: Path) -> Path:
    """A long feed in UTC, a wide one on the civil clock over a change, and a file that is no feed."""
    folder = tmp_path / "samples"
    for name in ("air", "roads"):
        (folder / name).mkdir(parents=True)
    starts = [OCTOBER_24 + 2 * HOUR + i * HOUR for i in range(96)]
    readings = [
        (s, q, t, float((t // HOUR) % 9) if t % 7 else None)
        for t in starts
        for s in ("KEL", "TIV")
        for q in ("NO2", "O3")
    ]
    (folder / "air" / "a.csv").write_bytes(write_long(readings, Layout("long")))
    civil = Layout(
        "wide",
        clock="civil Europe/Berlin",
        delimiter=";",
        decimal=",",
        time_format="%d.%m.%Y %H:%M",
        missing="-",
    )
    by_hour = [OCTOBER_24 + i * HOUR for i in range(97)]
    counts = {
        "north": [i + 0.5 for i in range(97)],
        "south": [None if i == 5 else i * 2.0 for i in range(97)],
    }
    (folder / "roads" / "c.csv").write_bytes(write_wide(by_hour, counts, civil))
    (folder / "roads" / "readme.txt").write_text("nothing to see\n")
    return folder


def drafted(samples: Path, place: Path) -> list[str]:
    result = CliRunner().invoke(main, ["init", str(samples), "--config", str(place)])
    assert result.exit_code == ExitCode.WELL, result.output
    return place.read_text("utf-8").splitlines()


def answered(lines: list[str]) -> str:
    """What an analyst would write in place of the question marks."""
    answers = {
        "standard_time": ["+01:00"],
        "civil_zone": ["Europe/Berlin"],
        "unit": ["ug/m3"] * 9,
        "label": ["start", "start"],
    }
    answers["clock"] = ["UTC", "civil Europe/Berlin"]
    out = []
    for line in lines:
        found = re.match(r'(\w+) = "\?"', line)
        out.append(f'{found[1]} = "{answers[found[1]].pop(0)}"' if found else line)
    return "\n".join(out)


def test_the_draft_shows_what_it_saw_and_decides_neither_clock_nor_label(samples: Path, tmp_path: Path):
    text = "\n".join(drafted(samples, tmp_path / "draft.toml"))
    assert text.count('clock = "?"') == text.count('label = "?"') == 2
    assert "25 rows on 2025-10-26, a Sunday: an hour comes again, as on a civil clock" in text
    assert "24 rows on 2025-10-26, when European civil clocks change: no civil clock of Europe" in text
    assert 'form = "long csv"' in text
    assert 'form = "wide csv"' in text
    assert 'delimiter = ";"' in text
    assert 'decimal = ","' in text
    assert 'time_format = "%d.%m.%Y %H:%M"' in text
    assert 'missing = ["-999"]' in text
    assert 'missing = ["-"]' in text
    assert '"KEL NO2" = "KEL.NO2"' in text
    assert "Not understood:" in text
    assert "readme.txt" in text


def test_an_unanswered_draft_does_not_load_and_every_line_is_named(samples: Path, tmp_path: Path):
    place = tmp_path / "draft.toml"
    lines = drafted(samples, place)
    open_lines = [n for n, line in enumerate(lines, start=1) if re.match(r'\w+ = "\?"', line)]
    with pytest.raises(SettingsError) as caught:
        load_settings(place)
    assert [int(n) for n in re.findall(r"line (\d+), ", str(caught.value))] == open_lines


def test_the_answered_draft_loads_checks_and_ingests(samples: Path, tmp_path: Path):
    place = tmp_path / "draft.toml"
    place.write_text(answered(drafted(samples, place)), encoding="utf-8")
    settings = load_settings(place)
    assert [pair.key for pair in settings.pair][:2] == ["KEL.NO2~TIV.NO2", "KEL.O3~TIV.O3"]
    checked = {source.name: source for source in dry_run(settings, None)}
    assert checked["air"].rejected_by_reason == {}
    assert checked["roads"].rejected_by_reason == {}
    with open_store(settings.store_path) as store:
        done = ingest_now(settings, store, (), None, now=dt.datetime(2025, 11, 1, tzinfo=dt.UTC))
        assert done.troubles == ()
        assert sum(o.new for o in done.outcomes) == 96 * 4 + 97 * 2
        span = store.span_of(["roads.north"])["roads.north"]
    assert span[0].astimezone(ZoneInfo("Europe/Berlin")).hour == 0


def test_an_existing_settings_file_is_never_overwritten(samples: Path, tmp_path: Path):
    place = tmp_path / "draft.toml"
    place.write_text("mine", encoding="utf-8")
    result = CliRunner().invoke(main, ["init", str(samples), "--config", str(place)])
    assert result.exit_code == ExitCode.SETTINGS_MISTAKE
    assert place.read_text("utf-8") == "mine"


def test_a_folder_without_feed_files_says_what_each_file_lacks(tmp_path: Path):
    (tmp_path / "a.csv").write_text("hello\n")
    (tmp_path / "b.csv").write_bytes(bytes(100))
    with pytest.raises(FeedError) as caught:
        draft_settings(tmp_path, ".")
    assert "no header over rows" in str(caught.value)
    assert "no text in utf-8" in str(caught.value)
    with pytest.raises(FeedError, match="no such folder"):
        draft_settings(tmp_path / "gone", ".")


def test_dates_that_fit_two_patterns_are_a_question(tmp_path: Path):
    rows = "".join(f"0{1 + i // 24}/0{1 + i // 24}/2025 {i % 24:02d}:00,{i}\n" for i in range(72))
    (tmp_path / "a.csv").write_text("time,no2\n" + rows)
    text = draft_settings(tmp_path, ".")
    assert 'time_format = "?"  # the labels fit "%d/%m/%Y %H:%M" and "%m/%d/%Y %H:%M"' in text
