"""The night ledger: one row for each execution of the nightly steps."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date, datetime
from typing import Any, Literal

from rhovane.model import NotFound, RhovaneError
from rhovane.store.clock import aware_utc, naive_utc
from rhovane.store.jsontext import json_text
from rhovane.store.session import Session

NightOutcome = Literal["complete", "incomplete", "failed", "stopped"]
_SETTINGS = "select hash, text from settings_used"
_OUTCOMES = ("complete", "incomplete", "failed", "stopped")
_COLUMNS = (
    "id, kind, as_of, started, finished, outcome, steps, counts, settings_hash, program_version, data_version"
)
_SELECT = f"select {_COLUMNS} from night"
_LAST_FINISHED = "the latest night that ended complete or incomplete"


@dataclass(frozen=True)
class NightRecord:
    """A row of the night ledger; ``outcome`` is "running" until the night is finished.

    ``data_version`` is the number of the last ingest that the night saw.
    """

    night_id: int
    kind: str
    as_of: date
    started: datetime
    finished: datetime | None
    outcome: str
    steps: list[dict[str, Any]]
    counts: dict[str, Any]
    settings_hash: str
    program_version: str
    data_version: int


class NightLedger(Session):
    """Writing and reading of the night ledger."""

    def begin_night(
        self, *, kind: str, as_of: date, now: datetime, settings_hash: str, program_version: str
    ) -> int:
        """Record that a night has begun, and return its number."""
        with self.transaction():
            number: int = self.value(
                """
                insert into night
                select coalesce(max(id), 0) + 1, ?, ?, ?, null, 'running', '[]', '{}', ?, ?,
                       (select coalesce(max(id), 0) from ingest) from night
                returning id
                """,
                [kind, as_of, naive_utc(now), settings_hash, program_version],
            )
        return number

    def finish_night(
        self,
        night_id: int,
        *,
        now: datetime,
        outcome: NightOutcome,
        steps: Sequence[Mapping[str, Any]],
        counts: Mapping[str, Any],
        data_version: int | None = None,
        checkpoint: bool = True,
    ) -> None:
        """Record how a night ended; ``data_version`` is by default the last ingest of the store.

        ``checkpoint`` folds the write-ahead log into the file afterwards; False leaves that to a later night.

        Raises
        ------
        NotFound
            There is no such night.
        RhovaneError
            The night is finished already, or the outcome is not a known word.
        """
        if outcome not in _OUTCOMES:
            raise RhovaneError(f"outcome={outcome!r} is not known; allowed are {', '.join(_OUTCOMES)}.")
        with self.transaction():
            kept = self.rows(
                f"""
                update night set finished = ?, outcome = ?, steps = ?, counts = ?,
                    data_version = coalesce(?, (select max(id) from ingest), 0)
                where id = ? and outcome = 'running' returning {_COLUMNS}
                """,
                [
                    naive_utc(now),
                    outcome,
                    json_text(list(steps)),
                    json_text(counts),
                    None if data_version is None else int(data_version),
                    int(night_id),
                ],
            )
            if not kept:
                found = self.rows("select outcome from night where id = ?", [int(night_id)])
                if not found:
                    raise NotFound(f"There is no night {night_id} in the ledger.")
                raise RhovaneError(f"Night {night_id} is finished already ({found[0][0]}); begin a new one.")
            known = self._remembered.get(_LAST_FINISHED)
            if (
                known is not None
                and outcome in ("complete", "incomplete")
                and (known[0] is None or known[0].night_id < night_id)
            ):
                known[0] = _record(kept[0])
            self.expect_after_commit("nights", int(night_id))
            if checkpoint:
                self.checkpoint_after_commit()

    def keep_settings(self, settings_hash: str, text: str) -> None:
        """Keep the text of settings under their hash, once."""
        if settings_hash in self.remembered(_SETTINGS):
            return
        with self.transaction():
            self.execute("insert into settings_used values (?, ?)", [settings_hash, text])
        self.remembered(_SETTINGS)[settings_hash] = text

    def settings_text(self, settings_hash: str) -> str:
        """The text of the settings with this hash.

        Raises
        ------
        NotFound
            They were not kept: the night was run by a version of the program that did not.
        """
        found: str | None = self.remembered(_SETTINGS).get(settings_hash)
        if found is None:
            raise NotFound(
                f"The store holds no settings {settings_hash}: the night was run by a version of the program that "
                "did not keep them yet."
            )
        return found

    def night(self, night_id: int) -> NightRecord:
        """One night of the ledger.

        Raises
        ------
        NotFound
            There is no such night.
        """
        found = self.rows(f"{_SELECT} where id = ?", [int(night_id)])
        if not found:
            raise NotFound(f"There is no night {night_id} in the ledger.")
        return _record(found[0])

    def nights(self, limit: int = 30) -> list[NightRecord]:
        """The latest nights, newest first."""
        return [_record(row) for row in self.rows(f"{_SELECT} order by id desc limit ?", [int(limit)])]

    def nights_of(self, as_of: date) -> list[NightRecord]:
        """The nights that covered days up to a day, newest first."""
        return [_record(row) for row in self.rows(f"{_SELECT} where as_of = ? order by id desc", [as_of])]

    def finished_before(self, night_id: int) -> NightRecord | None:
        """The latest night before another that ended complete or incomplete; None where there is none."""
        found = self.rows(
            f"""
            {_SELECT} where id = (select max(id) from night
            where outcome in ('complete', 'incomplete') and id < ?)
            """,
            [int(night_id)],
        )
        return _record(found[0]) if found else None

    def last_complete_night(self, kind: str | None = None) -> NightRecord | None:
        """The latest night that ended complete (of one kind, if given); None before the first."""
        found = self.rows(
            f"{_SELECT} where outcome = 'complete' and kind = coalesce(?, kind) order by id desc limit 1",
            [kind],
        )
        return _record(found[0]) if found else None

    def last_finished_night(self) -> NightRecord | None:
        """The latest night that ended complete or incomplete, of any kind; None before the first."""
        known = self._remembered.get(_LAST_FINISHED)
        if known is None:
            found = self.rows(
                f"{_SELECT} where id = (select max(id) from night where outcome in ('complete', 'incomplete'))"
            )
            known = self._remembered[_LAST_FINISHED] = {0: _record(found[0]) if found else None}
        last: NightRecord | None = known[0]
        return last

    def night_of(self, as_of: date) -> NightRecord:
        """The latest night that finished for a day.

        Raises
        ------
        NotFound
            None has.
        """
        finished = "outcome in ('complete', 'incomplete')"
        found = self.rows(f"{_SELECT} where as_of = ? and {finished} order by id desc limit 1", [as_of])
        if not found:
            first, last = self.rows(f"select min(as_of), max(as_of) from night where {finished}")[0]
            known = (
                f"the ledger's nights reach from {first} to {last}" if first else "the ledger holds none yet"
            )
            raise NotFound(f"No night of {as_of} has finished; {known}. Name one that has.")
        return _record(found[0])

    def newest_date(self) -> date | None:
        """The newest date whose night ended complete or incomplete, whenever it ran; None before the first."""
        newest: date | None = self.value(
            "select max(as_of) from night where outcome in ('complete', 'incomplete')"
        )
        return newest

    def arrived_since(self, data_version: int) -> tuple[int, int, int]:
        """Readings new, readings revised and rows rejected in the ingests after a data version."""
        found: tuple[int, int, int] = self.rows(
            """
            select coalesce(sum(rows_new), 0)::bigint, coalesce(sum(rows_revised), 0)::bigint,
                coalesce(sum(rows_rejected), 0)::bigint
            from ingest where id > ?
            """,
            [int(data_version)],
        )[0]
        return found

    def newest_ended_night(self) -> NightRecord | None:
        """The latest night that ended by itself, whatever its outcome; None before the first."""
        found = self.rows(
            f"{_SELECT} where id = (select max(id) from night where outcome not in ('running', 'stopped'))"
        )
        return _record(found[0]) if found else None


def _record(row: tuple[Any, ...]) -> NightRecord:
    number, kind, as_of, started, finished, outcome, steps, counts, settings, program, version = row
    return NightRecord(
        number,
        kind,
        as_of,
        aware_utc(started),
        None if finished is None else aware_utc(finished),
        outcome,
        json.loads(steps),
        json.loads(counts),
        settings,
        program,
        version,
    )
