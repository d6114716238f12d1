"""Which nights are due: a pure function of the settings, the ledger and the clock.

A night belongs to a date and is planned for the day after, at ``night.at`` of standard time, which has 24 hours
on every day: no such moment happens twice or never. What counts is the ledger, not the moment at which
something was to happen.
"""

from __future__ import annotations

import datetime as dt

from rhovane.pipeline import nights_between
from rhovane.prepare import days_of
from rhovane.settings import Settings

DAY = dt.timedelta(days=1)


def newest_planned(settings: Settings, now: dt.datetime) -> dt.date:
    """The newest date whose night is planned for ``now`` (aware) or earlier."""
    return days_of(settings.network.standard_offset).last_complete(now - settings.night.after_midnight)


def due_nights(
    settings: Settings, newest_done: dt.date | None, now: dt.datetime
) -> tuple[list[dt.date], list[dt.date]]:
    """Dates whose nights are to be run now, in order, and missed dates that are too many to be made up for.

    Parameters
    ----------
    newest_done : date or None
        The newest date whose night finished; None before the first, which takes in all there is.
    now : datetime
        Aware.
    """
    last = newest_planned(settings, now)
    if newest_done is None:
        return [last], []
    missed = list(nights_between(newest_done + DAY, last))
    most = settings.service.catch_up_nights
    return missed[-most:], missed[:-most]
