"""Files read again by other settings: what they say now stands, and what past nights saw can still be told."""

import dataclasses
import shutil

import numpy as np
import pytest

from reference.naive_store import NaiveStore
from rhovane.model import Flag, RhovaneError
from rhovane.store import open_store, preview_files
from rhovane.store.clock import from_seconds
from store.building import (
    FIRST_HOUR,
    KEYS,
    NOW,
    current,
    naive_file,
    parsed_file,
    random_files,
    seen,
    states_as_of,
)

WITHDRAWN = (None, int(Flag.MISSING), 0, 0)


def by(rules, files):
    return [dataclasses.replace(file, rules=rules) for file in files]


def read_otherwise(rng, file):
    """The same bytes read by other settings: some values differ, some rows are rejected now, one is unchanged."""
    kept = np.flatnonzero(rng.random(len(file.value)) < 0.6)
    factor = rng.choice([1.0, 2.0], size=len(kept))
    columns = {
        name: [getattr(file, name)[i] for i in kept]
        for name in ("series_key", "hour_start", "flag", "stage", "result_time", "line")
    }
    values = [float(file.value[i] * f) for i, f in zip(kept, factor, strict=True)]
    n_rejected = sum(row.line > 0 for row in file.rejected)
    return dataclasses.replace(file, **columns, value=values, rows_read=len(kept) + n_rejected)


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("together", [True, False])
def test_readings_are_those_of_the_new_settings_alone_and_every_past_state_is_kept(store, seed, together):
    rng = np.random.default_rng(seed)
    sources = ["hourly", "daily"] if together else ["hourly"]
    first = [file for file in random_files(rng, 14, n_hours=9) if file.source in sources]
    again = [read_otherwise(rng, file) for file in first]
    recorded = {}
    for file in by("a", first):
        (outcome,) = store.append_files([file], now=NOW, checkpoint=False)
        recorded[outcome.ingest_id] = current(store)
    delivered = current(store).keys()
    batches = [by("b", again)] if together else [[file] for file in by("b", again)]
    for batch in batches:
        expected = preview_files(batch, store)
        outcomes = store.append_files(batch, now=NOW, checkpoint=False)
        assert outcomes == expected
        assert all(o.rows_read == o.new + o.revised + o.unchanged + o.rejected for o in outcomes)
        recorded[outcomes[-1].ingest_id] = current(store)
    twin = NaiveStore()
    for file in again:
        twin.append(naive_file(file))
    gone = dict.fromkeys(delivered - twin.content().keys(), WITHDRAWN)
    assert gone
    assert current(store) == twin.content() | gone
    for ingest_id, content in recorded.items():
        assert states_as_of(store, ingest_id) == content
        assert seen(store, ingest_id) == {key: state[:2] for key, state in content.items()}
    assert store.value("select sum(rows_withdrawn) from ingest") >= len(gone)
    assert store.verify() == []


@pytest.mark.parametrize("n_before", [0, 1, 3])
def test_settings_changed_and_changed_back_read_each_file_again_once(store, n_before):
    for i in range(n_before):  # how many appends came before decides whether the ledger is remembered
        earlier = parsed_file([{"series": KEYS[1], "hour": i, "value": 1.0}], name=f"feed/{i}.csv")
        store.append_files(by("a", [earlier]), now=NOW)
    file = parsed_file([{"series": KEYS[0], "hour": 0, "value": 1.0}])
    for rules, known in (("a", False), ("a", True), ("b", False), ("b", True), ("a", False), ("a", True)):
        (outcome,) = store.append_files(by(rules, [file]), now=NOW)
        assert outcome.already_known == known
    assert store.verify() == []


def test_an_append_that_fails_is_not_remembered_as_read(store):
    good = parsed_file([{"series": KEYS[0], "hour": 0, "value": 1.0}])
    bad = parsed_file([{"series": "NOWHERE.x", "hour": 0, "value": 1.0}])
    for hour in (1, 2):  # from the second append on the ledger is remembered
        store.append_files([parsed_file([{"series": KEYS[0], "hour": hour, "value": 1.0}])], now=NOW)
    with pytest.raises(RhovaneError, match=r"NOWHERE\.x"):
        store.append_files([good, bad], now=NOW)
    (outcome,) = store.append_files([good], now=NOW)
    assert (outcome.new, outcome.already_known) == (1, False)


def test_readings_of_a_file_that_is_gone_give_way_to_later_files_read_by_todays_settings(tmp_path, new_store):
    gone = parsed_file([{"series": KEYS[0], "hour": 0, "value": 1.0, "stage": 2}], name="feed/gone.csv")
    later = parsed_file([{"series": KEYS[0], "hour": 0, "value": 2.0, "stage": 0}], name="feed/later.csv")
    found = {}
    for rules in ("a", "b"):
        with open_store(shutil.copyfile(new_store, tmp_path / f"{rules}.duckdb")) as store:
            store.append_files(by("a", [gone]), now=NOW)
            store.append_files(by(rules, [later]), now=NOW)
            found[rules] = [value for value, *_ in current(store).values()]
            assert store.verify() == []
    assert found == {"a": [1.0], "b": [2.0]}


def test_origins_name_no_file_for_hours_that_it_no_longer_gives(store):
    readings = [{"series": KEYS[0], "hour": hour, "value": 1.0} for hour in range(3)]
    file = parsed_file(readings)
    store.append_files(by("a", [file]), now=NOW)
    shorter = dataclasses.replace(parsed_file(readings[:2]), sha256=file.sha256)
    store.append_files(by("b", [shorter]), now=NOW)
    span = (from_seconds(FIRST_HOUR), from_seconds(FIRST_HOUR + 86400))
    (then,) = store.origins([KEYS[0]], *span, max_ingest_id=1)
    (now,) = store.origins([KEYS[0]], *span, max_ingest_id=2)
    assert (then.n_readings, now.n_readings) == (3, 2)
    assert (now.first_line, now.last_line) == (2, 3)
