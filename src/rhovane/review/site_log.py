"""Entries of the site log that people write."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping

from rhovane.model import RhovaneError, SiteLogEntry
from rhovane.model.site_log import WHOLE_NETWORK
from rhovane.settings import Settings
from rhovane.store import Store

MOMENTS = ("%Y-%m-%d %H:%M", "%Y-%m-%dT%H:%M", "%Y-%m-%d")


def add_site_log_entry(
    settings: Settings, store: Store, cells: Mapping[str, str], *, who: str, now: dt.datetime
) -> int:
    """Record an entry given as its cells (subject, from, to, what; standard time), and return its number.

    Raises
    ------
    RhovaneError
        The cells hold mistakes; all of them are in the message.
    """
    offset = settings.network.standard_offset
    known = {s.key for s in settings.series} | {s.key.partition(".")[0] for s in settings.series}
    subject, what = cells.get("subject", "").strip(), cells.get("what", "").strip()
    start, end = _moment(cells.get("from", ""), offset), _moment(cells.get("to", ""), offset)
    told = []
    if subject != WHOLE_NETWORK and subject not in known:
        told.append(f'  subject: {subject!r} is no series or station; "*" means the whole network')
    if start is None:
        told.append(f"  from: {cells.get('from', '')!r} is no time; write 2025-04-01 or 2025-04-01 14:00")
    if cells.get("to", "").strip() and end is None:
        told.append(f"  to: {cells['to']!r} is no time; write it as from, or leave it empty while it lasts")
    if start is not None and end is not None and end <= start:
        told.append("  to: is not after from")
    if not what:
        told.append("  what: say what happened")
    if not who.strip():
        told.append("  who: give your name")
    if told or start is None:
        raise RhovaneError("The entry has mistakes:\n" + "\n".join(told) + "\nNothing was written.")
    (number,) = store.add_to_site_log([SiteLogEntry(subject, start, end, what)], who=who.strip(), now=now)
    return number


def _moment(text: str, offset: dt.timedelta) -> dt.datetime | None:
    """A time of the network's standard clock as an aware moment; None when it is none."""
    for pattern in MOMENTS:
        try:
            return dt.datetime.strptime(text.strip(), pattern).replace(tzinfo=dt.timezone(offset))
        except ValueError:
            continue
    return None
