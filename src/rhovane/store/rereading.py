"""Files read again because the settings of their source have changed: what they said before gives way."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from rhovane.model import Flag, ParsedFile
from rhovane.store.deliveries import Delivery
from rhovane.store.precedence import Records
from rhovane.store.reading import KNOWN_RULES
from rhovane.store.session import Session

ROW = "series_id, ts, value, flag, stage, result_time, line, ingest_id, confirmed_by"

Content = tuple[str, str]  # source and sha256


class Rereading(Session):
    """Which files were read by which settings."""

    # Of the whole ledger: the ingests of each content, in order, each with the settings it was read by.
    _contents: dict[Content, list[tuple[int, str]]] | None = None
    _asked = False

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
        self._contents = None

    def known_contents(
        self, files: Sequence[ParsedFile]
    ) -> tuple[dict[Content, int], dict[Content, list[int]]]:
        """Contents read already by the settings of today, with their ingest; and earlier ingests of the others."""
        held = self._ingests_of(files)
        known: dict[Content, int] = {}
        older: dict[Content, list[int]] = {}
        for content, wanted in {(f.source, f.sha256): f.rules for f in files}.items():
            if content not in held:
                continue
            # The settings of the latest reading count: they may have been changed and changed back.
            number, rules = held[content][-1]
            if not rules or not wanted or rules == wanted:
                known[content] = number
            else:
                older[content] = [one for one, _ in held[content]]
        return known, older

    def _ingests_of(self, files: Sequence[ParsedFile]) -> Mapping[Content, Sequence[tuple[int, str]]]:
        """Ingests of the contents that the ledger holds: of these files, or of all there are.

        The first look asks for these files only; a second one in the same process, as in a walk, reads the
        whole ledger once, and later ones ask nothing.
        """
        if self._contents is not None:
            return self._contents
        columns = "select source, sha256, id, coalesce(rules, '') from ingest"
        if self._asked:
            found = self.rows(f"{columns} order by id")
        else:
            wanted = [[f.sha256 for f in files]]
            found = self.rows(f"{columns} where sha256 in (select unnest(?)) order by id", wanted)
        contents: dict[Content, list[tuple[int, str]]] = {}
        for source, sha256, number, rules in found:
            contents.setdefault((source, sha256), []).append((number, rules))
        if self._asked:
            self._contents = contents
        self._asked = True
        return contents

    def remember_contents(self, deliveries: Sequence[Delivery]) -> None:
        """Keep what is remembered of the ledger in step with the files that it now holds."""
        if self._contents is not None:
            for file, number in deliveries:
                self._contents.setdefault((file.source, file.sha256), []).append((number, file.rules))

    def _forget(self) -> None:
        super()._forget()
        self._contents = None

    def withdraw(self, replaced_by: dict[int, int]) -> None:
        """What earlier ingests delivered and the ingests that replace them did not becomes missing.

        The ledger counts these hours beside the rows that were read.
        """
        if not replaced_by:
            return
        staged = {"old": np.array(list(replaced_by)), "new": np.array(list(replaced_by.values()))}
        self.execute(
            """
            update ingest set rows_withdrawn = w.n from (
                select s.new, count(*) as n from reading r join staged s on r.confirmed_by = s.old group by s.new
            ) w where ingest.id = w.new
            """,
            staged=staged,
        )
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
        if not rules or not len(held):
            return
        other = self.columns(
            """
            select i.id from ingest i join (select unnest(?) as source, unnest(?) as rules) now using (source)
            where i.rules <> now.rules
            """,
            [list(rules), list(rules.values())],
        )
        held["by_rules"] = ~np.isin(held["confirmed_by"], other["id"])
