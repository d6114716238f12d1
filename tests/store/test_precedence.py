"""The law of arrival: the same files give the same readings in whatever order they come."""

import shutil

import numpy as np
import pytest

from reference.naive_store import NaiveStore
from rhovane.store import open_store
from rhovane.store.clock import from_seconds
from rhovane.store.exports import STATES_AS_OF
from rhovane.store.precedence import READING, group_by_hour, outranks
from store.building import (
    FIRST_HOUR,
    KEYS,
    NOW,
    current,
    naive_file,
    parsed_file,
    random_files,
    seen,
    value_and_flag,
)


def in_batches(rng, files):
    """The files in order, cut into batches of random size."""
    cuts = np.sort(rng.integers(0, len(files) + 1, size=3))
    return [files[a:b] for a, b in zip([0, *cuts], [*cuts, len(files)], strict=True)]


@pytest.mark.parametrize("seed", range(8))
def test_store_agrees_with_the_naive_twin_in_content_counts_and_history(store, seed):
    rng = np.random.default_rng(seed)
    twin = NaiveStore()
    files = random_files(rng, 12)
    files += [files[i] for i in rng.integers(0, 12, size=4)]
    for batch in in_batches(rng, files):
        for outcome, file in zip(store.append_files(batch, now=NOW, checkpoint=False), batch, strict=True):
            expected = twin.append(naive_file(file))
            assert outcome.already_known == (expected is None)
            assert (outcome.new, outcome.revised, outcome.unchanged) == (expected or (0, 0, len(file.value)))
            assert outcome.rows_read == outcome.new + outcome.revised + outcome.unchanged + outcome.rejected
    assert current(store) == twin.content()
    assert seen(store) == value_and_flag(twin.content())
    history = store.rows(
        """
        select s.key, epoch(h.ts)::bigint, h.value, h.flag
        from reading_history h join series s on s.id = h.series_id
        """
    )
    assert sorted(history, key=repr) == sorted(twin.losers, key=repr)
    for upto in range(len(twin.ledger) + 1):
        assert seen(store, upto) == value_and_flag(twin.content(upto)), f"as of ingest {upto}"
        changed = {key: int(first.timestamp()) for key, first in store.changed_since(upto).items()}
        assert changed == twin.changed_since(upto), f"changed since ingest {upto}"


@pytest.mark.parametrize("seed", range(4))
def test_order_repetition_and_batching_of_files_leave_the_readings_alone(tmp_path, new_store, seed):
    rng = np.random.default_rng(100 + seed)
    files = random_files(rng, 10)
    contents = []
    for i in range(4):
        order = rng.permutation(np.concatenate([np.arange(10), rng.integers(0, 10, size=i)]))
        with open_store(shutil.copyfile(new_store, tmp_path / f"{i}.duckdb")) as store:
            for batch in in_batches(rng, [files[j] for j in order]):
                store.append_files(batch, now=NOW, checkpoint=False)
            contents.append(current(store))
    assert len(contents[0]) > 8
    assert all(content == contents[0] for content in contents)


@pytest.mark.parametrize("seed", range(3))
def test_state_as_of_an_ingest_is_the_state_recorded_after_it(store, seed):
    rng = np.random.default_rng(200 + seed)
    recorded = {}
    for file in random_files(rng, 15):
        (outcome,) = store.append_files([file], now=NOW, checkpoint=False)
        recorded[outcome.ingest_id] = current(store)
    assert len(recorded) == 15
    assert store.value("select count(*) from reading_confirmation") > 0
    for ingest_id, content in recorded.items():
        assert seen(store, ingest_id) == value_and_flag(content)
        assert states(store, ingest_id) == content, "stage and result time too"


def states(store, upto):
    """(series, hour) -> (value, flag, stage, result time) as after an ingest."""
    rows = store.rows(
        f"""
        select s.key, epoch(r.ts)::bigint, r.value, r.flag, r.stage, epoch(r.result_time)::bigint
        from ({STATES_AS_OF}) r join series s on s.id = r.series_id
        """,
        {"upto": upto},
    )
    content = {(key, ts): tuple(rest) for key, ts, *rest in rows}
    assert len(content) == len(rows), "an hour has two states"
    return content


def one_delivery_an_hour(rng, number):
    """A file that names no hour twice, with a result time of its own."""
    hours = [(key, hour) for key in KEYS for hour in range(6)]
    chosen = rng.choice(len(hours), size=rng.integers(3, 12), replace=False)
    return [
        {
            "series": hours[i][0],
            "hour": hours[i][1],
            "value": [None, 0.0, 1.0, 2.0][rng.integers(4)],
            "flag": int(rng.choice([1, 3])),
            "stage": int(rng.integers(3)),
            "result_time": FIRST_HOUR + number,
        }
        for i in chosen
    ]


def split(rng, readings, name):
    """The readings of a file in one to three files, some of them in two of these."""
    piece = rng.integers(rng.integers(1, 4), size=len(readings))
    again = rng.random(len(readings)) < 0.2
    parts = [[r for r, p, a in zip(readings, piece, again, strict=True) if p == i or a] for i in range(3)]
    return [parsed_file(part, name=f"{name}-{i}.csv") for i, part in enumerate(parts) if part]


