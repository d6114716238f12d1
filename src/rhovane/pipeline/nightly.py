"""The night: its steps in order, run once, written to the night ledger.

Reading the feed commits by itself, file contents known by hash, so a repeat adds nothing. Everything
computed (windows, evidence, alerts and the ledger's last word) commits in one transaction: a night that is
killed leaves either all of it or none, and the next start finds what is stale and does it.
"""

from __future__ import annotations

import datetime as dt
import math
import resource
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

import rhovane
from rhovane.model import ExitCode, StoreDamaged
from rhovane.pipeline.context import Night, NightStopped, StepOutcome, Trouble
from rhovane.pipeline.evidence import begin_hourly_scores, judge_days
from rhovane.pipeline.ingesting import read_feed
from rhovane.pipeline.memory import NightMemory
from rhovane.pipeline.noting import note_data, note_pairs
from rhovane.pipeline.raising import raise_alerts
from rhovane.pipeline.site_log import take_over_site_log
from rhovane.pipeline.stale import find_stale
from rhovane.pipeline.telling import count_failing, post_news
from rhovane.pipeline.windows import compute_windows
from rhovane.settings import Settings
from rhovane.store import Store

Step = tuple[str, Callable[[Night], str]]

OWN_TRANSACTION = ("ingest",)  # commits by itself; all later steps share one transaction

STEPS: tuple[Step, ...] = (
    ("ingest", read_feed),
    ("site log", take_over_site_log),
    ("stale", find_stale),
    ("data notes", note_data),
    ("hourly scores", begin_hourly_scores),
    ("windows", compute_windows),
    ("pair notes", note_pairs),
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
    checkpoint: bool = True,
    memory: NightMemory | None = None,
    arrived: Sequence[Path] | None = None,
    stop: Callable[[], bool] = lambda: False,
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
    checkpoint : bool
        Fold the write-ahead log into the store file at the end; False only for one of many nights in a row.
    memory : NightMemory, optional
        Handed from night to night of one process; saves reading and judging again what has not changed.
    arrived : sequence of Path, optional
        The feed files to look at; default: whatever is new in the feed folders.
    stop : callable
        Asked between steps and parts of steps whether the night is to stop there.

    Returns
    -------
    NightReport
        ``outcome`` is "complete"; "incomplete" when parts failed (they are listed and tried again by the
        next night); "failed" when a step as a whole did, or "stopped" when ``stop`` said so (nothing of the
        night's results is kept then, and the night is still to be run).
    """
    series = settings.domain_series()
    store.ensure_series(series)
    store.keep_segments(series, now=now)
    night = Night(
        settings,
        store,
        as_of,
        now,
        progress=progress,
        recompute_from=recompute_from,
        previous=store.last_finished_night(),
        checkpoint_ingest=False,
        checkpoint_night=checkpoint,
        memory=memory,
        arrived=arrived,
        stop=stop,
    )
    store.keep_settings(settings.settings_hash, settings.text)
    night.id = store.begin_night(
        kind=kind,
        as_of=as_of,
        now=now,
        settings_hash=settings.settings_hash,
        program_version=rhovane.__version__,
    )
    outcomes: list[StepOutcome] = []
    outcome = "failed"
    try:
        _run_steps([s for s in steps if s[0] in OWN_TRANSACTION], night, outcomes)
        with store.transaction():
            _run_steps([s for s in steps if s[0] not in OWN_TRANSACTION], night, outcomes)
            outcome = "incomplete" if night.troubles else "complete"
            _finish(night, outcome, outcomes)
    except NightStopped:
        outcome = "stopped"
        if memory is not None:
            memory.forget()
        _finish(night, outcome, outcomes)
    except Exception as error:  # noqa: BLE001  the one place: what stopped a night is written to its ledger
        outcome = "failed"
        if memory is not None:
            memory.forget()
        step = steps[len(outcomes)][0] if len(outcomes) < len(steps) else "ledger"
        night.failed(step, f"step {step}", f"{type(error).__name__}: {error}")
        night.counts["next"] = "verify" if isinstance(error, StoreDamaged) else f"nightly --as-of {as_of}"
        outcomes.append(
            StepOutcome(step, 0.0, "failed; nothing of the night's results was kept", tuple(night.troubles))
        )
        _finish(night, outcome, outcomes, tell=step != "ledger")
    return NightReport(night.id, as_of, outcome, tuple(outcomes), tuple(night.troubles), night.counts)


def _run_steps(steps: list[Step], night: Night, outcomes: list[StepOutcome]) -> None:
    limit_s = 60 * night.settings.night.step_limit_minutes
    for name, do in steps:
        night.progress(name)
        night.step_ends = math.inf
        night.may_go_on()
        known, held_mb = len(night.troubles), peak_memory_mb()
        started = time.perf_counter()
        night.step_ends = started + limit_s
        summary = do(night)
        seconds = time.perf_counter() - started
        _check_limits(night, name, seconds, held_mb)
        outcomes.append(
            StepOutcome(name, seconds, summary, tuple(night.troubles[known:]), peak_mb=peak_memory_mb())
        )


def peak_memory_mb() -> int:
    """The most memory that this process has held so far, in MB (resident)."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss // 1024


def _check_limits(night: Night, step: str, seconds: float, held_mb: int) -> None:
    """Note a step that took longer, or that took the process to more memory, than the settings allow."""
    limits = night.settings.night
    if seconds > 60 * limits.step_limit_minutes:
        night.failed(
            step,
            f"time for step {step}",
            f"took {seconds / 60:.1f} minutes, night.step_limit_minutes allows {limits.step_limit_minutes:g}",
        )
    peak = peak_memory_mb()
    if peak > max(held_mb, limits.memory_limit_mb):
        night.failed(
            step,
            f"memory for step {step}",
            f"the process held {peak} MB, night.memory_limit_mb allows {limits.memory_limit_mb}",
        )


def _finish(
    night: Night,
    outcome: Literal["complete", "incomplete", "failed", "stopped"],
    outcomes: list[StepOutcome],
    *,
    tell: bool = True,
) -> None:
    """Write the night's last word and, in the same transaction, what is to be told of it."""
    with night.store.transaction():
        if outcome != "stopped":
            count_failing(night)
        if tell and outcome != "stopped":
            post_news(night, outcome)
        night.store.finish_night(
            night.id,
            now=night.now,
            outcome=outcome,
            steps=[o.as_json() for o in outcomes],
            counts=night.counts,
            checkpoint=night.checkpoint_night,
        )
