"""Checking the whole store, and copying it."""

import numpy as np
import pytest

from rhovane.model import RejectedRow, RhovaneError, StoreDamaged
from rhovane.store import NewAlert, NewAlertEvent, open_store
from rhovane.store.manifest import read_manifest
from store.building import KEYS, NOW, current, parsed_file, random_files

FILE_HEADER_BYTES, BLOCK_BYTES = 3 * 4096, 262_144  # of a DuckDB file


@pytest.fixture
def used(store):
    """A store with readings, revisions, rejected rows and an alert."""
    store.append_files(random_files(np.random.default_rng(3), 8), now=NOW)
    store.append_files([parsed_file([], rejected=[RejectedRow(0, "", "", "empty")])], now=NOW)
    store.append_alerts([NewAlert("a~b", NOW.date(), 1)])
    store.append_alert_events([NewAlertEvent(1, NOW, "raised")])
    return store


def test_store_in_use_is_whole(used):
    assert used.verify() == []
    assert used.value("select count(*) from reading_history") > 0


@pytest.mark.parametrize(
    ("damage", "words"),
    [
        ("delete from reading where rowid = 0", "counts as new differ"),
        ("insert into reading select * from reading limit 1", "1 hours have two current readings"),
        ("delete from reading_history where rowid = 0", "counts as revised differ"),
        ("delete from rejected where line > 0", "rejected rows, and those that the ledger counts differ"),
        ("update ingest set rows_read = rows_read + 1 where id = 1", "rows read, and rows that are new"),
        ("update alert set pair_key = 'c~d'", "alert log is not as it was written from event 1 on"),
    ],
)
def test_each_broken_law_is_told(used, damage, words):
    used.execute(damage)
    assert any(words in fault for fault in used.verify())


def test_flipped_bytes_in_the_file_are_found_when_everything_is_read(path, store):
    rng = np.random.default_rng(8)
    readings = [
        {"series": KEYS[0], "hour": i, "value": float(v)} for i, v in enumerate(rng.normal(size=9000))
    ]
    store.append_files([parsed_file(readings)], now=NOW)
    store.close()
    content = bytearray(path.read_bytes())
    for place in range(FILE_HEADER_BYTES + 5000, len(content), BLOCK_BYTES):
        content[place] ^= 0x55
    path.write_bytes(content)

    def open_and_verify():
        with open_store(path, read_only=True) as damaged:
            damaged.verify()

    with pytest.raises(StoreDamaged, match="restore the latest backup"):
        open_and_verify()


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
