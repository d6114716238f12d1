"""Checking the whole store."""

import numpy as np
import pytest

from rhovane.model import StoreDamaged
from rhovane.store import open_store
from store.building import KEYS, NOW, parsed_file

FILE_HEADER_BYTES, BLOCK_BYTES = 3 * 4096, 262_144  # of a DuckDB file


def well(store):
    return all(not check.faults and not check.remedy for check in store.checks())


def test_what_was_checked_is_told_with_its_extent(used):
    extents = {check.what: check.extent for check in used.checks()}
    tables = len(used.tables_of())
    assert extents["every value of every table"].startswith(f"{tables} tables, ")
    assert extents["the manifest beside the store"] == f"9 ingests, {used.holds().readings} readings"
    assert extents["the chain of the alert log"] == "1 events"
    assert well(used)


@pytest.mark.parametrize(
    ("damage", "words"),
    [
        ("delete from reading where rowid = 0", "new rows of all files = readings"),
        ("insert into reading select * from reading limit 1", "reading: 2 rows share 1 keys"),
        ("insert into ingest select * from ingest where id = 3", "ingest: 2 rows share 1 keys"),
        ("insert into series (id, key) values (9, 'ASHFORD.NO2')", "series: 2 rows share 1 keys (key)"),
        ("delete from reading_history where rowid = 0", "revised rows of all files = superseded readings"),
        ("delete from rejected where ingest_id = 3 and line > 0", "ingest 3: rejected rows of each file"),
        ("update ingest set rows_read = rows_read + 1 where id = 2", "ingest 2: rows read = new + revised"),
        (
            "update reading set ingest_id = 99 where rowid = 0",
            "reading: 1 rows whose ingest_id is not in ingest",
        ),
        ("update alert set pair_key = 'c~d'", "not as it was written from event 1 on"),
        ("delete from alert_event", "1 lost: 0 events in the alert log"),
    ],
)
def test_each_broken_law_is_told_with_a_remedy(used, damage, words):
    used.execute(damage)
    faulty = [check for check in used.checks() if check.faults]
    assert any(words in fault for check in faulty for fault in check.faults)
    assert all("rhovane restore" in check.remedy for check in faulty)
    assert used.verify()


def test_only_the_first_faults_are_told_and_how_many_more_there_are(used):
    used.execute("update ingest set rows_read = rows_read + 1")
    (check,) = [check for check in used.checks() if check.faults]
    assert len(check.faults) == 6
    assert check.faults[0].startswith("ingest 1: ")
    assert check.faults[-1] == "and 4 more"


def test_flipped_bytes_in_the_file_are_found_when_everything_is_read(path, store):
    rng = np.random.default_rng(8)
    readings = [
        {"series": KEYS[0], "hour": i, "value": float(v)} for i, v in enumerate(rng.normal(size=9000))
    ]
    store.append_files([parsed_file(readings)], now=NOW)
    store.close()
    whole = path.read_bytes()
    told = []
    for place in range(FILE_HEADER_BYTES + 5000, len(whole), BLOCK_BYTES):
        content = bytearray(whole)
        content[place] ^= 0x55
        path.write_bytes(content)
        try:
            with open_store(path, read_only=True) as damaged:
                faults = [fault for check in damaged.checks() for fault in check.faults]
        except StoreDamaged as error:
            faults = [str(error)]
        told.append(faults)
    assert len(told) >= 3
    in_use = [faults for faults in told if faults]
    assert len(in_use) >= len(told) - 1, "only the free block may be damaged unnoticed"
    assert all("damaged" in faults[0] for faults in in_use)
