"""How results read in a terminal of 80 columns."""

from __future__ import annotations

import datetime as dt
import textwrap
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rhovane.pipeline import NightReport
    from rhovane.review import Status

WIDTH = 80
CAUTION = (
    "rhovane looks for changes in how series move together. It does not measure exposure or judge "
    "compliance, and it does not warn the public. Association is not cause. A quiet night does not prove "
    "that instruments are sound: a steady scale change leaves ranks unchanged. Reference methods, the "
    "network's quality system, local rules and competent judgement come first."
)


def caution_lines() -> list[str]:
    """The caution, wrapped."""
    return textwrap.wrap(CAUTION, WIDTH)


def night_lines(report: NightReport) -> list[str]:
    """What a night did."""
    lines = [f"Night of {report.as_of} (ledger {report.id}): {report.outcome}"]
    lines += [f"  {step.name:<13} {step.seconds:6.2f} s  {step.summary}" for step in report.steps]
    for trouble in report.troubles:
        lines += textwrap.wrap(
            f"failed: {trouble.part} ({trouble.step}): {trouble.reason}",
            WIDTH,
            initial_indent="  ",
            subsequent_indent="    ",
        )
    if report.troubles:
        lines.append("  The rest went on. `rhovane nightly` takes the failed parts up again.")
    return lines


def status_lines(status: Status, now: dt.datetime) -> list[str]:
    """The state of the watch."""
    lines = [f"{status.network}, {now:%Y-%m-%d %H:%M} UTC"]
    last = status.last_night
    if last is None:
        lines.append("NO NIGHT HAS RUN. Run `rhovane nightly`; until then silence means nothing.")
    else:
        lines.append(f"Last night: {last['as_of']}, {last['outcome']} (ledger {last['id']})")
        lines += [f"  {step['step']:<13} {step['summary']}" for step in last["steps"]]
        for step in last["steps"]:
            for failed in step["failed"]:
                lines += textwrap.wrap(
                    f"failed: {failed['part']}: {failed['reason']}",
                    WIDTH,
                    initial_indent="  ",
                    subsequent_indent="    ",
                )
    if status.nights_missed > 1:
        lines.append(
            f"{status.nights_missed} NIGHTS MISSED since then: silence since {last and last['as_of']} "
            "means no data, not no change."
        )
    count = sum(status.alerts_by_state.values())
    lines.append(f"Alerts: {count} in the log, {status.unreviewed} not yet reviewed")
    lines += [f"  {n:>4}  {state}" for state, n in sorted(status.alerts_by_state.items())]
    if status.silent_pairs:
        lines.append("Pairs with no correlation that night (no data is not no change):")
        lines += [f"  {p['pair']}: {p['reason']}" for p in status.silent_pairs]
    if status.silent_series:
        lines.append("Series behind:")
        lines += [
            f"  {s['series']}: "
            + ("never seen" if s["last_reading"] is None else f"{s['hours_behind']} h behind")
            for s in status.silent_series
        ]
    lines.append(f"Rejected rows in quarantine: {status.rejected_rows}")
    return lines
