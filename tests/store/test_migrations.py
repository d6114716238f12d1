"""Stores of every earlier version, rebuilt from their SQL, are brought up to date with all their rows."""

import duckdb
import pytest

from rhovane.model import RhovaneError, StoreDamaged
from rhovane.store import open_store
from rhovane.store.migrations import MIGRATIONS, Migration, applied_migrations, latest_known, migrate
from store.building import KEYS, NOW, current, parsed_file, seen
from store.make_old_store import STORES

STEPS = [int(path.stem.removeprefix("step_")) for path in sorted(STORES.glob("step_*.sql"))]
LATEST = latest_known()


def columns_of(connection):
    """(table, column, type) of all tables, in order."""
    return connection.execute(
        "select table_name, column_name, data_type from duckdb_columns() where not internal order by table_name, column_index"
    ).fetchall()


def rows_of(connection, columns):
    """The rows of each table, in these columns alone."""
    tables = {}
    for table, column, _ in columns:
        tables.setdefault(table, []).append(column)
    return {
        table: connection.execute(f"select {', '.join(names)} from {table} order by all").fetchall()
        for table, names in tables.items()
        if table != "migration"
    }


@pytest.fixture
def old(path, request):
    """A store as an earlier version left it."""
    with duckdb.connect(str(path)) as connection:
        sql = (STORES / f"step_{request.param:03d}.sql").read_text(encoding="utf-8")
        connection.execute(f"begin; {sql}; commit")
    return path


def test_every_step_has_its_store_written_down():
    assert list(range(1, LATEST + 1)) == STEPS, (
        "run PYTHONPATH=src:tests python tests/store/make_old_store.py and commit its file"
    )


@pytest.mark.parametrize("old", STEPS, indirect=True)
def test_older_store_is_brought_up_to_date_with_all_its_rows(old, tmp_path):
    with duckdb.connect(str(old), read_only=True) as connection:
        columns = columns_of(connection)
        before = rows_of(connection, columns)
    assert all(before.values()), "a table without rows tests nothing"
    with open_store(old) as store:
        assert rows_of(store._connection, columns) == before
        assert store.verify() == []
        upto = store.last_ingest_id()
        for ingest_id in range(upto + 1):
            store.export_readings(tmp_path / "then.parquet", max_ingest_id=ingest_id)
            found = store.rows(
                f"select series, epoch(hour_start_utc)::bigint, value from read_parquet('{tmp_path / 'then.parquet'}')"
            )
            assert {(k, t): v for k, t, v in found} == {k: v for k, (v, _) in seen(store, ingest_id).items()}
        held = current(store)
        late = parsed_file([{"series": KEYS[1], "hour": 99, "value": 7.0}])
        (outcome,) = store.append_files([late], now=NOW)
        assert (outcome.ingest_id, outcome.new) == (upto + 1, 1)
        assert current(store).items() > held.items()
        assert store.verify() == []
        with open_store(tmp_path / "fresh.duckdb") as fresh:
            assert columns_of(store._connection) == columns_of(fresh._connection)
            assert applied_migrations(store._connection) == applied_migrations(fresh._connection)


def test_confirmations_before_they_were_kept_stand_with_their_last_state(path):
    with duckdb.connect(str(path)) as connection:
        migrate(connection, "old", read_only=False, upto=3)
        connection.execute(
            """
            insert into reading values (1, timestamp '2024-01-01', 5, 1, 2, timestamp '2024-02-01', 2, 1, 3);
            insert into reading_history values
                (1, timestamp '2024-01-02', 6, 1, 1, timestamp '2024-01-03', 2, 1, 2, 4),
                (1, timestamp '2024-01-02', 7, 1, 1, timestamp '2024-01-03', 2, 2, 2, 2)
            """
        )
        migrate(connection, "old", read_only=False)
        found = connection.execute(
            "select value, stage, ingest_id, confirmed_by, replaced_by from reading_confirmation order by value"
        ).fetchall()
    assert found == [(5.0, 2, 1, 1, 3), (6.0, 1, 1, 1, 2)]


def test_migrations_are_numbered_without_gaps_and_applied_once(path):
    assert [step.number for step in MIGRATIONS] == list(range(1, len(MIGRATIONS) + 1))
    for _ in range(2):
        with open_store(path) as store:
            assert [n for (n,) in store.rows("select number from migration")] == list(range(1, LATEST + 1))


def test_tables_have_neither_keys_nor_indexes(store):
    assert store.rows("select * from duckdb_constraints()") == []
    assert store.rows("select * from duckdb_indexes()") == []


def test_failing_step_leaves_neither_its_tables_nor_its_record(store):
    broken = Migration(LATEST + 1, "broken", "create table extra (a integer); create table extra (b integer)")
    store.close()
    with duckdb.connect(str(store.path)) as connection:
        with pytest.raises(duckdb.Error):
            migrate(connection, "store", read_only=False, steps=(*MIGRATIONS, broken))
        assert applied_migrations(connection)[-1] == LATEST
        assert connection.execute("select 1 from duckdb_tables() where table_name = 'extra'").fetchall() == []


@pytest.mark.parametrize("old", [LATEST - 1], indirect=True)
def test_older_store_opened_for_reading_says_how_to_bring_it_up_to_date(old):
    before = old.read_bytes()
    with pytest.raises(RhovaneError, match=rf"step {LATEST - 1}.*needs step {LATEST}.*rhovane ingest"):
        open_store(old, read_only=True)
    assert old.read_bytes() == before


@pytest.mark.parametrize("read_only", [True, False])
@pytest.mark.parametrize("old", [LATEST], indirect=True)
def test_store_of_a_newer_program_is_refused_unchanged(old, read_only):
    with duckdb.connect(str(old)) as connection:
        connection.execute("insert into migration values (999, 'from the future', now()::timestamp)")
    before = old.read_bytes()
    with pytest.raises(StoreDamaged, match=r"newer version.*step 999.*Install the newer version"):
        open_store(old, read_only=read_only)
    assert old.read_bytes() == before