@pytest.mark.parametrize("seed", range(4))
def test_splitting_overlapping_and_shuffling_files_leaves_readings_and_history_complete(
    tmp_path, new_store, seed
):
    rng = np.random.default_rng(300 + seed)
    deliveries = [one_delivery_an_hour(rng, number) for number in range(10)]
    delivered = {
        (r["series"], FIRST_HOUR + 3600 * r["hour"], r["value"], r["flag"]) for d in deliveries for r in d
    }
    contents = []
    for i in range(3):
        files = [part for n, d in enumerate(deliveries) for part in split(rng, d, f"feed/{n}")]
        files = [files[j] for j in rng.permutation(len(files))]
        with open_store(shutil.copyfile(new_store, tmp_path / f"{i}.duckdb")) as store:
            for batch in in_batches(rng, files):
                store.append_files(batch, now=NOW, checkpoint=False)
            content = current(store)
            lost = store.rows(
                """
                select s.key, epoch(h.ts)::bigint, h.value, h.flag
                from reading_history h join series s on s.id = h.series_id
                """
            )
            kept = {(*key, value, flag) for key, (value, flag, *_) in content.items()}
            assert kept | set(lost) == delivered
            assert store.verify() == []
        contents.append(content)
    assert len(contents[0]) > 12
    assert contents[1] == contents[0]
    assert contents[2] == contents[0]


def deliver(store, value, *, flag=1, stage=1, result_time=0, line=2):
    reading = {
        "series": KEYS[0],
        "hour": 0,
        "value": value,
        "flag": flag,
        "stage": stage,
        "result_time": FIRST_HOUR + result_time,
        "line": line,
    }
    (outcome,) = store.append_files([parsed_file([reading])], now=NOW, checkpoint=False)
    return outcome.new, outcome.revised, outcome.unchanged


@pytest.mark.parametrize(
    ("stronger", "weaker"),
    [
        ({"stage": 2, "result_time": 0}, {"stage": 1, "result_time": 99}),
        ({"result_time": 5}, {"result_time": 4, "line": 99}),
    ],
)
@pytest.mark.parametrize("stronger_first", [True, False])
def test_verified_outranks_preliminary_and_later_outranks_earlier_result(
    store, stronger, weaker, stronger_first
):
    deliveries = [(7.0, stronger), (8.0, weaker)]
    for value, how in deliveries if stronger_first else deliveries[::-1]:
        deliver(store, value, **how)
    assert [value for value, *_ in current(store).values()] == [7.0]
    assert store.rows("select value from reading_history") == [(8.0,)]


def test_later_line_wins_within_one_file(store):
    rows = [{"series": KEYS[0], "hour": 0, "value": v} for v in (1.0, 2.0, 3.0)]
    (outcome,) = store.append_files([parsed_file(rows)], now=NOW)
    assert (outcome.new, outcome.revised, outcome.unchanged) == (1, 2, 0)
    assert [value for value, *_ in current(store).values()] == [3.0]
    assert sorted(store.rows("select value from reading_history")) == [(1.0,), (2.0,)]


def test_a_changed_flag_alone_is_a_revision_and_missing_equals_missing(store):
    assert deliver(store, 1.0) == (1, 0, 0)
    assert deliver(store, 1.0, flag=3, result_time=1) == (0, 1, 0)
    assert deliver(store, None, flag=9, result_time=2) == (0, 1, 0)
    assert deliver(store, None, flag=9, result_time=3) == (0, 0, 1)
    assert store.value("select count(*) from reading where value is null") == 1
    assert store.value("select count(*) from reading where isnan(value)") == 0


def test_confirmation_by_a_later_stage_changes_no_value_but_resists_an_earlier_stage(store):
    deliver(store, 5.0, stage=1)
    assert deliver(store, 5.0, stage=2) == (0, 0, 1)
    assert store.changed_since(1) == {}
    assert deliver(store, 6.0, stage=1, result_time=50) == (0, 1, 0)
    assert store.changed_since(1) == {}, "the verified value stands"
    assert [(v, stage) for v, _, stage, _ in current(store).values()] == [(5.0, 2)]
    assert deliver(store, 6.5, stage=2, result_time=51) == (0, 1, 0)
    assert store.changed_since(1) == {KEYS[0]: from_seconds(FIRST_HOUR)}


def test_outranks_compares_one_property_after_the_other_and_puts_missing_last():
    def one(stage=1, result_time=0, file_rank=0, line=2, flag=1, value=0.0):
        return np.array([(1, 0, value, flag, stage, result_time, file_rank, line, 1, 1)], READING)

    ascending = [
        one(value=np.nan),
        one(value=-1.0),
        one(value=2.0),
        one(flag=3, value=-9.0),
        one(line=3),
        one(file_rank=2**63 + 5, line=0),
        one(result_time=1),
        one(stage=2, result_time=-5),
    ]
    for i, a in enumerate(ascending):
        for j, b in enumerate(ascending):
            assert outranks(a, b)[0] == (i > j), (i, j)


@pytest.mark.parametrize("seed", range(5))
def test_groups_are_hours_of_series_with_their_earliest_delivery(seed):
    rng = np.random.default_rng(seed)
    rows = np.zeros(40, READING)
    rows["series_id"] = rng.integers(1, 4, size=40)
    rows["ts"] = rng.integers(-3, 4, size=40) * 3600
    group, first = group_by_hour(rows)
    keys = list(zip(rows["series_id"].tolist(), rows["ts"].tolist(), strict=True))
    names = sorted(set(keys))
    assert group.tolist() == [names.index(key) for key in keys]
    assert first.tolist() == [keys.index(name) for name in names]
