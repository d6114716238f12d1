"""What a look at the readings changes in the data notes that are known: a pure function of both."""

from __future__ import annotations

import dataclasses
import datetime as dt
from collections.abc import Iterable, Sequence

from rhovane.model import MOMENT_KINDS, DataNote, NoteState
from rhovane.pipeline.findings import HOUR_S, Finding, Look

SAME_MOMENT_S = 12 * 86_400  # moments of one family and subject nearer than this are one that was dated anew


class KnownNotes:
    """The newest versions of the data notes that hold, by family and number."""

    def __init__(self, notes: Iterable[DataNote]) -> None:
        self._families: dict[str, dict[int, DataNote]] = {}
        self.next_id = 1
        self.put(notes)

    def put(self, notes: Iterable[DataNote]) -> None:
        """Take in new versions."""
        for note in notes:
            family = self._families.setdefault(note.family, {})
            if note.state is NoteState.HOLDS:
                family[note.id] = note
            else:
                family.pop(note.id, None)
            self.next_id = max(self.next_id, note.id + 1)

    def of(self, family: str) -> list[DataNote]:
        """Notes of one family, in order of number."""
        return list(self._families.get(family, {}).values())

    @property
    def n_open(self) -> int:
        """Notes whose matter still lasts."""
        return sum(n.is_open for family in self._families.values() for n in family.values())


def changed_notes(known: KnownNotes, look: Look, *, night_id: int) -> list[DataNote]:
    """New versions of notes that now say something else, and first versions of new ones.

    Notes that lie before the look or speak of other subjects stay as they are. A note of which the readings no longer
    show anything is withdrawn.
    """
    open_to_change = [
        n
        for n in known.of(look.family)
        if _last(n) >= look.since and (look.subjects is None or n.subject in look.subjects)
    ]
    next_id = known.next_id
    changed: list[DataNote] = []
    for finding in sorted(look.findings, key=lambda f: (f.subject, f.begin)):
        old = _same(finding, open_to_change)
        if old is None:
            changed.append(
                DataNote(
                    next_id,
                    1,
                    finding.subject,
                    finding.kind,
                    moment(finding.begin),
                    None if finding.end is None else moment(finding.end),
                    finding.facts,
                    NoteState.HOLDS,
                    night_id,
                )
            )
            next_id += 1
            continue
        open_to_change.remove(old)
        began_before = finding.kind not in MOMENT_KINDS and seconds(old.begin) < look.exact
        new = dataclasses.replace(
            old,
            version=old.version + 1,
            kind=finding.kind,
            begin=old.begin if began_before else moment(finding.begin),
            end=None if finding.end is None else moment(finding.end),
            facts=old.facts if began_before else finding.facts,
            night_id=night_id,
        )
        if new.says() != old.says():
            changed.append(new)
    changed += [
        dataclasses.replace(n, version=n.version + 1, state=NoteState.WITHDRAWN, night_id=night_id)
        for n in open_to_change
    ]
    return changed


def _same(finding: Finding, notes: Sequence[DataNote]) -> DataNote | None:
    """The note that speaks of the same stretch or moment, the one with the nearest begin first."""
    spread = SAME_MOMENT_S if finding.kind in MOMENT_KINDS else HOUR_S
    end = _FOREVER if finding.end is None else finding.end
    fitting = [
        n
        for n in notes
        if n.subject == finding.subject
        and seconds(n.begin) - spread <= end
        and finding.begin <= _last(n) + spread
    ]
    return min(fitting, key=lambda n: abs(seconds(n.begin) - finding.begin), default=None)


_FOREVER = 2**62


def _last(note: DataNote) -> int:
    return _FOREVER if note.end is None else seconds(note.end)


def seconds(at: dt.datetime) -> int:
    """An aware moment as whole seconds since 1970 UTC."""
    return int(at.timestamp())


def moment(second: int) -> dt.datetime:
    """Whole seconds since 1970 UTC as an aware moment."""
    return dt.datetime.fromtimestamp(second, dt.UTC)
