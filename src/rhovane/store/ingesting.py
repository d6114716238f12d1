"""Parsed feed files into readings: ledger, precedence, history and quarantine in one transaction."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from datetime import datetime

import numpy as np

from rhovane.model import IngestOutcome, ParsedFile, RhovaneError, Series
from rhovane.store.clock import from_seconds, microseconds, naive_utc, seconds_of, timestamps
from rhovane.store.deliveries import (
    Delivery,
    count_rejected_rows,
    file_rank,
    outcome_of,
    records_of,
    span_of_file,
    table_of,
    text_columns,
)
from rhovane.store.precedence import (
    NEW,
    READING,
    REVISED,
    UNCHANGED,
    Records,
    Settlement,
    group_by_hour,
    settle,
)
from rhovane.store.reading import KNOWN_FILES
from rhovane.store.session import Session

_ROW = "series_id, ts, value, flag, stage, result_time, line, ingest_id, confirmed_by"


_SERIES_IDS = "select key, id from series"


class ReadingWriter(Session):
    """Writing of series and readings."""

    _made_known: Sequence[Series] = ()
    _contents: dict[tuple[str, str], int] | None = (
        None  # (source, sha256) → ingest number, of the whole ledger
    )
    _appended = False

    def ensure_series(self, series: Sequence[Series]) -> dict[str, int]:
        """Make series known and return the number of each by its key; a changed label is taken over.

        Raises
        ------
        RhovaneError
            A known series has another unit, kind or step than before: its readings cannot be mixed.
        """
        if series == self._made_known:
            return self.remembered(_SERIES_IDS)
        known = {
            key: rest
            for key, *rest in self.rows("select key, id, unit, kind, step_minutes, label from series")
        }
        fresh = []
        relabelled = []
        ids: dict[str, int] = {}
        last = max((row[0] for row in known.values()), default=0)
        for one in series:
            if one.key in ids:
                continue
            if one.key not in known:
                last += 1
                ids[one.key] = last
                fresh.append(
                    (
                        last,
                        one.key,
                        one.station,
                        one.quantity,
                        one.unit,
                        one.kind,
                        one.step_minutes,
                        one.label,
                    )
                )
                continue
            number, unit, kind, step, label = known[one.key]
            for word, stored, given in (
                ("unit", unit, one.unit),
                ("kind", kind, one.kind),
                ("step in minutes", step, one.step_minutes),
            ):
                if stored != given:
                    raise RhovaneError(
                        f"{one.key}: {word} is {given!r}, but its readings are stored with {word} {stored!r}. "
                        f"Set it back to {stored!r}, or give the series a new key. Nothing was changed."
                    )
            ids[one.key] = number
            if label != one.label:
                relabelled.append((one.label, number))
        if fresh or relabelled:
            with self.transaction():
                for row in fresh:
                    self.execute("insert into series values (?, ?, ?, ?, ?, ?, ?, ?)", row)
                for change in relabelled:
                    self.execute("update series set label = ? where id = ?", change)
        self._remembered.pop(_SERIES_IDS, None)
        self._made_known = list(series)
        return ids

    def append_files(
        self, files: Sequence[ParsedFile], *, now: datetime, checkpoint: bool = True
    ) -> list[IngestOutcome]:
        """Add parsed files to the store, all of them or none; the outcome of each, in their order.

        A file whose content (sha256) the ledger holds already for the same source adds nothing. Every
        other file gets a ledger row and counts as if the files had come one after the other: see
        :mod:`rhovane.store.precedence` for what is new, revised or unchanged. For each outcome
        ``rows_read == new + revised + unchanged + rejected``.

        Parameters
        ----------
        now : the moment to record
        checkpoint : fold the write-ahead log into the file afterwards; False leaves that to a later call

        Raises
        ------
        RhovaneError
            A file names an unknown series, holds an infinite value, or its columns or counts contradict
            each other. Nothing of any file was kept.
        """
        with self.transaction():
            known = self._known_contents(files)
            next_id = self.value("select coalesce(max(id), 0) + 1 from ingest")
            fresh: dict[tuple[str, str], Delivery] = {}
            for file in files:
                content = (file.source, file.sha256)
                if content not in known and content not in fresh:
                    fresh[content] = Delivery(file, next_id + len(fresh))
            deliveries = list(fresh.values())
            counts = self._settle_and_write(deliveries)
            self._write_ledger(deliveries, counts, naive_utc(now))
            outcomes = []
            told: set[tuple[str, str]] = set()
            for file in files:
                content = (file.source, file.sha256)
                if content in fresh and content not in told:
                    told.add(content)
                    number = fresh[content].ingest_id
                    outcomes.append(outcome_of(file, number, counts[number - next_id]))
                else:
                    number = known.get(content) or fresh[content].ingest_id
                    outcomes.append(outcome_of(file, number, (0, 0, len(file.value)), already_known=True))
            if self._contents is not None:
                self._contents.update({content: d.ingest_id for content, d in fresh.items()})
            self._remember_files(files, outcomes, naive_utc(now))
            if checkpoint:
                self.checkpoint_after_commit()
        return outcomes

    def _known_contents(self, files: Sequence[ParsedFile]) -> Mapping[tuple[str, str], int]:
        """Ingest number of the contents that the ledger holds: of these files, or of all there are.

        The first append asks for these files only; a second one in the same process, as in a walk, reads the
        whole ledger once, and later ones ask nothing.
        """
        if self._contents is None and not self._appended:
            self._appended = True
            found = self.rows(
                "select source, sha256, id from ingest where sha256 in (select unnest(?))",
                [[f.sha256 for f in files]],
            )
            return {(source, sha256): number for source, sha256, number in found}
        if self._contents is None:
            found = self.rows("select source, sha256, id from ingest")
            self._contents = {(source, sha256): number for source, sha256, number in found}
        return self._contents

    def _forget(self) -> None:
        super()._forget()
        self._contents = None

    def _settle_and_write(self, deliveries: Sequence[Delivery]) -> list[tuple[int, int, int]]:
        """Write the readings of all deliveries; (new, revised, unchanged) of each."""
        ids = self.remembered(_SERIES_IDS)
        parts = [records_of(delivery, ids) for delivery in deliveries]
        if not sum(map(len, parts)):
            return [(0, 0, 0)] * len(parts)
        rows = parts[0] if len(parts) == 1 else np.concatenate(parts)
        group, first = group_by_hour(rows)
        held, held_group, row_number = self._held(rows.take(first))
        result = settle(rows, group, held, held_group)
        self._write_readings(result, held_group, row_number)
        counts = []
        begin = 0
        for part in parts:
            of_file = np.bincount(result.verdict[begin : begin + len(part)], minlength=3)
            counts.append((int(of_file[NEW]), int(of_file[REVISED]), int(of_file[UNCHANGED])))
            begin += len(part)
        return counts

    def _held(self, hours: Records) -> tuple[Records, np.ndarray, np.ndarray]:
        """Current readings of the given hours, the group number of each, and where it stands in the table."""
        columns = {
            "position": np.arange(len(hours)),
            "series_id": hours["series_id"],
            "ts": timestamps(hours["ts"]),
        }
        span = [from_seconds(hours["ts"].min()), from_seconds(hours["ts"].max())]
        found = self.columns(
            """
            select w.position, r.rowid as row_number, r.series_id, r.ts, r.value, r.flag, r.stage,
                   r.result_time, i.file_rank, r.line, r.ingest_id, r.confirmed_by
            from reading r
            join staged w on w.series_id = r.series_id and w.ts = r.ts
            join ingest i on i.id = r.confirmed_by
            where r.ts between ? and ?
            """,
            [naive_utc(t) for t in span],
            columns,
        )
        held = np.empty(len(found["position"]), READING)
        for name in READING.names or ():
            held[name] = seconds_of(found[name]) if name in ("ts", "result_time") else found[name]
        return held, found["position"], found["row_number"]

    def _write_readings(self, result: Settlement, held_group: np.ndarray, row_number: np.ndarray) -> None:
        was_held = np.zeros(len(result.winner), np.bool_)
        was_held[held_group] = True
        fresh = result.winner.compress(~was_held)
        if len(fresh):
            self.execute(f"insert into reading select {_ROW} from staged", staged=table_of(fresh))
        changed = result.changed[held_group]
        if changed.any():
            self.execute(
                """
                update reading set value = c.value, flag = c.flag, stage = c.stage, line = c.line,
                    result_time = c.result_time, ingest_id = c.ingest_id, confirmed_by = c.confirmed_by
                from staged c where reading.rowid = c.row_number
                """,
                staged=table_of(result.winner.take(held_group[changed]))
                | {"row_number": row_number[changed]},
            )
        if len(result.history):
            self.execute(
                f"insert into reading_history select {_ROW}, superseded_by from staged",
                staged=table_of(result.history) | {"superseded_by": result.superseded_by},
            )
        if len(result.confirmed):
            self.execute(
                f"insert into reading_confirmation select {_ROW}, replaced_by from staged",
                staged=table_of(result.confirmed) | {"replaced_by": result.replaced_by},
            )

    def _write_ledger(
        self, deliveries: Sequence[Delivery], counts: Sequence[tuple[int, int, int]], now: datetime
    ) -> None:
        if not deliveries:
            return
        columns = text_columns(
            sha256=[d.file.sha256 for d in deliveries],
            source=[d.file.source for d in deliveries],
            path=[d.file.path for d in deliveries],
        )
        columns["id"] = np.array([d.ingest_id for d in deliveries])
        columns["file_rank"] = np.array([file_rank(d.file) for d in deliveries], np.uint64)
        columns["size_bytes"] = np.array([d.file.size_bytes for d in deliveries], np.int64)
        columns["rows_read"] = np.array([d.file.rows_read for d in deliveries], np.int64)
        for i, name in enumerate(("rows_new", "rows_revised", "rows_unchanged")):
            columns[name] = np.array([c[i] for c in counts], np.int64)
        columns["rows_rejected"] = np.array([count_rejected_rows(d.file) for d in deliveries], np.int64)
        spans = [span_of_file(d.file) for d in deliveries]
        for i, name in enumerate(("first_ts", "last_ts")):
            columns[name] = np.array(["NaT" if s is None else s[i] for s in spans], "datetime64[us]")
        self.execute(
            """
            insert into ingest select id, sha256, file_rank, source, path, size_bytes, rows_read, rows_new,
                rows_revised, rows_unchanged, rows_rejected, first_ts, last_ts, ? from staged
            """,
            [now],
            columns,
        )
        self.expect_after_commit("last_ingest_id", deliveries[-1].ingest_id)
        self.expect_after_commit("readings", 0)
        refused = [(d.ingest_id, d.file.path, row) for d in deliveries for row in d.file.rejected]
        if refused:
            columns = text_columns(
                path=[path for _, path, _ in refused],
                column_name=[row.column for *_, row in refused],
                raw=[row.raw for *_, row in refused],
                reason=[row.reason for *_, row in refused],
            )
            columns["ingest_id"] = np.array([number for number, *_ in refused])
            columns["line"] = np.array([row.line for *_, row in refused], np.int64)
            self.execute(
                "insert into rejected select ingest_id, path, line, column_name, raw, reason from staged",
                staged=columns,
            )

    def _remember_files(
        self, files: Sequence[ParsedFile], outcomes: Sequence[IngestOutcome], now: datetime
    ) -> None:
        latest = {f.path: (f, o) for f, o in zip(files, outcomes, strict=True)}
        if not latest:
            return
        all_new = False
        if KNOWN_FILES in self._remembered:
            known = self._remembered[KNOWN_FILES]
            all_new = known.keys().isdisjoint(latest)
            known.update(
                {path: (f.size_bytes, microseconds(f.modified) * 1000) for path, (f, _) in latest.items()}
            )
        pairs = list(latest.values())
        columns = text_columns(
            path=list(latest),
            source=[f.source for f, _ in pairs],
            sha256=[f.sha256 for f, _ in pairs],
        )
        columns["size_bytes"] = np.array([f.size_bytes for f, _ in pairs], np.int64)
        columns["mtime_ns"] = np.array([microseconds(f.modified) * 1000 for f, _ in pairs], np.int64)
        columns["ingest_id"] = np.array([o.ingest_id for _, o in pairs])
        if all_new:  # looking for them again would take as long as writing them
            self.execute(
                "insert into feed_file by name select *, ?::timestamp as seen_at from staged", [now], columns
            )
            return
        self.execute(
            """
            merge into feed_file using (select *, ?::timestamp as seen_at from staged) s using (path)
            when matched then update set source = s.source, size_bytes = s.size_bytes, seen_at = s.seen_at,
                mtime_ns = s.mtime_ns, sha256 = s.sha256, ingest_id = s.ingest_id
            when not matched then insert by name
            """,
            [now],
            columns,
        )
