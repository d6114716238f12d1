"""Entries of the site log that people write on the command line."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping

from rhovane.model import RhovaneError
from rhovane.settings import Settings, site_log_entry
from rhovane.store import SITE_LOG_FILE, Store


def add_site_log_entry(
    settings: Settings, store: Store, cells: Mapping[str, str], *, who: str, now: dt.datetime
) -> int:
    """Record an entry given as its cells (subject, from, to, what, readings), and return its number.

    Raises
    ------
    RhovaneError
        The cells hold mistakes; all of them are in the message.
    """
    entry, mistakes = site_log_entry(cells, settings.series_by_key(), settings.network.standard_offset)
    if entry is None or not who.strip() or who == SITE_LOG_FILE:
        told = [f"  {column}: {what}" for column, what in mistakes]
        told += [] if who.strip() and who != SITE_LOG_FILE else ["  who: give your name"]
        raise RhovaneError("The entry has mistakes:\n" + "\n".join(told) + "\nNothing was written.")
    (number,) = store.add_to_site_log([entry], who=who, now=now, acts_from=store.next_judged_day())
    return number


def withdraw_site_log_entry(store: Store, number: int, *, now: dt.datetime) -> None:
    """Mark an entry that a person added as withdrawn.

    Raises
    ------
    NotFound
        There is no such entry.
    RhovaneError
        It is withdrawn already, or comes from the site log file.
    """
    for stored in store.site_log():
        if stored.number == number and stored.stands and stored.who == SITE_LOG_FILE:
            raise RhovaneError(
                f"Entry {number} comes from the site log file; remove its line there, and the next night marks it "
                "as withdrawn. Nothing was written."
            )
    store.withdraw_from_site_log(number, now=now, from_day=store.next_judged_day())
