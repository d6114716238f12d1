"""What the service does, job by job: nights that are due, looks into the feed, sending, signs of life.

The store is opened for each job and closed after it. Nothing here knows APScheduler or a real clock, so that
every night of a leap year can be tried in a second.
"""

from __future__ import annotations

import datetime as dt
import os
import shutil
import threading
from collections import deque
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field

from rhovane.alerts import notice
from rhovane.model import Message, RhovaneError, StoreLocked
from rhovane.pipeline import (
    NightReport,
    copy_due,
    keep_store,
    planned_moment,
    post_notices,
    run_night,
    send_waiting,
)
from rhovane.pipeline.checking import ingest_now
from rhovane.schedule.clock import Clock, Look, Movement, movement
from rhovane.schedule.due import DAY, due_nights, newest_planned
from rhovane.schedule.logs import Log
from rhovane.settings import Settings
from rhovane.store import EVENTS_KEPT, Liveness, Noticed, Store, read_liveness, write_liveness

FIRST_PAUSE_S = 60.0  # before a night that failed is tried again; doubled each time
LONGEST_PAUSE_S = 3600.0
MOST_DOUBLINGS = 20  # the pause has reached its longest long before
TOLD_FROM_S = 60.0  # a clock that is set by less was corrected, which happens after every start
MB = 1_000_000


