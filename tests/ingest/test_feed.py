import datetime as dt
import os
from pathlib import Path

import numpy as np
import pytest

from ingest.small_network import NETWORK, long_source, only_reason, read_parquet, wide_source
from rhovane.ingest import describe_rejections, list_files, parse_file
from rhovane.model import FeedError


def paths_of(source, folder):
    return [folder / file.place for file in list_files(source, folder)]


def touch(folder: Path, *names: str) -> None:
    for name in names:
        (folder / name).parent.mkdir(parents=True, exist_ok=True)
        (folder / name).write_text("x")


def test_files_are_found_sorted_and_folders_are_not_files(tmp_path):
    touch(tmp_path, "feed/b.csv", "feed/a.csv", "feed/c.txt", "feed/sub/d.csv", "other/e.csv")
    (tmp_path / "feed/folder.csv").mkdir()
    assert paths_of(long_source(), tmp_path) == [tmp_path / "feed/a.csv", tmp_path / "feed/b.csv"]
    deep = paths_of(long_source(files="feed/**/*.csv"), tmp_path)
    assert deep == [tmp_path / "feed/a.csv", tmp_path / "feed/b.csv", tmp_path / "feed/sub/d.csv"]
    assert paths_of(long_source(files="feed/c.txt"), tmp_path) == [tmp_path / "feed/c.txt"]
    assert len(paths_of(long_source(files="*/*.csv"), tmp_path)) == 3


def test_a_work_folder_with_wildcard_characters_in_its_name(tmp_path):
    folder = tmp_path / "net [1]*"
    touch(folder, "feed/a.csv")
    assert paths_of(long_source(), folder) == [folder / "feed/a.csv"]


def test_an_absolute_pattern(tmp_path):
    touch(tmp_path, "drop/a.csv")
    source = long_source(files=str(tmp_path / "drop" / "*.csv"))
    assert paths_of(source, tmp_path / "elsewhere") == [tmp_path / "drop/a.csv"]


@pytest.mark.parametrize("files", ["feed/*.csv", "feed/2024/*.csv", "feed/a.csv", "feed/**/*.csv"])
def test_a_missing_folder_is_named_with_the_remedy(tmp_path, files):
    folder = (tmp_path / files).parent if "**" not in files else tmp_path / "feed"
    with pytest.raises(FeedError) as caught:
        paths_of(long_source(files=files), tmp_path)
    assert f"Source lab: there is no folder {folder}. Create it, or correct files" in str(caught.value)


def test_a_folder_without_a_match_is_named(tmp_path):
    touch(tmp_path, "feed/a.txt")
    with pytest.raises(FeedError, match=r"no file in .*feed matches files = 'feed/\*\.csv'"):
        paths_of(long_source(), tmp_path)
    with pytest.raises(FeedError, match="there is no folder"):
        paths_of(long_source(files="feed/a.txt/*.csv"), tmp_path)


def test_a_folder_that_cannot_be_listed_is_not_an_empty_one(tmp_path, monkeypatch):
    touch(tmp_path, "feed/a.csv")

    def refuse(folder):
        raise PermissionError(13, "Permission denied", str(folder))

    monkeypatch.setattr(os, "scandir", refuse)
    with pytest.raises(FeedError, match="cannot be listed \\(Permission denied\\)"):
        paths_of(long_source(), tmp_path)


def test_a_file_that_vanished_is_an_error(tmp_path):
    with pytest.raises(FeedError, match="no such file"):
        parse_file(tmp_path / "gone.csv", long_source(), NETWORK, read_parquet=read_parquet)


def test_a_file_that_cannot_be_opened_stands_in_quarantine(tmp_path, monkeypatch):
    folder = parse_file(tmp_path, long_source(), NETWORK, read_parquet=read_parquet)
    assert "cannot be read (Is a directory)" in only_reason(folder)
    path = tmp_path / "locked.csv"
    path.write_text("x")

    def refuse(self, mode):
        raise PermissionError(13, "Permission denied", f"{self} {mode}")

    monkeypatch.setattr(Path, "open", refuse)
    parsed = parse_file(path, long_source(), NETWORK, read_parquet=read_parquet)
    assert "cannot be read (Permission denied)" in only_reason(parsed)
    assert (parsed.sha256, parsed.rows_read, len(parsed.value)) == ("", 0, 0)
    assert parsed.path == str(path)


def test_the_file_is_opened_once(tmp_path, monkeypatch):
    path = tmp_path / "a.csv"
    path.write_text("time,station,quantity,value\n2024-03-01 00:00,KEL,NO2,1\n")
    opened = []
    real = Path.open
    monkeypatch.setattr(Path, "open", lambda self, mode: opened.append(self) or real(self, mode))
    parse_file(path, long_source(), NETWORK, read_parquet=read_parquet)
    assert opened == [path]


def test_rejections_are_described_for_people(parse):
    text = "time,no2,o3,temp,x\n2024-03-01 00:00,1,oops,3,\nnoon,1,2,3,\n2024-03-01 02:00,1\n"
    described = describe_rejections(parse(text, wide_source()))
    starts = ["day.csv: Columns that", 'day.csv:2, column o3: "oops"', 'day.csv:3, column time: "noon"']
    assert [
        line.startswith(start) for line, start in zip(described, [*starts, "day.csv:4: Too few"], strict=True)
    ] == [True] * 4


def test_nothing_rejected_is_nothing_to_describe(parse):
    parsed = parse("time,station,quantity,value\n2024-03-01 00:00,KEL,NO2,1\n", long_source())
    assert describe_rejections(parsed) == []


def test_the_same_bytes_parse_to_the_same_readings(parse):
    rng = np.random.default_rng(3)
    values = rng.choice(["1", "2", "", "x", "nan"], 48)
    text = "time,station,quantity,value\n"
    text += "".join(f"2024-03-{1 + i // 24:02d} {i % 24:02d}:00,KEL,NO2,{v}\n" for i, v in enumerate(values))
    first, second = parse(text, long_source()), parse(text, long_source())
    assert first.sha256 == second.sha256
    assert first.rejected == second.rejected
    np.testing.assert_array_equal(first.value, second.value)


def test_the_time_of_change_is_the_same_listed_and_read_to_the_microsecond(tmp_path):
    path = tmp_path / "feed" / "a.csv"
    touch(tmp_path, "feed/a.csv")
    for ns in np.random.default_rng(6).integers(1_500_000_000 * 10**9, 1_900_000_000 * 10**9, 50).tolist():
        os.utime(path, ns=(ns, ns))
        read = parse_file(path, long_source(), NETWORK, read_parquet=read_parquet).modified
        (listed,) = list_files(long_source(), tmp_path)
        since_1970 = read - dt.datetime(1970, 1, 1, tzinfo=dt.UTC)
        assert since_1970 // dt.timedelta(microseconds=1) * 1000 == listed.modified_ns, f"mtime {ns} ns"
