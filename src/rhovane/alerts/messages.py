"""What is told about a night: its new alerts, its digest, and what keeps failing, as messages. Pure functions."""

from __future__ import annotations

import datetime as dt
import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from rhovane.model import Alert, Message, MessageKind

WIDTH = 78
LISTED = 10  # entries of a list that are written out in a text; the data holds all of them
FAILING_NIGHTS = 3  # nights running after which a part that fails is told by itself
FAILING_AGAIN = 7  # and told again every so many nights


@dataclass(frozen=True)
class NightNews:
    """What one night has to tell.

    ``planned_at`` is the moment the night was planned for (aware, UTC); ``new`` holds new alerts with their headline; ``troubles``
    the parts that failed with the reason; ``failing`` for how many nights running each of them has; ``silent`` what has no
    data, in words.
    """

    network: str
    as_of: dt.date
    planned_at: dt.datetime
    outcome: str
    new: Sequence[tuple[Alert, str]] = ()
    troubles: Sequence[tuple[str, str]] = ()
    failing: Mapping[str, int] = field(default_factory=dict)
    silent: Sequence[str] = ()
    falling: Sequence[str] = ()
    unreviewed: int = 0
    readings_new: int = 0
    readings_revised: int = 0
    rows_rejected: int = 0
    next_command: str = ""
    caution: str = ""


def night_subject(as_of: dt.date) -> str:
    """The subject of a night's digest."""
    return f"night {as_of}"


def night_messages(news: NightNews, *, flood_above: int) -> list[Message]:
    """The messages of one night: its new alerts, what keeps failing, its digest (last).

    More than ``flood_above`` new alerts are told by the digest alone, grouped by suspect.
    """
    messages = []
    if len(news.new) <= flood_above:
        messages += [_alert_message(alert, headline, news) for alert, headline in news.new]
    for part, nights in sorted(news.failing.items()):
        if nights == FAILING_NIGHTS or (nights > FAILING_NIGHTS and nights % FAILING_AGAIN == 0):
            messages.append(_failing_message(part, nights, news))
    return [*messages, _digest(news, flood=len(news.new) > flood_above)]


def notice(kind: str, text: str, at: dt.datetime, *, network: str, facts: Mapping[str, Any] = {}) -> Message:
    """A message about the watch itself: a missed night, a store that is not whole, a clock that moved."""
    return Message(
        MessageKind.NOTICE,
        kind,
        at,
        f"{network}: {kind}",
        "\n".join(textwrap.wrap(text, WIDTH)),
        {"network": network, "notice": kind, "text": text, **facts},
    )


def _alert_message(alert: Alert, headline: str, news: NightNews) -> Message:
    lines = textwrap.wrap(headline, WIDTH)
    lines += [line for hint in alert.hints for line in textwrap.wrap(f"Hint: {hint}", WIDTH)]
    lines += ["", f"In full: rhovane alert {alert.id}", "", *textwrap.wrap(news.caution, WIDTH)]
    return Message(
        MessageKind.ALERT,
        f"alert {alert.id}",
        news.planned_at,
        f"{news.network}: alert {alert.id}, {_suspect(alert)}",
        "\n".join(lines),
        {"network": news.network, "headline": headline, "alert": _facts(alert), "caution": news.caution},
    )


def _failing_message(part: str, nights: int, news: NightNews) -> Message:
    reason = next((why for what, why in news.troubles if what == part), "")
    text = f"{part} has failed for {nights} nights running. Last reason: {reason}"
    return notice(
        "keeps failing",
        text,
        news.planned_at,
        network=news.network,
        facts={"part": part, "nights": nights, "reason": reason},
    )


def _facts(alert: Alert) -> dict[str, Any]:
    """The alert without the number of the ledger entry, which counts attempts."""
    return {name: value for name, value in alert.as_json().items() if name != "night_id"}


def _suspect(alert: Alert) -> str:
    return alert.suspect.removeprefix("pair ") or alert.pair_key


def _digest(news: NightNews, *, flood: bool) -> Message:
    n = len(news.new)
    count = "no new alert" if n == 0 else "1 new alert" if n == 1 else f"{n} new alerts"
    groups: dict[str, list[tuple[Alert, str]]] = {}
    for alert, headline in news.new:
        groups.setdefault(_suspect(alert), []).append((alert, headline))
    data: dict[str, Any] = {
        "network": news.network,
        "night": news.as_of.isoformat(),
        "outcome": news.outcome,
        "new_alerts": [
            {"id": a.id, "suspect": _suspect(a), "pair": a.pair_key, "headline": h} for a, h in news.new
        ],
        "flood": flood,
        "groups": {suspect: [a.id for a, _ in found] for suspect, found in groups.items()},
        "unreviewed": news.unreviewed,
        "failed": [
            {"part": part, "reason": why, "nights": news.failing.get(part, 1)} for part, why in news.troubles
        ],
        "silent": list(news.silent),
        "falling_coverage": list(news.falling),
        "readings": {
            "new": news.readings_new,
            "revised": news.readings_revised,
            "rows_rejected": news.rows_rejected,
        },
        "next_command": news.next_command,
        "caution": news.caution,
    }
    lines = [
        f"{news.network}, night of {news.as_of}: {news.outcome}",
        f"{count}, {news.unreviewed} in the log not yet reviewed",
        f"{news.readings_new} readings new, {news.readings_revised} revised, {news.rows_rejected} rows rejected",
    ]
    if flood:
        lines += ["", "So many alerts at once have a common cause more often than not. By suspect:"]
        lines += _listed([f"{suspect}: {len(found)}" for suspect, found in groups.items()])
    else:
        lines += [""] * bool(n) + _listed([f"{a.id}: {h}" for a, h in news.new])
    for title, entries in (
        ("Failed, and taken up again by the next night:", [f"{p}: {why}" for p, why in news.troubles]),
        ("Silent for lack of data, which is not the same as no change:", news.silent),
        ("Fewer and fewer readings:", news.falling),
    ):
        if entries:
            lines += ["", title, *_listed(entries)]
    if news.next_command:
        lines += ["", f"Next: {news.next_command}"]
    lines += ["", *textwrap.wrap(news.caution, WIDTH)]
    return Message(
        MessageKind.DIGEST,
        night_subject(news.as_of),
        news.planned_at,
        f"{news.network}: night of {news.as_of} {news.outcome}, {count}",
        "\n".join(lines),
        data,
    )


def _listed(entries: Sequence[str]) -> list[str]:
    lines = [
        line
        for entry in entries[:LISTED]
        for line in textwrap.wrap(entry, WIDTH, initial_indent="  ", subsequent_indent="    ")
    ]
    if len(entries) > LISTED:
        lines.append(f"  … and {len(entries) - LISTED} more")
    return lines
