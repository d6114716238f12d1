"""Copies of the store: read back, rotated, put in place again."""

import datetime as dt
import shutil

import pytest

from rhovane.model import NotFound, RhovaneError, StoreDamaged
from rhovane.store import archives_in, back_up, copies_in, open_store, restore
from rhovane.store.copies import CONTENTS, kept_days
from rhovane.store.manifest import manifest_path, read_manifest
from store.building import KEYS, NOW, current, parsed_file

DAY = dt.timedelta(days=1)
MONDAY = dt.date(2024, 1, 1)


def test_copy_holds_the_same_and_can_take_the_place_of_the_store(used, tmp_path):
    folder = tmp_path / "it's a copy"
    folder.mkdir()
    target = folder / "copy.duckdb"
    for _ in range(2):
        assert used.backup(target) == used.holds()
    assert read_manifest(target) == used.holds()
    with open_store(target) as copy:
        assert current(copy) == current(used)
        assert copy.verify() == []
        assert (
            copy.append_files([parsed_file([{"series": KEYS[0], "hour": 99, "value": 1.0}])], now=NOW)[0].new
            == 1
        )
    assert {p.name for p in folder.iterdir()} == {"copy.duckdb", "copy.duckdb.manifest.json"}


def test_copy_that_cannot_be_made_is_refused_with_a_remedy(used, tmp_path):
    with pytest.raises(RhovaneError, match="is the store itself"):
        used.backup(used.path)
    with pytest.raises(RhovaneError, match="no such folder"):
        used.backup(tmp_path / "none" / "copy.duckdb")
    (tmp_path / "taken").mkdir()
    with pytest.raises(RhovaneError, match="cannot be written"):
        used.backup(tmp_path / "taken")
    assert not list(tmp_path.glob(".*"))
    assert used.verify() == []


def test_store_opened_for_reading_can_be_checked_and_copied(used, tmp_path):
    used.close()
    with open_store(used.path, read_only=True) as reader:
        assert reader.verify() == []
        assert reader.backup(tmp_path / "copy.duckdb").ingest_rows == 9


# -- rotation ------------------------------------------------------------------------------------------


def test_newest_days_and_the_last_day_of_the_newest_weeks_are_kept():
    days = [MONDAY + i * DAY for i in range(30)]  # 2024-01-01 to 2024-01-30, a Tuesday
    kept = kept_days(days, daily=3, weekly=3)
    assert sorted(d.day for d in kept) == [21, 28, 29, 30]
    assert kept_days(days, daily=1, weekly=0) == {days[-1]}
    assert kept_days([], daily=7, weekly=5) == set()


def test_rotation_day_by_day_keeps_what_rotation_at_once_keeps():
    held = set()
    days = [MONDAY + i * DAY for i in range(120) if i % 11]
    for day in days:
        held = kept_days(held | {day}, daily=4, weekly=6)
    assert held == kept_days(days, daily=4, weekly=6)


def test_backup_names_copies_by_day_archives_once_a_week_and_removes_only_its_own(used, tmp_path):
    folder = tmp_path / "backup"
    folder.mkdir()
    (folder / "notes.txt").write_text("mine")
    (folder / "watch-2023-01-01.txt").write_text("mine too")
    made = [back_up(used, folder, MONDAY + i * DAY, daily=2, weekly=2) for i in range(9)]
    assert [m.archive is not None for m in made] == [i % 7 == 0 for i in range(9)]
    assert made[0].held == used.holds()
    assert sorted(copies_in(folder, used.path)) == [MONDAY + i * DAY for i in (6, 7, 8)]
    assert [p.name for p in archives_in(folder, used.path)] == [
        "watch-2024-W02-parquet",
        "watch-2024-W01-parquet",
    ]
    copies = [f"watch-2024-01-{d}.duckdb" for d in ("07", "08", "09")]
    assert {p.name for p in folder.iterdir()} == {
        *copies,
        *(f"{name}.manifest.json" for name in copies),
        "watch-2024-W01-parquet",
        "watch-2024-W02-parquet",
        "notes.txt",
        "watch-2023-01-01.txt",
    }


# -- archives and restoring -----------------------------------------------------------------------------


def everything(store):
    return {t: sorted(store.rows(f"select * from {t}"), key=repr) for t in store.tables_of()}


@pytest.mark.parametrize("form", ["copy", "archive"])
def test_restored_store_is_the_one_that_was_copied_and_goes_on(used, tmp_path, form):
    before = everything(used)
    copy = tmp_path / "saved.duckdb" if form == "copy" else tmp_path / "saved-parquet"
    held = used.backup(copy) if form == "copy" else used.archive(copy)
    later = parsed_file([{"series": KEYS[0], "hour": 98, "value": 1.0}])
    used.append_files([later], now=NOW)
    used.close()
    with pytest.raises(RhovaneError, match=r"still there and is not overwritten.*Move it away"):
        restore(copy, used.path)
    used.path.unlink()
    with pytest.raises(StoreDamaged, match="rhovane restore"):
        open_store(used.path)
    assert restore(copy, used.path) == held
    with open_store(used.path) as store:
        assert everything(store) == before
        assert store.verify() == []
        assert store.append_files([later], now=NOW)[0].new == 1
    assert not list(tmp_path.glob(".*"))


def test_archive_that_is_not_whole_is_not_put_in_place(used, tmp_path):
    archive = tmp_path / "saved-parquet"
    used.archive(archive)
    with pytest.raises(RhovaneError, match="exists; an archive is never changed"):
        used.archive(archive)
    used.close()
    used.path.unlink()
    for name, damage, words in (
        ("reading.parquet", "unlink", "is not whole"),
        ("rejected.parquet", "alert.parquet", "holds 1 rows, not|is not whole"),
        (CONTENTS, "unlink", "is no archive"),
        (CONTENTS, '{"tables_of_step": 999, "rows": {}}', "newer version"),
    ):
        broken = tmp_path / "broken"
        shutil.copytree(archive, broken)
        if damage == "unlink":
            (broken / name).unlink()
        elif damage.startswith("{"):
            (broken / name).write_text(damage)
        else:
            shutil.copyfile(broken / damage, broken / name)
        with pytest.raises(StoreDamaged, match=words):
            restore(broken, used.path)
        shutil.rmtree(broken)
        assert not used.path.exists()
    with pytest.raises(NotFound, match=r"backup --list"):
        restore(tmp_path / "none", used.path)


def test_copy_that_lost_something_is_not_put_in_place(used, tmp_path):
    older, newer = tmp_path / "older.duckdb", tmp_path / "newer.duckdb"
    used.backup(older)
    used.append_files([parsed_file([{"series": KEYS[0], "hour": 98, "value": 1.0}])], now=NOW)
    used.backup(newer)
    used.close()
    used.path.unlink()
    shutil.copyfile(older, newer)  # its manifest still says more
    with pytest.raises(StoreDamaged, match=r"newer\.duckdb has lost data: 1 lost"):
        restore(newer, used.path)
    assert not used.path.exists()
    assert manifest_path(used.path).exists()