@dataclass
class Keeper:
    """Runs what is due. ``open_store`` opens the store for writing; ``stop`` ends everything at the next safe point."""

    settings: Settings
    open_store: Callable[[], Store]
    clock: Clock
    log: Log
    stop: threading.Event = field(default_factory=threading.Event)
    idle: threading.Event = field(default_factory=threading.Event)
    on_night: Callable[[NightReport], None] = lambda _report: None
    faults: list[str] = field(default_factory=list)
    troubles: list[RhovaneError | OSError] = field(default_factory=list)
    _newest_done: dt.date | None = None
    _kept_for: dt.date | None = None
    _failures: int = 0
    _not_before: float = 0.0
    _next_send: dt.datetime | None = None
    _outbox_known: bool = False
    _disk_low: bool = False
    _notices: deque[Message] = field(default_factory=deque)
    _doing: str = ""
    _events: deque[Noticed] = field(default_factory=lambda: deque(maxlen=EVENTS_KEPT))
    _report: NightReport | None = None
    _looked: Look | None = None
    _begun: dt.datetime | None = None

    def __post_init__(self) -> None:
        self.idle.set()
        self._not_before = self.clock.elapsed()

    # -- nights ---------------------------------------------------------------------------------

    def night_wanted(self) -> bool:
        """Whether a night is due, as far as is known without opening the store, and may be tried now."""
        planned = newest_planned(self.settings, self.clock.now())
        due = self._newest_done is None or self._newest_done < planned
        return due and self.clock.elapsed() >= self._not_before and self.idle.is_set()

    def run_due_nights(self) -> None:
        """Run every night that is due, oldest first, each with the store opened anew; then check, copy and send.

        A night that fails ends the row: it is tried again after a pause, and later nights wait for it.
        """
        finished = False
        while not self.stop.is_set():
            try:
                went = self._guarded("night", self._next_night)
            except Exception:
                self._pause("the night failed in an unforeseen way")
                raise
            report = self._report
            if not went:
                self._pause("the store could not be used")
            elif report is not None and report.outcome in ("complete", "incomplete"):
                finished, self._failures = True, 0
                continue
            elif report is not None and report.outcome == "failed":
                self._pause(f"the night of {report.as_of} failed")
            break
        if self._newest_done is not None and self._kept_for != self._newest_done and not self.stop.is_set():
            self._guarded("upkeep", lambda: self._keep(after_night=finished))
        self._outbox_known = False
        self.send()

    def _next_night(self) -> None:
        """Run the oldest night that is due, if any."""
        now = self.clock.now()
        self._report = None
        with self.open_store() as store:
            self._newest_done = store.newest_date()
            due, too_many = due_nights(self.settings, self._newest_done, now)
            if too_many:
                self._tell_too_many(too_many, due[0])
            self._post(store, now)
            if not due:
                return
            day = due[0]
            self._doing = f"night {day}"
            self._report = report = run_night(
                self.settings,
                store,
                as_of=day,
                now=now,
                progress=lambda step: self.log.info("step begins", night=str(day), step=step),
                stop=self.stop.is_set,
            )
            if report.outcome in ("complete", "incomplete"):
                self._newest_done = day
        self._log_night(report)
        self.on_night(report)

    def _log_night(self, report: NightReport) -> None:
        facts = {"night": str(report.as_of), "night_id": report.id}
        for step in report.steps:
            self.log.info(
                step.summary, step=step.name, seconds=round(step.seconds, 3), peak_mb=step.peak_mb, **facts
            )
        for trouble in report.troubles:
            self.log.warning(trouble.reason, step=trouble.step, part=trouble.part, **facts)
        write = self.log.info if report.outcome == "complete" else self.log.warning
        more = {"next_command": f"rhovane {report.counts['next']}"} if "next" in report.counts else {}
        write(f"night {report.outcome}", **facts, **more)

    def _tell_too_many(self, missed: list[dt.date], first: dt.date) -> None:
        span = str(missed[0]) if len(missed) == 1 else f"{missed[0]} to {missed[-1]}"
        self.note(
            "nights missed",
            f"The nights of {span} are not made up for one by one (service.catch_up_nights = "
            f"{self.settings.service.catch_up_nights}); the night of {first} takes in all that has arrived since.",
            at=planned_moment(self.settings, first),
        )

    def _keep(self, *, after_night: bool) -> None:
        """Check and copy the store; without a night before it only where an earlier process did not get that far."""
        day = self._newest_done
        assert day is not None
        with self.open_store() as store:
            if not after_night and not copy_due(self.settings, store, day):
                self._kept_for = day
                return
            self.faults = keep_store(self.settings, store, day)
            for fault in self.faults:
                self.note("store", f"{fault}. Run: rhovane verify", at=planned_moment(self.settings, day))
            if not self.faults:
                self.log.info("store checked and copied", night=str(day))
            self._kept_for = day
            self._post(store, self.clock.now())

    # -- feed and outbox ------------------------------------------------------------------------

    def poll(self) -> None:
        """Take in whatever is new in the feed folders."""
        if not self.stop.is_set():
            self._guarded("poll", self._poll)

    def _poll(self) -> None:
        with self.open_store() as store:
            done = ingest_now(self.settings, store, [], None, now=self.clock.now())
        for one in done.outcomes:
            if not one.already_known:
                counts = {"new": one.new, "revised": one.revised, "rejected": one.rejected}
                self.log.info("file taken in", file=one.path, **counts)
        for trouble in done.troubles:
            self.log.warning(trouble.reason, step=trouble.step, part=trouble.part)

    def send_wanted(self) -> bool:
        """Whether something in the outbox is due, as far as is known without opening the store."""
        now = self.clock.now()
        nothing = self._outbox_known and (self._next_send is None or now < self._next_send)
        wanted = bool(self._notices) or not nothing
        return wanted and bool(self.settings.delivery.channels) and self.idle.is_set()

    def send(self) -> None:
        """Send what waits in the outbox and is due."""
        if self.send_wanted() and not self.stop.is_set():
            self._guarded("send", self._send)

    def _send(self) -> None:
        if self._notices:
            with self.open_store() as store:
                self._post(store, self.clock.now())
        sent = send_waiting(self.settings, self.open_store, self.clock.now, stop=self.stop.is_set)
        self._outbox_known, self._next_send = True, sent.next_try
        if sent.delivered:
            self.log.info("messages delivered", count=sent.delivered)
        for channel, reason in sent.failed.items():
            self.log.warning(reason, step="deliver", channel=channel, waiting=sent.waiting)
        for remark in sent.remarks:
            self.log.warning(remark, step="deliver")

    # -- what is noticed ------------------------------------------------------------------------

    def note(self, kind: str, text: str, *, at: dt.datetime | None = None, tell: bool = True) -> None:
        """Write down something noticed: log, sign of life and, with ``tell``, the outbox at the next opening of the store."""
        moment = at or self.clock.now()
        self.log.warning(text, noticed=kind)
        self._events.append(Noticed(self.clock.now(), kind, text))
        if tell:
            self._notices.append(notice(kind, text, moment, network=self.settings.network.name))

    def _post(self, store: Store, now: dt.datetime) -> None:
        waiting = [self._notices.popleft() for _ in range(len(self._notices))]
        if waiting:
            try:
                post_notices(self.settings, store, waiting, now=now)
            except RhovaneError:
                self._notices.extendleft(reversed(waiting))
                raise
            self._outbox_known = False

    def beat(self, *, state: str = "running") -> Movement:
        """Give a sign of life, and look at the clocks and the disk; what happened to the clocks since the last."""
        look = Look.at(self.clock)
        moved = movement(self._looked or look, look)
        self._looked = look
        if moved.was_set:
            direction = "ahead" if moved.set_s > 0 else "back"
            far = abs(moved.set_s) >= TOLD_FROM_S
            text = f"The clock was set {direction} by {abs(moved.set_s):.0f} s."
            self.note("clock" if far else "clock corrected", text, tell=far)
            self._outbox_known = False
        if moved.was_suspended:
            self.note("suspended", f"The machine slept for {moved.suspended_s:.0f} s.", tell=False)
        self._look_at_disk()
        self._write_liveness(look.now, state)
        return moved

    def _look_at_disk(self) -> None:
        folder = self.settings.store_path.parent
        low = folder.exists() and (shutil.disk_usage(folder).free // MB < self.settings.service.min_free_mb)
        if low and not self._disk_low:
            self.note("disk", f"Less than {self.settings.service.min_free_mb} MB are free in {folder}.")
        self._disk_low = low

    def _write_liveness(self, now: dt.datetime, state: str) -> None:
        path = self.settings.store_path
        if self._begun is None:
            self._begun = now
            earlier = read_liveness(path)
            if earlier is not None:
                room = EVENTS_KEPT - len(self._events)
                self._events.extendleft(reversed(earlier.events[max(0, len(earlier.events) - room) :]))
        planned = newest_planned(self.settings, now)
        sign = Liveness(
            pid=os.getpid(),
            started=self._begun,
            beat=now,
            heartbeat_s=self.settings.service.heartbeat_s,
            state=state,
            doing=self._doing,
            next_night=planned_moment(self.settings, planned + DAY),
            events=tuple(self._events),
        )
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            write_liveness(path, sign)
        except (OSError, RhovaneError) as error:
            self.log.error(str(error), step="heartbeat")

    # -- guarding -------------------------------------------------------------------------------

    @contextmanager
    def _at_work(self, doing: str) -> Iterator[None]:
        self._doing = doing
        self.idle.clear()
        try:
            yield
        finally:
            self._doing = ""
            self.idle.set()

    def _guarded(self, step: str, do: Callable[[], None]) -> bool:
        """Do one job; whether it could be done. What stopped it is written down."""
        try:
            with self._at_work(step):
                do()
        except StoreLocked as error:
            self.log.warning(str(error), step=step)
            self.troubles = [error]
            return False
        except (RhovaneError, OSError) as error:
            self.note(f"{step} failed", str(error), tell=step == "upkeep")
            self.troubles = [error]
            return False
        return True

    def _pause(self, why: str) -> None:
        pause_s = min(FIRST_PAUSE_S * 2**self._failures, LONGEST_PAUSE_S)
        self._failures = min(self._failures + 1, MOST_DOUBLINGS)
        self._not_before = self.clock.elapsed() + pause_s
        self.log.info("the next attempt waits", why=why, seconds=pause_s)
