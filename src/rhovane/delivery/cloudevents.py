"""Messages as CloudEvents 1.0 in JSON (structured mode): (source, id) is the same for every repeat."""

from __future__ import annotations

import json
from typing import Any

from rhovane.model import Message, MessageKind

CONTENT_TYPE = "application/cloudevents+json; charset=utf-8"
TYPES = {
    MessageKind.ALERT: "rhovane.alert.raised",
    MessageKind.DIGEST: "rhovane.night.digest",
    MessageKind.NOTICE: "rhovane.notice",
}


def as_cloudevent(message: Message, source: str) -> dict[str, Any]:
    """A message as a CloudEvent; the time is RFC 3339."""
    return {
        "specversion": "1.0",
        "id": message.id,
        "source": source,
        "type": TYPES[message.kind],
        "subject": message.subject,
        "time": message.at.isoformat().replace("+00:00", "Z"),
        "datacontenttype": "application/json",
        "data": {"title": message.title, "text": message.text, **message.data},
    }


def cloudevent_text(message: Message, source: str) -> str:
    """The same as one line of JSON."""
    return json.dumps(as_cloudevent(message, source), ensure_ascii=False, allow_nan=False)
