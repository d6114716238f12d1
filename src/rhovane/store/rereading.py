"""Files read again because the settings of their source have changed: what they said before gives way."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from rhovane.model import Flag, ParsedFile
from rhovane.store.precedence import Records
from rhovane.store.reading import KNOWN_RULES
from rhovane.store.session import Session

ROW = "series_id, ts, value, flag, stage, result_time, line, ingest_id, confirmed_by"


class Rereading(Session):
    """Which files were read by which settings."""

    def adopt_rules(self, rules: Mapping[str, str]) -> None:
        """Take files whose settings were never remembered as read by those given, by source.

        Only stores from before settings were remembered hold such files.
        """
        with self.transaction():
            for table in ("ingest", "feed_file"):
                for source, known in rules.items():
                    self.execute(
                        f"update {table} set rules = ? where source = ? and rules is null", [known, source]
                    )
        self._remembered.pop(KNOWN_RULES, None)

    def known_contents(
        self, files: Sequence[ParsedFile]
    ) -> tuple[dict[tuple[str, str], int], dict[tuple[str, str], list[int]]]:
        """Contents read already by the settings of today, with their ingest; and earlier ingests of the others."""
        found = self.rows(
            "select source, sha256, id, rules from ingest where sha256 in (select unnest(?)) order by id",
            [[f.sha256 for f in files]],
        )
        wanted = {(f.source, f.sha256): f.rules for f in files}
        known: dict[tuple[str, str], int] = {}
        older: dict[tuple[str, str], list[int]] = {}
        for source, sha256, number, rules in found:
            content = (source, sha256)
            if content not in wanted:
                continue
            # The settings of the latest reading count: they may have been changed and changed back.
            if not rules or not wanted[content] or rules == wanted[content]:
                known[content] = number
            else:
                known.pop(content, None)
            older.setdefault(content, []).append(number)
        return known, {content: ids for content, ids in older.items() if content not in known}

    def withdraw(self, replaced_by: dict[int, int]) -> None:
        """What earlier ingests delivered and the ingests that replace them did not becomes missing."""
        if not replaced_by:
            return
        staged = {"old": np.array(list(replaced_by)), "new": np.array(list(replaced_by.values()))}
        self.execute(
            f"insert into reading_history select {ROW}, s.new from reading r join staged s on r.confirmed_by = s.old",
            staged=staged,
        )
        self.execute(
            f"""
            update reading set value = null, flag = {int(Flag.MISSING)}, stage = 0, line = 0,
                result_time = timestamp '1970-01-01', ingest_id = s.new, confirmed_by = s.new
            from staged s where reading.confirmed_by = s.old
            """,
            staged=staged,
        )

    def mark_other_rules(self, held: Records, files: Sequence[ParsedFile]) -> None:
        """Mark, in readings held, those that rest on other settings of their source than these files do."""
        rules = {file.source: file.rules for file in files if file.rules}
        found = self.rows("select id, source, rules from ingest where rules is not null")
        other = [number for number, source, known in found if source in rules and known != rules[source]]
        held["by_rules"] = ~np.isin(held["confirmed_by"], other)
