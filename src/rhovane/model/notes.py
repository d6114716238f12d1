"""Data notes: what is wrong with the data itself, said loudly, never as an alert."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from typing import Any


class NoteKind(StrEnum):
    """What a data note says about a series or, for the last, about a pair."""

    GAP = "gap"
    LOW_COVERAGE = "low coverage"
    STUCK = "stuck value"
    DRY = "dry gauge"
    TIES = "ties raised"
    LEVEL_STEP = "level step"
    UNIT_SWITCH = "unit switch"
    SHIFTED_ZERO = "shifted zero"
    LEFT_OUT = "left out by checks"
    NOT_COMPUTABLE = "not computable"


STEP_KINDS = (NoteKind.LEVEL_STEP, NoteKind.UNIT_SWITCH, NoteKind.SHIFTED_ZERO)
MOMENT_KINDS = (*STEP_KINDS, NoteKind.TIES)  # something that began at a moment, and does not last or end


class NoteState(StrEnum):
    """Whether the readings still show what a note says."""

    HOLDS = "holds"
    WITHDRAWN = "withdrawn"  # later readings filled or revised it away; the note is kept


@dataclass(frozen=True)
class DataNote:
    """One version of a data note; a note that changes gets a further version, and none is deleted.

    ``begin`` and ``end`` are the starts of the first and the last hour it speaks of (aware, UTC); ``end`` None: it still
    lasted when it was written. ``facts`` are the numbers in it, by name; ``night_id`` is the night that wrote the version.
    """

    id: int
    version: int
    subject: str
    kind: NoteKind
    begin: dt.datetime
    end: dt.datetime | None
    facts: Mapping[str, Any] = field(default_factory=dict)
    state: NoteState = NoteState.HOLDS
    night_id: int = 0

    @property
    def family(self) -> str:
        """Steps of every kind are one family: a step may turn out to be a unit switch later."""
        return "step" if self.kind in STEP_KINDS else self.kind.value

    @property
    def is_open(self) -> bool:
        """Whether what it says still lasts, as far as is known."""
        return self.state is NoteState.HOLDS and self.end is None

    def says(self) -> tuple[object, ...]:
        """Everything but number, version and night: two notes that say the same are equal here."""
        return (self.subject, self.kind, self.begin, self.end, self.state, tuple(sorted(self.facts.items())))
