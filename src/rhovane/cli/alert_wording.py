"""How alerts read in a terminal of 80 columns."""

from __future__ import annotations

import datetime as dt
import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING

from rhovane.cli.wording import WIDTH, span_text
from rhovane.model import (
    Alert,
    AlertSheet,
    AlertState,
    Bounded,
    CorrelationEstimate,
    Hint,
    Outcome,
    SeriesLevel,
    Witness,
)

if TYPE_CHECKING:
    from rhovane.pipeline import Reproduction
    from rhovane.review import AlertEntry, Nearby, Provenance

WHAT, STATE = 25, 16  # characters of two columns of the list
EARLIEST_ONSET = dt.timedelta(days=41)  # before the alarm day; the watch looks no further back
FEWEST_FILES_SUMMED = 5  # files of one source that are named one by one; of more, the first and the last
SHORT_STATE = {
    AlertState.RETURNED_UNACKNOWLEDGED: "returned, unack.",
    AlertState.RETURNED: "returned",
}
SHORT_OUTCOME = {Outcome.WEATHER_OR_SEASON: "weather, season"}
WORDS = (
    ("rho", "rank correlation, -1 to 1: how far two series rise and fall together, whatever their units"),
    (
        "interval",
        "where rho may lie, with 95 % confidence, allowing for hours that resemble their neighbours",
    ),
    ("independent", "unrelated hours worth as much as these; below 10 nothing can be tested"),
    ("change", "difference of the two rho after atanh, a scale on which equal steps are equally hard to see"),
    ("slope", "Theil-Sen: the median of all slopes between two hours"),
    ("z", "change in standard deviations of such a change; a pair moved from 2.5 on, held below 1.5"),
    ("evidence", "logarithm of the chart that crossed its threshold"),
)


def rho(estimate: CorrelationEstimate) -> str:
    """A correlation in few characters."""
    return "n/a" if estimate.statistic is None else f"{estimate.statistic:+.2f}"


def alert_table(entries: Sequence[AlertEntry], answers: dict[int, str] | None = None) -> list[str]:
    """The alert list, one line an alert; ``answers`` takes the place of the state."""
    if not entries:
        return ["No alerts in the log."]
    last = "answers to" if answers is not None else "state"
    head = f"{'id':>3}  {'alarm day':<10}  {'onset':<5}  {'what':<{WHAT}}  {'rho':<11}  {last}"
    lines = [head, "-" * WIDTH]
    for entry in entries:
        a = entry.alert
        tail = answers.get(a.id, "-") if answers is not None else short_state(entry)
        what = _cut(what_changed(entry), WHAT)
        moved = f"{rho(a.before)}→{rho(a.after)}"
        lines.append(f"{a.id:>3}  {a.alarm_day}  {a.onset_day:%m-%d}  {what:<{WHAT}}  {moved:<11}  {tail}")
    return lines


def _cut(text: str, width: int) -> str:
    return text if len(text) <= width else text[: width - 1] + "…"


def what_changed(entry: AlertEntry) -> str:
    """The suspect: a series or station with its number of pairs, or the pair itself."""
    alert = entry.alert
    if alert.suspect and not alert.suspect.startswith("pair "):
        return f"{alert.suspect} ({len(alert.members)} pairs)"
    return alert.pair_key


def short_state(entry: AlertEntry) -> str:
    """What was decided, or else the state, in a word or two."""
    standing = entry.standing
    if standing.outcome is not None:
        return _cut(SHORT_OUTCOME.get(standing.outcome, standing.outcome.value), STATE)
    if standing.superseded:
        return "superseded"
    return SHORT_STATE.get(standing.state, standing.state.value)


def state_in_full(entry: AlertEntry) -> str:
    """State, outcome, and whether the change lasts."""
    standing = entry.standing
    state = standing.state.value + (", superseded" if standing.superseded else "")
    if standing.outcome is not None:
        state += f" ({standing.outcome.value})"
    return state + (", change lasts" if standing.changed else "")


def alert_lines(
    entry: AlertEntry,
    provenance: Provenance | None = None,
    around: Nearby | None = None,
    standard_offset: dt.timedelta = dt.timedelta(),
    *,
    now: bool = False,
) -> list[str]:
    """One alert in full; ``now``: the sheet is of today's readings, not of those it was raised on."""
    a = entry.alert
    lead = "" if a.suspect.startswith("pair ") or not a.suspect else f"{a.suspect}; "
    timing = ", best lag moved" if a.kind == "timing" else ""
    lines = textwrap.wrap(f"Alert {a.id}: {lead}{a.pair_key} became {a.direction}{timing}", WIDTH)
    facts = [
        ("state", state_in_full(entry)),
        ("pairs", ", ".join(a.members) if len(a.members) > 1 else ""),
        ("alarm day", f"{a.alarm_day} (night of {a.night_as_of})"),
        ("onset", _onset(a)),
        ("evidence", f"{a.evidence:.2f} against a threshold of {a.threshold:.2f}"),
    ]
    lines += _facts(facts)
    if now and a.sheet is not None:
        lines += ["", f"As seen now: nights to {a.sheet.as_of}, readings to ingest {a.sheet.data_version}."]
    lines += ["", *textwrap.wrap(f"Rank correlation of {a.pair_key}", WIDTH), *_correlations(a)]
    if a.sheet is not None:
        lines += ["", "Level, which rho cannot see", *_levels(a.sheet)]
        lines += ["", f"Other pairs since {a.onset_day} (daily correlations)", *_witnesses(a.sheet.witnesses)]
    lines += ["", "Where to look first; association is not cause"]
    for hint in a.hints:
        lines += _hint(hint)
    if around is not None:
        lines += ["", "Site log and calendar within 14 days of the onset", *_around(around, standard_offset)]
    lines += ["", "Rests on", *_rests_on(a, provenance)]
    lines += ["", "Log", *_log(entry)]
    lines += ["", "Words"]
    return lines + _facts(WORDS)


