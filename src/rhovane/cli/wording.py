"""How results read in a terminal of 80 columns."""

from __future__ import annotations

import datetime as dt
import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING

from rhovane.model import CorrelationEstimate

if TYPE_CHECKING:
    from rhovane.pipeline import NightReport
    from rhovane.review import AlertEntry, LogCounts, Nearby, Status
    from rhovane.store import StoredSiteLogEntry

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


def alert_lines(entry: AlertEntry, around: Nearby, standard_offset: dt.timedelta) -> list[str]:
    """One alert in full, with what site log and calendar say about the days around its onset."""
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
    about = [span_text(stored, standard_offset) for stored in around.site_log]
    if about:
        lines.append("  site log within 14 days of the onset (standard time)")
        for text in about:
            lines += textwrap.wrap(text, WIDTH, initial_indent="    ", subsequent_indent=" " * 8)
    if around.calendar:
        lines.append("  calendar within 14 days of the onset")
        for span in around.calendar:
            days = f"{span.first}" if span.first == span.last else f"{span.first} to {span.last}"
            lines.append(f"    {days}  {span.entry.title} ({span.entry.kind})")
    lines.append("  log")
    for event in entry.events:
        extra = ", ".join(
            f"{k} {v}" for k, v in event.payload.items() if k in ("outcome", "until", "day", "acts_from")
        )
        text = f"{event.at:%Y-%m-%d %H:%M} UTC  {event.kind.value}" + (f" ({extra})" if extra else "")
        text += f", {event.who}" + (f": {event.note}" if event.note else "")
        lines += textwrap.wrap(text, WIDTH, initial_indent="    ", subsequent_indent=" " * 8)
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
    if status.not_judged:
        lines.append("Pairs not judged that night (set aside, so silence says nothing):")
        lines += [f"  {pair}: {reason}" for pair, reason in status.not_judged.items()]
    lines.append(f"Rejected rows in quarantine: {status.rejected_rows}")
    return lines
