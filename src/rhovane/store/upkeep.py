"""Is the store whole: every value read, and every law that its tables must keep."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, NamedTuple

from rhovane.model import StoreDamaged
from rhovane.store.alert_log import AlertLog
from rhovane.store.manifest import losses, manifest_path, read_manifest

FIRST_FAULTS = 5  # faults of one check that are told by name

RESTORE = (
    "Keep a copy of the file, put the latest backup in its place (`rhovane restore`) and run `rhovane nightly`: "
    "it takes in what the backup lacks."
)
REPORT = (
    "The file can be read, but a rule of the program was broken. Keep a copy of the file, put the latest "
    "backup that verifies in its place (`rhovane verify --file`, `rhovane restore`), and run `rhovane nightly`."
)


@dataclass(frozen=True)
class Check:
    """One thing that was checked: what, how much of it, the first faults (none when well), and the remedy."""

    what: str
    extent: str
    faults: tuple[str, ...] = ()
    remedy: str = ""

    def as_json(self) -> dict[str, Any]:
        """Plain values for ``--json``."""
        return {
            "what": self.what,
            "extent": self.extent,
            "faults": list(self.faults),
            "remedy": self.remedy,
        }


class _Law(NamedTuple):
    """Counts of the ledger that must be found in a table, ingest by ingest: columns id, held, counted."""

    what: str
    sql: str


_LEDGER_LAWS = (
    _Law(
        "rows read = new + revised + unchanged + rejected",
        "select id, rows_read, rows_new + rows_revised + rows_unchanged + rows_rejected from ingest",
    ),
    _Law(
        "rejected rows of each file = quarantine",
        """
        select i.id, coalesce(r.n, 0), i.rows_rejected from ingest i
        left join (select ingest_id, count(*) as n from rejected where line > 0 group by all) r on r.ingest_id = i.id
        """,
    ),
    _Law(
        "new rows of all files = readings",
        "select 0, (select count(*) from reading), coalesce(sum(rows_new), 0) from ingest",
    ),
    _Law(
        "revised rows of all files = superseded readings",
        "select 0, (select count(*) from reading_history), coalesce(sum(rows_revised), 0) from ingest",
    ),
)

_KEYS = {
    "series": ("id", "key"),
    "ingest": ("id", "source, sha256"),
    "feed_file": ("path",),
    "reading": ("series_id, ts",),
    "night": ("id",),
    "label": ("id", "text"),
    "window_result": ("pair, window_end, lag",),
    "evidence": ("pair, recipe, day",),
    "alert": ("id",),
    "alert_event": ("seq",),
}

_REFERENCES = (
    ("reading", "series_id", "series"),
    ("reading", "ingest_id", "ingest"),
    ("reading", "confirmed_by", "ingest"),
    ("reading_history", "superseded_by", "ingest"),
    ("reading_confirmation", "replaced_by", "ingest"),
    ("rejected", "ingest_id", "ingest"),
    ("window_result", "night_id", "night"),
    ("window_result", "pair", "label"),
    ("evidence", "night_id", "night"),
    ("alert", "night_id", "night"),
    ("alert_event", "alert_id", "alert"),
)


class Upkeep(AlertLog):
    """Checking of the whole store."""

    def verify(self) -> list[str]:
        """All faults of :meth:`checks` in words; none when the store is whole."""
        return [fault for check in self.checks() for fault in check.faults]

    def checks(self) -> Iterator[Check]:
        """Read every value of every table and check every law; each check as soon as it is done.

        A table that cannot be read is a fault of its own check; later checks that need it fail in turn.
        """
        yield self._checked("every value of every table", self._read_everything, RESTORE)
        yield self._checked("the manifest beside the store", self._manifest, RESTORE)
        yield self._checked("no row twice", self._repeated_keys, REPORT)
        yield self._checked("the counts of the ingest ledger", self._ledger, REPORT)
        yield self._checked("what rows refer to", self._references, REPORT)
        yield self._checked("the chain of the alert log", self._chain, REPORT)

    def _checked(self, what: str, look: Any, remedy: str) -> Check:
        try:
            extent, faults = look()
        except StoreDamaged as error:
            extent, faults = "could not be read", [str(error).split("\n", 1)[0]]
            remedy = RESTORE
        more = [f"and {len(faults) - FIRST_FAULTS} more"] if len(faults) > FIRST_FAULTS else []
        return Check(what, extent, (*faults[:FIRST_FAULTS], *more), remedy if faults else "")

    def _read_everything(self) -> tuple[str, list[str]]:
        tables, rows, faults = self.tables_of(), 0, []
        for table in tables:
            try:
                rows += self.rows(f"select count(*), bit_xor(hash(columns(*))) from {table}")[0][0]
            except StoreDamaged as error:
                faults.append(f"table {table}: {str(error).split(chr(10), 1)[0]}")
        return f"{len(tables)} tables, {rows} rows", faults

    def _manifest(self) -> tuple[str, list[str]]:
        expected = read_manifest(self.path)
        if expected is None:
            return f"{manifest_path(self.path).name} is not there; nothing to compare with", []
        held = self.holds()
        return f"{held.ingest_rows} ingests, {held.readings} readings", losses(held, expected)

    def _repeated_keys(self) -> tuple[str, list[str]]:
        faults = []
        for table, keys in _KEYS.items():
            for key in keys:
                found = self.rows(
                    f"""
                    select count(*), sum(n), first(struct_pack({", ".join(f"{k} := {k}" for k in key.split(", "))}))
                    from (select {key}, count(*) as n from {table} group by all having count(*) > 1)
                    """
                )
                n_keys, n_rows, first = found[0]
                if n_keys:
                    faults.append(f"{table}: {n_rows} rows share {n_keys} keys ({key}), the first {first}")
        return f"{len(_KEYS)} tables", faults

    def _ledger(self) -> tuple[str, list[str]]:
        faults = []
        for law in _LEDGER_LAWS:
            found = self.rows(
                f"select * from ({law.sql}) t(id, held, counted) where held <> counted order by id"
            )
            for number, held, counted in found:
                where = f"ingest {number}: " if number else ""
                faults.append(f"{where}{law.what}: {held} and {counted}")
        return f"{self.value('select count(*) from ingest')} files, {len(_LEDGER_LAWS)} laws", faults

    def _references(self) -> tuple[str, list[str]]:
        faults = []
        for table, column, other in _REFERENCES:
            lost = self.value(
                f"select count(*) from {table} where {column} is not null and {column} not in (select id from {other})"
            )
            if lost:
                faults.append(f"{table}: {lost} rows whose {column} is not in {other}")
        return f"{len(_REFERENCES)} columns", faults

    def _chain(self) -> tuple[str, list[str]]:
        place = self.verify_alert_chain()
        n_events = self.value("select count(*) from alert_event")
        faults = [] if place is None else [f"the log is not as it was written from event {place} on"]
        return f"{n_events} events", faults