def _facts(facts: Sequence[tuple[str, str]]) -> list[str]:
    lines = []
    for name, text in facts:
        if text:
            lines += textwrap.wrap(text, WIDTH, initial_indent=f"  {name:<12}", subsequent_indent=" " * 14)
    return lines


def _around(around: Nearby, standard_offset: dt.timedelta) -> list[str]:
    lines = []
    for stored in around.site_log:
        lines += textwrap.wrap(
            span_text(stored, standard_offset), WIDTH, initial_indent="  ", subsequent_indent=" " * 6
        )
    for span in around.calendar:
        days = f"{span.first}" if span.first == span.last else f"{span.first} to {span.last}"
        lines += textwrap.wrap(
            f"{days}  {span.entry.title} ({span.entry.kind})",
            WIDTH,
            initial_indent="  ",
            subsequent_indent=" " * 6,
        )
    return lines or ["  nothing entered"]


def _onset(a: Alert) -> str:
    if a.onset_first is None or a.onset_last is None:
        return f"{a.onset_day} is the likeliest first day"
    if a.onset_first == a.onset_last:
        return f"{a.onset_day} (with a probability of 90 % or more)"
    earlier = " or earlier" if a.onset_first <= a.alarm_day - EARLIEST_ONSET else ""
    return f"about {a.onset_day} ({a.onset_first}{earlier} to {a.onset_last}, 90 % probability)"


def _correlations(a: Alert) -> list[str]:
    lines = [f"  {'':<12}{'rho':>5}  {'95 % interval':<16}{'hours':>6}{'independent':>13}  days"]
    rows = [("before", a.before), ("after", a.after)]
    if a.sheet is not None and a.sheet.year_earlier.n_pairs:
        rows.append(("a year ago", a.sheet.year_earlier))
    notes = []
    for name, one in rows:
        interval = "not assessable" if one.low is None else f"{one.low:+.2f} to {one.high:+.2f}"
        worth = "-" if one.n_effective is None else f"{one.n_effective:.0f}"
        span = f"{one.first_day:%m-%d} to {one.last_day:%m-%d}"
        lines.append(f"  {name:<12}{rho(one):>5}  {interval:<16}{one.n_pairs:>6}{worth:>13}  {span}")
        reasons = dict.fromkeys(r for r in (one.reason, one.interval_reason) if r)
        notes += [f"{name}: {reason}" for reason in reasons]
    if a.sheet is None:
        return lines + _facts([("note", note) for note in notes])
    sheet = a.sheet
    change = _interval(sheet.change, "+.2f")
    if sheet.change.low is not None and sheet.change.high is not None:
        clear = sheet.change.low > 0 or sheet.change.high < 0
        change += ": the interval excludes no change" if clear else ": the interval includes no change"
    facts = [("change", change), *(("note", note) for note in notes)]
    if not sheet.year_earlier.n_pairs:
        facts.append(("a year ago", sheet.year_earlier.reason or "no readings a year earlier"))
    if sheet.episode.days and sheet.episode.without is not None:
        days = ", ".join(map(str, sheet.episode.days))
        facts.append(
            (
                "episode",
                f"of {len(sheet.episode.days)} days: without {days} rho is {sheet.episode.without:+.2f}",
            )
        )
    elif sheet.episode.reason is not None:
        facts.append(("episode", f"not assessable: {sheet.episode.reason}"))
    else:
        facts.append(("episode", "no: leaving out up to 5 days does not bring the earlier rho back"))
    return lines + _facts(facts)


def _interval(one: Bounded, form: str) -> str:
    if one.value is None:
        return f"not assessable ({one.reason})"
    if one.low is None or one.high is None:
        return f"{one.value:{form}} (interval not assessable: {one.reason})"
    return f"{one.value:{form}} ({one.low:{form}} to {one.high:{form}})"


