"""A history walked night by night, each night seeing only what had arrived by then."""

from __future__ import annotations

import datetime as dt
import functools
from collections.abc import Callable, Iterator, Sequence
from pathlib import Path

from rhovane.model import RhovaneError, StoreDamaged
from rhovane.pipeline.memory import NightMemory
from rhovane.pipeline.nightly import STEPS, NightReport, Step, run_night
from rhovane.pipeline.windows import leave_windows
from rhovane.settings import Settings
from rhovane.store import Store

DAY = dt.timedelta(days=1)
NIGHTS_A_CHECKPOINT = 28  # nights of a walk after which the write-ahead log is folded into the store file
NIGHTS_A_WINDOW = (
    7  # nights of a walk after which their windows are computed, together at a fifth of the cost
)

LEAVING_WINDOWS: tuple[Step, ...] = tuple(
    (name, leave_windows) if name == "windows" else (name, do) for name, do in STEPS
)


def nights_between(first: dt.date, last: dt.date) -> Iterator[dt.date]:
    """Every date from the first to the last, both included."""
    for i in range((last - first).days + 1):
        yield first + i * DAY


def walk_nights(
    settings: Settings,
    store: Store,
    first: dt.date,
    last: dt.date,
    *,
    moment_of: Callable[[dt.date], dt.datetime],
    arrivals: Callable[[dt.date], Sequence[Path]] | None = None,
    progress: Callable[[str], None] = lambda _step: None,
) -> Iterator[NightReport]:
    """Run every night from the first to the last date that the ledger does not hold yet.

    No alert rests on the windows, and nobody reads them between two nights of a walk: they are computed with
    every seventh night and with the last, from the readings known then.

    Parameters
    ----------
    moment_of : callable
        The moment (aware) at which the night of a date is taken to run.
    arrivals : callable, optional
        The feed files that arrived for the night of a date; default: whatever is new in the feed folders.
    progress : callable
        Called with the name of each step of each night as it begins.
    """
    done = store.last_finished_night()
    memory = NightMemory()
    for day in nights_between(first, last):
        if done is not None and day <= done.as_of:
            continue
        arrived = None if arrivals is None else arrivals(day)
        fold, windows = (
            day == last or day.toordinal() % n == 0 for n in (NIGHTS_A_CHECKPOINT, NIGHTS_A_WINDOW)
        )
        night = functools.partial(
            run_night,
            settings,
            store,
            as_of=day,
            now=moment_of(day),
            steps=STEPS if windows else LEAVING_WINDOWS,
            checkpoint=fold,
            memory=memory,
            arrived=arrived,
            progress=progress,
        )
        yield _at_once(night, store, memory)


def _at_once(night: Callable[[], NightReport], store: Store, memory: NightMemory) -> NightReport:
    """A night in one transaction, the reading of the feed included: two commits less.

    Where anything in it fails, all of it is undone, and it is run again in its own transactions, which keep what can
    be kept and write down what failed.
    """
    try:
        with store.transaction():
            return night()
    except StoreDamaged:
        raise
    except RhovaneError:
        memory.forget()
        return night()
