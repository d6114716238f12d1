"""What appending files would do, without doing it."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rhovane.model import IngestOutcome, ParsedFile
from rhovane.store.deliveries import Delivery, outcome_of, records_of
from rhovane.store.precedence import NEW, READING, REVISED, UNCHANGED, group_by_hour, settle
from rhovane.store.store import Store


def preview_files(files: Sequence[ParsedFile], store: Store | None) -> list[IngestOutcome]:
    """The outcomes that :meth:`Store.append_files` would report for the files; nothing is written.

    Parameters
    ----------
    files
        Parsed files, none of them with an empty ``sha256``.
    store : Store or None
        Open for reading; None counts as a store without readings. Series that it does not know have no
        readings in it.
    """
    known: dict[tuple[str, str], int] = {}
    ids: dict[str, int] = {}
    if store is not None:
        known, _ = store.known_contents(files)
        ids = dict(store.rows("select key, id from series"))
    for key in sorted({key for file in files for key in file.series_key} - ids.keys()):
        ids[key] = max(ids.values(), default=0) + 1
    last = 0 if store is None else store.last_ingest_id()
    fresh: dict[tuple[str, str], int] = {}
    for file in files:
        content = (file.source, file.sha256)
        if content not in known and content not in fresh:
            fresh[content] = len(fresh)
    first_of = {content: next(f for f in files if (f.source, f.sha256) == content) for content in fresh}
    parts = [records_of(Delivery(file, last + 1 + i), ids) for i, file in enumerate(first_of.values())]
    counts = [(0, 0, 0)] * len(parts)
    if sum(map(len, parts)):
        rows = np.concatenate(parts)
        group, first = group_by_hour(rows)
        held, held_group = np.empty(0, READING), np.empty(0, np.int64)
        if store is not None:
            held, held_group, _ = store.held_readings(rows["series_id"].take(first), rows["ts"].take(first))
            store.mark_other_rules(held, list(first_of.values()))
        verdicts = settle(rows, group, held, held_group).verdict
        ends = np.cumsum([len(part) for part in parts])[:-1]
        tallies = [np.bincount(part, minlength=3) for part in np.split(verdicts, ends)]
        counts = [(int(n[NEW]), int(n[REVISED]), int(n[UNCHANGED])) for n in tallies]
    outcomes = []
    told: set[tuple[str, str]] = set()
    for file in files:
        content = (file.source, file.sha256)
        if content in fresh and content not in told:
            told.add(content)
            outcomes.append(outcome_of(file, last + 1 + fresh[content], counts[fresh[content]]))
        else:
            number = known.get(content, last + 1 + fresh.get(content, 0))
            outcomes.append(outcome_of(file, number, (0, 0, len(file.value)), already_known=True))
    return outcomes