def _levels(sheet: AlertSheet) -> list[str]:
    facts = [(level.series, _level(level)) for level in sheet.levels]
    first, second = (level.series for level in sheet.levels)
    slope = f"{_interval(sheet.slope_before, '.3g')} → {_interval(sheet.slope_after, '.3g')}"
    lines = []
    for name, text in (*facts, (f"slope of {second} on {first}", slope)):
        lines += textwrap.wrap(f"{name}: {text}", WIDTH, initial_indent="  ", subsequent_indent=" " * 14)
    return lines


def _level(level: SeriesLevel) -> str:
    values = ["n/a" if one.value is None else f"{one.value:.3g}" for one in (level.before, level.after)]
    text = f"median {values[0]} → {values[1]} {level.unit}"
    if level.ratio.value is not None or level.ratio.reason:
        text += f", × {_interval(level.ratio, '.2f')}"
    if level.spread_ratio is not None:
        text += f"; spread × {level.spread_ratio:.2f}"
    return text


def _witnesses(witnesses: Sequence[Witness]) -> list[str]:
    groups = (
        ("own", "pairs of the suspect"),
        ("partner", "other pairs of its partners"),
        ("alike", "the same quantities elsewhere"),
    )
    lines = []
    for relation, title in groups:
        mine = [w for w in witnesses if w.relation == relation]
        if not mine:
            continue
        n_moved = sum(w.moved is True for w in mine)
        lines.append(f"  {title}: {n_moved} of {len(mine)} moved")
        order = (("moved", True), ("held", False), ("unclear", None))
        lines += [f"    {word:<8}{_witness(w)}" for word, moved in order for w in mine if w.moved is moved]
    return lines or ["  none shares a series or the quantities with it"]


def _witness(w: Witness) -> str:
    values = ["n/a" if v is None else f"{v:+.2f}" for v in (w.before, w.after)]
    z = f"{w.n_days} days scored" if w.z is None else f"z {w.z:+.1f}"
    return f"{_cut(w.pair, 44):<44}  {values[0]:>5} → {values[1]:<5}  {z}"


def _hint(hint: Hint) -> list[str]:
    lines = textwrap.wrap(hint.text, WIDTH, initial_indent="  ", subsequent_indent="    ")
    told = [
        *(("for", s) for s in hint.supports),
        *(("against", s) for s in hint.against),
        ("check", hint.check),
    ]
    for name, text in told:
        if text:
            lines += textwrap.wrap(text, WIDTH, initial_indent=f"    {name:<9}", subsequent_indent=" " * 13)
    return lines


def _rests_on(a: Alert, provenance: Provenance | None) -> list[str]:
    facts = [
        ("night", f"{a.night_as_of} (ledger {a.night_id})"),
        ("data", f"readings up to ingest {a.data_version}"),
        ("settings", a.settings_hash),
        ("recipe", a.recipe_hash),
    ]
    lines = _facts(facts)
    if provenance is None:
        return lines
    lines.append(f"  readings    {provenance.first} to {provenance.last}, by series and source:")
    for series, source in dict.fromkeys((o.series, o.source) for o in provenance.origins):
        mine = [o for o in provenance.origins if (o.series, o.source) == (series, source)]
        n = sum(o.n_readings for o in mine)
        lines.append(f"    {series} from {source}: {n} readings in {len(mine)} files")
        shown = mine if len(mine) < FEWEST_FILES_SUMMED else [mine[0], mine[-1]]
        for o in shown:
            lines_of = (
                "given again since" if o.first_line is None else f"lines {o.first_line} to {o.last_line}"
            )
            text = f"{o.path} {lines_of}, sha256 {o.sha256[:12]}"
            lines += textwrap.wrap(text, WIDTH, initial_indent=" " * 6, subsequent_indent=" " * 8)
    lines.append("  every file: rhovane alert ID --json; recomputed: rhovane alert ID --reproduce")
    return lines


def _log(entry: AlertEntry) -> list[str]:
    lines = []
    for event in entry.events:
        extra = ", ".join(
            f"{k} {v}" for k, v in event.payload.items() if k in ("outcome", "until", "day", "acts_from")
        )
        text = f"{event.at:%Y-%m-%d %H:%M} UTC  {event.kind.value}" + (f" ({extra})" if extra else "")
        text += f", {event.who}" + (f": {event.note}" if event.note else "")
        lines += textwrap.wrap(text, WIDTH, initial_indent="  ", subsequent_indent=" " * 6)
    return lines


def reproduction_lines(found: Reproduction) -> list[str]:
    """Whether an alert computed again is the same."""
    a = found.alert
    inputs = f"readings to ingest {a.data_version}, settings {a.settings_hash}, night of {a.night_as_of}"
    if found.matches:
        text = f"Alert {a.id} computed again from {inputs}: the same in every bit."
    elif found.computed is None:
        text = f"Alert {a.id} computed again from {inputs}: NOT FOUND in the evidence any more."
    else:
        text = f"Alert {a.id} computed again from {inputs}: DIFFERS in {', '.join(found.differing)}."
    if found.recorded_version != found.this_version:
        text += f" It was raised by version {found.recorded_version}; this is {found.this_version}."
    return textwrap.wrap(text, WIDTH)
