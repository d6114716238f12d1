"""How results read in a terminal of 80 columns."""

from __future__ import annotations

import datetime as dt
import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING

from rhovane.model import CAUTION

if TYPE_CHECKING:
    from rhovane.model import DataNote
    from rhovane.pipeline import NightReport, Sent
    from rhovane.review import LogCounts, Status
    from rhovane.store import Check, StoredSiteLogEntry

WIDTH = 80


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
        lines.append(
            f"  Next: rhovane {report.counts['next']}"
            if "next" in report.counts
            else "  The rest went on. `rhovane nightly` takes the failed parts up again."
        )
    return lines


def sent_lines(sent: Sent) -> list[str]:
    """What was sent, and what still waits for which reason."""
    lines = [f"Messages: {sent.delivered} delivered, {sent.waiting} waiting"]
    lines += [f"  {channel} failed: {reason}" for channel, reason in sent.failed.items()]
    lines += [f"  {remark}" for remark in sent.remarks]
    return lines


def span_text(stored: StoredSiteLogEntry, standard_offset: dt.timedelta) -> str:
    """An entry of the site log in one line."""
    zone = dt.timezone(standard_offset)
    one = stored.entry
    end = "still going on" if one.end is None else f"to {one.end.astimezone(zone):%Y-%m-%d %H:%M}"
    gone = "" if stored.stands else f"; withdrawn {stored.withdrawn_at:%Y-%m-%d}"
    return (
        f"{one.start.astimezone(zone):%Y-%m-%d %H:%M} {end}  {one.subject}: {one.what} "
        f"(readings {one.readings.value}{gone})"
    )


def site_log_lines(entries: Sequence[StoredSiteLogEntry], standard_offset: dt.timedelta) -> list[str]:
    """The site log, one entry after the other; times are standard time."""
    lines = []
    for stored in entries:
        acts = "" if stored.acts_from is None else f", acts from the night of {stored.acts_from}"
        text = f"{stored.number:>4}  {span_text(stored, standard_offset)}, {stored.who}{acts}"
        lines += textwrap.wrap(text, WIDTH, subsequent_indent=" " * 6)
    return lines or ["No entries in the site log."]


def count_lines(counts: LogCounts) -> list[str]:
    """Counts over the alert log."""
    lines = [f"{counts.alerts} alerts in the log", "New alerts by ISO week:"]
    lines += [f"  {n:>4}  {week}" for week, n in counts.by_week.items()]
    lines.append("By what was named first to look at:")
    lines += [f"  {n:>4}  {suspect}" for suspect, n in counts.by_suspect.items()]
    share = counts.confirmed_share
    told = "none decided yet" if share is None else f"something was behind {share:.0%} of those decided"
    lines.append(f"By outcome ({told}):")
    lines += [f"  {n:>4}  {outcome}" for outcome, n in counts.by_outcome.items()]
    lines.append(f"Stale, not reviewed for 14 days: {', '.join(map(str, counts.stale)) or 'none'}")
    lines.append("Chattering, 3 or more alerts within 30 days:" + ("" if counts.chattering else " none"))
    lines += [f"  {c.alerts:>4}  {c.suspect}, {c.first} to {c.last}" for c in counts.chattering]
    return lines


def check_lines(checks: Sequence[Check]) -> list[str]:
    """What was checked in the store, the first faults, and what to do."""
    lines = []
    for check in checks:
        lines.append(f"  {'FAULTY' if check.faults else 'well':<7}{check.what}: {check.extent}")
        for fault in check.faults:
            lines += textwrap.wrap(fault, WIDTH, initial_indent=" " * 9, subsequent_indent=" " * 11)
    remedies = dict.fromkeys(c.remedy for c in checks if c.remedy)
    for remedy in remedies:
        lines += ["", *textwrap.wrap(remedy, WIDTH)]
    return lines


def note_lines(notes: Sequence[DataNote], offset: dt.timedelta, most: int | None = None) -> list[str]:
    """Data notes, one after the other, days and hours in the network's standard time."""
    from rhovane.review import note_state, note_words

    lines: list[str] = []
    for note in notes[:most]:
        begin = (note.begin + offset).strftime("%Y-%m-%d %H:%M")
        state = note_state(note)
        if state == "over" and note.end is not None:
            state = f"to {note.end + offset:%Y-%m-%d %H:%M}"
        text = f"{begin}  {note.subject}: {note.kind.value}: {note_words(note)}"
        text += f" [{state}]" if state else ""
        lines += textwrap.wrap(text, WIDTH, initial_indent="  ", subsequent_indent=" " * 6)
    if most is not None and len(notes) > most:
        lines.append(f"  and {len(notes) - most} more: rhovane notes")
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
        if "next" in last["counts"]:
            lines.append(f"  Next: rhovane {last['counts']['next']}")
        lines += [
            f"  failing for {nights} nights running: {part}"
            for part, nights in last["counts"].get("failing", {}).items()
            if nights > 1
        ]
    if status.nights_missed:
        nights = "1 NIGHT" if status.nights_missed == 1 else f"{status.nights_missed} NIGHTS"
        lines.append(
            f"{nights} MISSED since then: silence since {last and last['as_of']} means no data, not no change."
        )
    for concern in status.concerns:
        lines += textwrap.wrap(
            f"{concern.kind.upper()}: {concern.found}. {concern.remedy}", WIDTH, subsequent_indent="  "
        )
    if status.service is not None:
        doing = status.service["doing"] or "waits"
        what = (
            f"{doing}, next night {status.service['next_night'][:16]} UTC"
            if status.service["alive"]
            else "not running"
        )
        lines.append(f"Service: {what} (last sign of life {status.service['beat'][:16]} UTC)")
    count = sum(status.alerts_by_state.values())
    lines.append(f"Alerts: {count} in the log, {status.unreviewed} not yet reviewed")
    lines += [f"  {n:>4}  {state}" for state, n in sorted(status.alerts_by_state.items())]
    if status.silent_pairs:
        lines.append("Pairs with no correlation that night (no data is not no change):")
        lines += [f"  {p['pair']}: {p['reason']}" for p in status.silent_pairs]
    if status.silent_series:
        lines.append(
            f"Series without data (no data is not no change): {len(status.silent_series)} of {status.series_watched}"
        )
        lines += [
            f"  {s['series']}: "
            + ("never seen" if s["last_reading"] is None else f"{s['hours_behind']} h behind")
            for s in status.silent_series
        ]
    if status.not_judged:
        lines.append("Pairs not judged that night (set aside, so silence says nothing):")
        lines += [f"  {pair}: {reason}" for pair, reason in status.not_judged.items()]
    if status.segments:
        lines.append(
            "Series with a new instrument or place (correlations across the border are not comparable):"
        )
        lines += [f"  {g['series']} from {g['first_day']}: {g['what']}" for g in status.segments]
    lines.append(f"Data notes that last: {status.notes_open} (rhovane notes)")
    if status.falling_coverage:
        lines.append("Pairs with fewer and fewer readings (coverage a week before → in the newest window):")
        lines += [f"  {f['pair']}: {f['before']:.0%} → {f['now']:.0%}" for f in status.falling_coverage]
    lines.append(f"Rejected rows in quarantine: {status.rejected_rows}")
    return lines
