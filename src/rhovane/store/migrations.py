"""The tables of the store, as numbered steps that are applied once each.

A store remembers the steps it has had in the table ``migration``; a step and its record commit
together, so a store is never between two steps. Steps are only ever added at the end. Tables have no
keys and no indexes: they would cost ten times the space and several times the loading time, and what
they would guarantee is guaranteed by the single writer (measured with DuckDB 2.0.1).

Times are naive UTC. A reading's ``ts`` is the start of its interval.
"""

from __future__ import annotations

from typing import NamedTuple

import duckdb

from rhovane.model import RhovaneError, StoreDamaged


class Migration(NamedTuple):
    """One step from an older to a newer set of tables."""

    number: int
    name: str
    sql: str


_READINGS = """
create table series (
    id integer, key varchar, station varchar, quantity varchar, unit varchar, kind varchar,
    step_minutes integer, label varchar
);
create table ingest (
    id integer, sha256 varchar, file_rank ubigint, source varchar, path varchar, size_bytes bigint,
    rows_read bigint, rows_new bigint, rows_revised bigint, rows_unchanged bigint, rows_rejected bigint,
    first_ts timestamp, last_ts timestamp, ingested_at timestamp
);
create table feed_file (
    path varchar, source varchar, size_bytes bigint, mtime_ns bigint, sha256 varchar, ingest_id integer,
    seen_at timestamp
);
create table reading (
    series_id integer, ts timestamp, value double, flag tinyint, stage tinyint, result_time timestamp,
    line bigint, ingest_id integer, confirmed_by integer
);
create table reading_history (
    series_id integer, ts timestamp, value double, flag tinyint, stage tinyint, result_time timestamp,
    line bigint, ingest_id integer, confirmed_by integer, superseded_by integer
);
create table rejected (
    ingest_id integer, path varchar, line bigint, column_name varchar, raw varchar, reason varchar
);
"""

_RESULTS = """
create table night (
    id integer, kind varchar, as_of date, started timestamp, finished timestamp, outcome varchar,
    steps json, counts json, settings_hash varchar, program_version varchar, data_version integer
);
create table label (id integer, text varchar);
create table window_result (
    pair integer, window_end timestamp, lag integer, statistic double, n_pairs integer, coverage double,
    n_effective double, p_value double, low double, high double, reason integer, night_id integer
);
create table window_result_history (
    pair integer, window_end timestamp, lag integer, statistic double, n_pairs integer, coverage double,
    n_effective double, p_value double, low double, high double, reason integer, night_id integer,
    superseded_by integer
);
create table evidence (
    pair integer, recipe integer, day date, innovation double, innovation_hours double, shape double,
    shape_hours double, course double, course_hours double, later_minus_2 double, later_minus_1 double, later_0 double, later_plus_1 double,
    later_plus_2 double, night_id integer
);
create table evidence_history (
    pair integer, recipe integer, day date, innovation double, innovation_hours double, shape double,
    shape_hours double, course double, course_hours double, later_minus_2 double, later_minus_1 double, later_0 double, later_plus_1 double,
    later_plus_2 double, night_id integer, superseded_by integer
);
"""

_ALERTS = """
create table alert (id integer, pair_key varchar, day date, night_id integer, payload json);
create table alert_event (
    seq integer, alert_id integer, happened_at timestamp, kind varchar, who varchar, note varchar, payload json,
    previous_hash varchar, hash varchar
);
create table site_log (
    id integer, subject varchar, from_ts timestamp, to_ts timestamp, what varchar, who varchar,
    written_at timestamp
);
create table delivery (
    id varchar, channel varchar, night_id integer, payload json, created_at timestamp,
    delivered_at timestamp, attempts integer, last_error varchar
);
"""

_SITE_LOG = """
alter table site_log add column readings varchar;
alter table site_log add column acts_from date;
alter table site_log add column withdrawn_at timestamp;
alter table site_log add column withdrawn_from date;
"""

_SETTINGS = """
create table settings_used (hash varchar, text varchar);
"""

# Of confirmations before this step only the last is known: its stage and result time stand for the earlier ones.
_CONFIRMATIONS = """
create table reading_confirmation (
    series_id integer, ts timestamp, value double, flag tinyint, stage tinyint, result_time timestamp,
    line bigint, ingest_id integer, confirmed_by integer, replaced_by integer
);
insert into reading_confirmation
    select series_id, ts, value, flag, stage, result_time, line, ingest_id, ingest_id, confirmed_by
    from (select * from reading union all by name select * exclude superseded_by from reading_history)
    where confirmed_by > ingest_id;
"""

_SEGMENTS = """
create table segment (
    series_id integer, first_day date, what varchar, recorded_at timestamp, withdrawn_at timestamp
);
"""

_NOTES = """
create table data_note (
    id integer, version integer, subject varchar, kind varchar, begins timestamp, ends timestamp, state varchar,
    facts json, night_id integer
);
"""

_ATTEMPTS = "alter table delivery add column tried_at timestamp"

MIGRATIONS = (
    Migration(1, "readings and their ledger", _READINGS),
    Migration(2, "nights and their results", _RESULTS),
    Migration(3, "alert log, site log and delivery", _ALERTS),
    Migration(4, "site log: what becomes of the readings, and since when", _SITE_LOG),
    Migration(5, "settings that nights ran with", _SETTINGS),
    Migration(6, "readings before their confirmation", _CONFIRMATIONS),
    Migration(7, "segments of series", _SEGMENTS),
    Migration(8, "data notes", _NOTES),
    Migration(9, "attempts at delivery", _ATTEMPTS),
)


def latest_known() -> int:
    """Number of the last step that this program knows."""
    return MIGRATIONS[-1].number


def applied_migrations(connection: duckdb.DuckDBPyConnection) -> list[int]:
    """Numbers of the steps a store has had, ascending; empty for a store without tables."""
    try:
        found = connection.execute("select number from migration order by number").fetchall()
    except duckdb.CatalogException:
        return []
    return [number for (number,) in found]


def migrate(
    connection: duckdb.DuckDBPyConnection,
    where: str,
    *,
    read_only: bool,
    steps: tuple[Migration, ...] = MIGRATIONS,
    upto: int | None = None,
) -> None:
    """Bring the tables up to date (or to the step ``upto``), each missing step in its own transaction.

    Raises
    ------
    StoreDamaged
        The store has a step that this program does not know: a newer program wrote it.
    RhovaneError
        The store lacks a step and was opened for reading only.
    """
    had = applied_migrations(connection)
    latest = steps[-1].number
    if had and had[-1] > latest:
        raise StoreDamaged(
            f"{where} was written by a newer version of the program (tables of step {had[-1]}; this version "
            f"knows steps up to {latest}). Nothing was changed. Install the newer version, or restore a backup "
            "made with this one."
        )
    missing = [step for step in steps if step.number not in had and (upto is None or step.number <= upto)]
    if missing and read_only:
        raise RhovaneError(
            f"{where} has tables of step {had[-1] if had else 0}, but this version needs step {latest}. "
            "Run a command that writes to the store, such as `rhovane ingest`, to bring it up to date."
        )
    for step in missing:
        connection.begin()
        try:
            connection.execute(
                "create table if not exists migration (number integer, name varchar, applied_at timestamp)"
            )
            connection.execute(step.sql)
            connection.execute(
                "insert into migration values (?, ?, now()::timestamp)", [step.number, step.name]
            )
        except duckdb.Error:
            connection.rollback()
            raise
        connection.commit()
