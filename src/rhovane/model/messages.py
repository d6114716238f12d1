"""Messages that leave the program: what happened, once, under an id that belongs to this content alone."""

from __future__ import annotations

import datetime as dt
import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from functools import cached_property
from typing import Any


class MessageKind(StrEnum):
    """What a message is about."""

    ALERT = "alert"
    DIGEST = "digest"
    NOTICE = "notice"


@dataclass(frozen=True)
class Message:
    """One message; ``data`` for machines (plain JSON values), ``title`` and ``text`` for people.

    ``subject`` names what it is about ("night 2025-03-01", "alert 7"); ``at`` (aware, UTC) is when that
    happened.
    """

    kind: MessageKind
    subject: str
    at: dt.datetime
    title: str
    text: str
    data: Mapping[str, Any]

    @cached_property
    def id(self) -> str:
        """A digest of everything the message says: two contents never share an id, a repeat keeps it."""
        text = json.dumps(self.as_json(), sort_keys=True, separators=(",", ":"), allow_nan=False)
        return hashlib.sha256(text.encode()).hexdigest()[:32]

    def as_json(self) -> dict[str, Any]:
        """Plain values for the outbox."""
        return {
            "kind": self.kind.value,
            "subject": self.subject,
            "at": self.at.isoformat(),
            "title": self.title,
            "text": self.text,
            "data": dict(self.data),
        }

    @classmethod
    def from_json(cls, plain: Mapping[str, Any]) -> Message:
        """The message that :meth:`as_json` wrote."""
        return cls(
            **{**plain, "kind": MessageKind(plain["kind"]), "at": dt.datetime.fromisoformat(plain["at"])}
        )
