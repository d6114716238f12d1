"""The service: APScheduler decides when, the main thread gives signs of life and hears signals.

Signs of life come from the main thread, which waits on the monotonic clock: a wall clock that is set back by
hours would otherwise hold them up together with every planned job. When it was set, or the machine slept, the jobs are planned anew.
"""

from __future__ import annotations

import datetime as dt
import fcntl
import os
import signal
import threading
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from types import FrameType

from apscheduler.events import (
    EVENT_JOB_ERROR,
    EVENT_JOB_MAX_INSTANCES,
    EVENT_JOB_MISSED,
    JobExecutionEvent,
    JobSubmissionEvent,
)
from apscheduler.executors.pool import ThreadPoolExecutor
from apscheduler.schedulers.background import BackgroundScheduler
from apscheduler.triggers.base import BaseTrigger
from apscheduler.triggers.cron import CronTrigger
from apscheduler.triggers.interval import IntervalTrigger

from rhovane.model import RhovaneError, StoreLocked
from rhovane.schedule.keeper import Keeper
from rhovane.settings import Settings

END_WITHIN_S = 0.7  # time that a job has, after a signal, to reach a safe point
Job = tuple[str, Callable[[], None], BaseTrigger]


def run_service(keeper: Keeper, *, beside: Sequence[Callable[[], None]] = ()) -> bool:
    """Run until SIGTERM or SIGINT; whether all work had come to an end by itself.

    Work that has not is left where it is: its transaction was not committed, so the next start finds the store as
    before it and takes the work up. The caller then ends the process without waiting for it.

    Parameters
    ----------
    beside : sequence of callable
        Run in threads of their own (a page, for example) and left when the service ends.

    Raises
    ------
    StoreLocked
        Another service runs for this store.
    """
    with _only_one(keeper.settings), _signals_set(keeper.stop):
        scheduler = BackgroundScheduler(
            timezone=dt.UTC,
            executors={"default": ThreadPoolExecutor(1)},
            job_defaults={"coalesce": True, "max_instances": 1, "misfire_grace_time": None},
        )
        scheduler.add_listener(
            lambda event: _note(keeper, event), EVENT_JOB_ERROR | EVENT_JOB_MISSED | EVENT_JOB_MAX_INSTANCES
        )
        for name, do, trigger in _jobs(keeper):
            scheduler.add_job(do, trigger, id=name, name=name)
        scheduler.start()
        for other in beside:
            threading.Thread(target=other, daemon=True).start()
        keeper.log.info("service begins", pid=os.getpid(), store=str(keeper.settings.store_path))
        _watch_clock(keeper, scheduler)
        scheduler.shutdown(wait=False)
        ended = keeper.idle.wait(END_WITHIN_S)
        keeper.beat(state="stopped")
        keeper.log.info("service ends", at_a_safe_point=ended)
        return ended


def _jobs(keeper: Keeper) -> list[Job]:
    settings = keeper.settings
    hour, minute = settings.night.at.split(":")
    standard_time = dt.timezone(settings.network.standard_offset)
    jobs: list[Job] = [
        ("night", keeper.run_due_nights, CronTrigger(hour=hour, minute=minute, timezone=standard_time)),
    ]
    if settings.service.poll_minutes:
        trigger = IntervalTrigger(minutes=settings.service.poll_minutes, timezone=dt.UTC)
        jobs.append(("poll", keeper.poll, trigger))
    return jobs


def _watch_clock(keeper: Keeper, scheduler: BackgroundScheduler) -> None:
    """Give signs of life until the end, have due nights run, and plan the jobs anew when the clock was moved."""
    asked: set[str] = set()
    while True:
        moved = keeper.beat()
        if moved.was_set or moved.was_suspended:
            for name, _, trigger in _jobs(keeper):
                scheduler.reschedule_job(name, trigger=trigger)
        wanted = {"night"} if keeper.night_wanted() else {"send"} if keeper.send_wanted() else set()
        if "night" in wanted - asked:
            scheduler.modify_job("night", next_run_time=dt.datetime.now(dt.UTC))
        if "send" in wanted - asked:
            scheduler.add_job(keeper.send, id="send", replace_existing=True)
        asked = wanted
        if keeper.stop.wait(keeper.settings.service.heartbeat_s):
            return


def _note(keeper: Keeper, event: JobExecutionEvent | JobSubmissionEvent) -> None:
    if event.code == EVENT_JOB_MAX_INSTANCES:
        keeper.note(
            "overlap",
            f"{event.job_id} was to begin while the last one still ran; it was left out.",
            tell=False,
        )
    elif event.code == EVENT_JOB_MISSED:
        keeper.note(
            "misfire", f"{event.job_id} did not begin at {event.scheduled_run_time:%Y-%m-%d %H:%M} UTC."
        )
    else:
        error = event.exception
        keeper.note("job failed", f"{event.job_id}: {type(error).__name__}: {error}")


@contextmanager
def _only_one(settings: Settings) -> Iterator[None]:
    """Hold the place of the one service of a store; given up with the process, however that ends."""
    path = settings.store_path.with_name(settings.store_path.name + ".service.lock")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        stream = path.open("a")
    except OSError as error:
        raise RhovaneError(
            f"{path} cannot be written ({error.strerror}); name a folder that can be written to."
        ) from error
    with stream:
        try:
            fcntl.flock(stream, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            raise StoreLocked(
                f"Another service runs for {settings.store_path}. `rhovane status` says which process; stop that one first."
            ) from None
        yield


@contextmanager
def _signals_set(stop: threading.Event) -> Iterator[None]:
    """Have SIGTERM and SIGINT set an event."""

    def handle(_number: int, _frame: FrameType | None) -> None:
        stop.set()

    before = {number: signal.signal(number, handle) for number in (signal.SIGTERM, signal.SIGINT)}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
