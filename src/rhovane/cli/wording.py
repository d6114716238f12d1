"""How results read in a terminal of 80 columns."""

from __future__ import annotations

import datetime as dt
import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING

from rhovane.model import CAUTION, CorrelationEstimate

if TYPE_CHECKING:
    from rhovane.pipeline import NightReport
    from rhovane.review import AlertEntry, Status

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
        lines.append("  The rest went on. `rhovane nightly` takes the failed parts up again.")
    return lines


def rho(estimate: CorrelationEstimate) -> str:
    """A correlation in few characters."""
    return "n/a" if estimate.statistic is None else f"{estimate.statistic:+.2f}"


def rho_in_full(estimate: CorrelationEstimate) -> str:
    """A correlation with what it rests on."""
    span = f"{estimate.first_day} to {estimate.last_day}, {estimate.n_pairs} hours"
    if estimate.statistic is None:
        return f"not computable ({estimate.reason}); {span}"
    text = f"{estimate.statistic:+.2f}"
    if estimate.low is not None and estimate.high is not None:
        text += f" (95 %: {estimate.low:+.2f} to {estimate.high:+.2f})"
    if estimate.n_effective is not None:
        span += f" worth {estimate.n_effective:.0f} independent ones"
    if estimate.reason:
        span += f"; interval: {estimate.reason}"
    return f"{text}; {span}"


def alert_table(entries: Sequence[AlertEntry], answers: dict[int, str] | None = None) -> list[str]:
    """The alert list, one line an alert; ``answers`` adds a last column."""
    if not entries:
        return ["No alerts in the log."]
    last = "answers to" if answers is not None else "state"
    head = f"{'id':>4}  {'alarm day':<10}  {'onset':<10}  {'what':<27} {'before':>6} {'after':>6}  {last}"
    lines = [head, "-" * min(WIDTH, len(head))]
    for entry in entries:
        a = entry.alert
        tail = answers.get(a.id, "-") if answers is not None else short_state(entry)
        what = what_changed(entry)
        what = what if len(what) <= 27 else what[:26] + "…"
        lines.append(
            f"{a.id:>4}  {a.alarm_day}  {a.onset_day}  {what:<27} {rho(a.before):>6} {rho(a.after):>6}  {tail}"
        )
    return lines


def what_changed(entry: AlertEntry) -> str:
    """The suspect: a series or station with its number of pairs, or the pair itself."""
    alert = entry.alert
    if alert.suspect and not alert.suspect.startswith("pair "):
        return f"{alert.suspect} ({len(alert.members)} pairs)"
    return alert.pair_key


def short_state(entry: AlertEntry) -> str:
    """State in a word or two, with the outcome where there is one."""
    state = entry.standing.state.value
    if entry.standing.superseded:
        state += ", superseded"
    if entry.standing.outcome is not None:
        state += f" ({entry.standing.outcome.value})"
    return state


def alert_lines(entry: AlertEntry) -> list[str]:
    """One alert in full."""
    a, standing = entry.alert, entry.standing
    facts = [
        ("state", short_state(entry) + (", change lasts" if standing.changed else "")),
        ("pairs", ", ".join(a.members) if len(a.members) > 1 else ""),
        ("alarm day", f"{a.alarm_day} (night of {a.night_as_of})"),
        ("onset", f"{a.onset_day} is the likeliest first day"),
        ("before", rho_in_full(a.before)),
        ("after", rho_in_full(a.after)),
        ("evidence", f"{a.evidence:.2f} against a threshold of {a.threshold:.2f} (logarithm of the chart)"),
        (
            "rests on",
            f"readings up to ingest {a.data_version}, settings {a.settings_hash}, recipe {a.recipe_hash}",
        ),
        *(("hint", hint) for hint in a.hints),
    ]
    lead = "" if a.suspect.startswith("pair ") or not a.suspect else f"{a.suspect}; "
    timing = ", best lag moved" if a.kind == "timing" else ""
    lines = [f"Alert {a.id}: {lead}{a.pair_key} became {a.direction}{timing}"]
    for name, text in facts:
        if text:
            lines += textwrap.wrap(text, WIDTH, initial_indent=f"  {name:<11}", subsequent_indent=" " * 13)
    lines.append("  log")
    for event in entry.events:
        extra = ", ".join(f"{k} {v}" for k, v in event.payload.items() if k in ("outcome", "until", "day"))
        text = f"{event.at:%Y-%m-%d %H:%M} UTC  {event.kind.value}" + (f" ({extra})" if extra else "")
        text += f", {event.who}" + (f": {event.note}" if event.note else "")
        lines += textwrap.wrap(text, WIDTH, initial_indent="    ", subsequent_indent=" " * 8)
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
