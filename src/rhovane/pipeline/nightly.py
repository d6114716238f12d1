"""The night: its steps in order, run once, written to the night ledger.

Reading the feed commits by itself, file contents known by hash, so a repeat adds nothing. Everything
computed (windows, evidence, alerts and the ledger's last word) commits in one transaction: a night that is
killed leaves either all of it or none, and the next start finds what is stale and does it.
"""

from __future__ import annotations

import datetime as dt
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import rhovane
from rhovane.model import ExitCode
from rhovane.pipeline.context import Night, StepOutcome, Trouble
from rhovane.pipeline.evidence import judge_days
from rhovane.pipeline.ingesting import read_feed
from rhovane.pipeline.raising import raise_alerts
from rhovane.pipeline.stale import find_stale
from rhovane.pipeline.windows import compute_windows
from rhovane.settings import Settings
from rhovane.store import Store

Step = tuple[str, Callable[[Night], str]]

STEPS: tuple[Step, ...] = (
    ("ingest", read_feed),
    ("stale", find_stale),
    ("windows", compute_windows),
    ("evidence", judge_days),
    ("alerts", raise_alerts),
)


@dataclass(frozen=True)
class NightReport:
    """What a night did: its ledger entry, step by step."""

    id: int
    as_of: dt.date
    outcome: str
    steps: tuple[StepOutcome, ...]
    troubles: tuple[Trouble, ...]
    counts: dict[str, Any]

    @property
    def exit_code(self) -> ExitCode:
        """How a command that ran this night ends."""
        if self.outcome != "complete":
            return ExitCode.NIGHT_INCOMPLETE
        if not self.counts.get("readings new") and not self.counts.get("readings revised"):
            return ExitCode.NOTHING_NEW
        return ExitCode.WELL


def run_night(
    settings: Settings,
    store: Store,
    *,
    as_of: dt.date,
    now: dt.datetime,
    progress: Callable[[str], None] = lambda _text: None,
    steps: tuple[Step, ...] = STEPS,
    kind: str = "nightly",
    recompute_from: dt.date | None = None,
) -> NightReport:
    """Run the steps of one night and write it to the ledger.

    Parameters
    ----------
    settings, store
        Loaded settings and the open store.
    as_of : date
        Last day the night covers, in the network's standard time; nothing later is used.
    now : datetime
        The moment of running (aware, UTC).
    progress : callable
        Called with a few words at the start of each step.
    steps : tuple
        The steps, in order; the default is the whole night.
    recompute_from : date, optional
        Treat every pair as stale from this day on, whatever the ledger says.

    Returns
    -------
    NightReport
        ``outcome`` is "complete", or "incomplete" when parts failed (they are listed and tried again by
        the next night).
    """
    store.ensure_series(settings.domain_series())
    night = Night(settings, store, as_of, now, progress=progress, recompute_from=recompute_from)
    night.id = store.begin_night(
        kind=kind,
        as_of=as_of,
        now=now,
        settings_hash=settings.settings_hash,
        program_version=rhovane.__version__,
    )
    outcomes: list[StepOutcome] = []
    before = [step for step in steps if step[0] == "ingest"]
    for step in before:
        outcomes.append(_run_step(step, night))
    with store.transaction():
        for step in steps:
            if step not in before:
                outcomes.append(_run_step(step, night))
        outcome = "incomplete" if night.troubles else "complete"
        store.finish_night(
            night.id,
            now=now,
            outcome=outcome,
            steps=[o.as_json() for o in outcomes],
            counts=night.counts,
        )
    return NightReport(night.id, as_of, outcome, tuple(outcomes), tuple(night.troubles), night.counts)


def _run_step(step: Step, night: Night) -> StepOutcome:
    name, do = step
    night.progress(name)
    known = len(night.troubles)
    started = time.perf_counter()
    summary = do(night)
    return StepOutcome(name, time.perf_counter() - started, summary, tuple(night.troubles[known:]))
