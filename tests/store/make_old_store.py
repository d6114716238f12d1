"""Write the store of this version down as SQL, so that later versions are tested on it.

    PYTHONPATH=src:tests python tests/store/make_old_store.py

makes ``tests/store/stores/step_NNN.sql`` for the newest migration: its tables, with some rows in each. Run it once
after adding a migration and commit the file; a file that exists is never changed. Text, not a database file: a
database file would be bound to the version of DuckDB that wrote it, and could not be reviewed. ``--step N`` writes
an earlier step, from the rows that its tables would have held.
"""

from __future__ import annotations

import argparse
import datetime as dt
import tempfile
from pathlib import Path

import duckdb
import numpy as np

from rhovane.model import RejectedRow, Segment, Series
from rhovane.store import EVIDENCE_COLUMNS, NewAlert, NewAlertEvent, Store, open_store
from rhovane.store.migrations import latest_known, migrate
from store.building import KEYS, NOW, SERIES, parsed_file, random_files

STORES = Path(__file__).parent / "stores"
SAMPLES = {
    **dict.fromkeys(("TINYINT", "SMALLINT", "INTEGER", "BIGINT", "UBIGINT", "DOUBLE", "BOOLEAN"), 1),
    "VARCHAR": "x",
    "JSON": "{}",
    "DATE": NOW.date(),
    "TIMESTAMP": NOW.replace(tzinfo=None),
}


def fill(store: Store) -> None:
    """Some rows in every table: by the program where it writes them, samples in tables that are still unused."""
    store.ensure_series([*SERIES, Series("MILLBRIDGE.rain", "mm", "accumulated", label="tipping bucket")])
    store.keep_segments([Series(KEYS[0], "ug/m3", segments=(Segment(NOW.date(), "new inlet"),))], now=NOW)
    files = random_files(np.random.default_rng(11), 10)
    stages = [
        parsed_file(
            [{"series": KEYS[0], "hour": 50, "value": 4.5, "stage": stage}], name=f"feed/stage {stage}.csv"
        )
        for stage in (0, 1, 2)
    ]
    broken = parsed_file(
        [], name="feed/it's broken.csv", rejected=[RejectedRow(3, "value", '"a;b', "not a number")]
    )
    for file in (*files, *stages, broken):
        store.append_files([file], now=NOW)
    for step in range(2):
        moment = NOW + dt.timedelta(days=step)
        night = store.begin_night(
            kind="nightly", as_of=moment.date(), now=moment, settings_hash="s", program_version="0"
        )
        windows = {"window_end": [3600, 7200], "lag": 0, "n_pairs": 9, "coverage": 1.0, "n_effective": 5.0}
        windows |= {"statistic": [0.1 * step, float("nan")], "p_value": 0.1, "low": -0.1, "high": 0.9}
        store.write_windows(night, {"pair_key": ["a~b", "a~b"], "reason": ["", "constant"], **windows})
        day = {"pair_key": ["a~b"], "recipe_hash": "r", "day": NOW.date()}
        store.write_evidence(night, dict.fromkeys(EVIDENCE_COLUMNS, float(step)) | day)
        (number,) = store.append_alerts([NewAlert("a~b", moment.date(), night, {"direction": "weaker"})])
        store.append_alert_events(
            [
                NewAlertEvent(number, moment, "raised", "rhovane"),
                NewAlertEvent(number, moment, "note", "ana", "it's"),
            ]
        )
        store.finish_night(night, now=moment, outcome="complete", steps=[{"step": "x"}], counts={"n": step})
    for table in store.tables_of():
        if not store.value(f"select count(*) from {table}"):
            kinds = store.rows(
                "select data_type from duckdb_columns() where table_name = ? order by column_index", [table]
            )
            store.execute(
                f"insert into {table} values ({', '.join('?' * len(kinds))})",
                [SAMPLES[kind] for (kind,) in kinds],
            )


def as_sql(connection: duckdb.DuckDBPyConnection) -> str:
    """All tables with their rows as SQL that any version of DuckDB can run."""
    lines = []
    for name, sql in connection.execute(
        "select table_name, sql from duckdb_tables() order by table_name"
    ).fetchall():
        lines.append(sql)
        rows = connection.execute(f"select columns(*)::varchar from {name} order by all").fetchall()
        values = [
            ", ".join("null" if v is None else "'" + v.replace("'", "''") + "'" for v in row) for row in rows
        ]
        lines += [f"insert into {name} values ({one});" for one in values]
    return "\n".join(lines) + "\n"


def old_store(step: int) -> str:
    """The SQL of a filled store with the tables of a step."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "new.duckdb"
        with open_store(path) as store:
            fill(store)
        with duckdb.connect() as old:
            migrate(old, "old", read_only=False, upto=step)
            old.execute(f"attach '{path}' as now (read_only)")
            old.execute("update migration set applied_at = timestamp '2024-05-01 00:00:00'")
            for (table,) in old.execute(
                "select table_name from duckdb_tables() where database_name = 'memory'"
            ).fetchall():
                if table == "migration":
                    continue
                found = old.execute(
                    "select column_name from duckdb_columns() where database_name = 'memory' and table_name = ? "
                    "order by column_index",
                    [table],
                ).fetchall()
                columns = ", ".join(name for (name,) in found)
                old.execute(f"insert into {table} ({columns}) select {columns} from now.{table}")
            old.execute("detach now")
            return as_sql(old)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument(
        "--step", type=int, default=latest_known(), help="number of the migration; default: the newest"
    )
    step = parser.parse_args().step
    target = STORES / f"step_{step:03d}.sql"
    if target.exists():
        parser.error(f"{target} exists; a store of an earlier version is never changed")
    target.write_text(old_store(step), encoding="utf-8")
    print(f"{target}: {len(target.read_text(encoding='utf-8').splitlines())} lines")


if __name__ == "__main__":
    main()
