"""Steps "data notes" and "pair notes": what is wrong with the data, written down night by night.

Notes about series come before anything is computed, because windows are split at a noted change of unit. Notes about
pairs come after the windows. Neither ever raises an alert.
"""

from __future__ import annotations

import dataclasses
import datetime as dt
from bisect import bisect_right

import numpy as np

from rhovane.model import STEP_KINDS, DataNote, NoteKind
from rhovane.pipeline.arrays import load_grid
from rhovane.pipeline.checks import LOOKBACK_DAYS as CHECK_DAYS
from rhovane.pipeline.checks import left_out_look
from rhovane.pipeline.context import Night, WatchedPair
from rhovane.pipeline.findings import DAY_S, HOUR_S, Finding, Look, Looker, Network
from rhovane.pipeline.note_changes import KnownNotes, changed_notes, seconds
from rhovane.stats import data_faults as faults

DAY = dt.timedelta(days=1)


def note_data(night: Night) -> str:
    """Bring the notes about series up to date, and find what windows have to be split at."""
    if night.previous is not None and night.previous.as_of > night.as_of:
        night.cuts = cuts_of(night)
        return f"the night of {night.previous.as_of} has looked at later days; the notes are left as they are"
    since = _first_new_day(night)
    night.counts["notes"] = night.settings.notes_hash
    changed: list[DataNote] = []
    if since is not None:
        night.notes_from = since
        grid = night.grid()
        network = Network.of(night.settings, grid.keys, night.counts["first_hours"])
        memory = night.memory
        looker = Looker(
            night.settings,
            network,
            grid,
            night.days,
            since,
            _new_from(night, grid.keys, since),
            None if memory is None else memory.steps,
        )
        step_look, steps = looker.steps()
        if memory is not None:
            memory.steps = steps
        looks = (*looker.looks(), step_look)
        if night.settings.check:
            raw = load_grid(
                night.settings,
                night.store,
                grid.keys,
                since - (CHECK_DAYS + 1) * DAY,
                night.as_of,
                checked=False,
            )
            looks = (*looks, left_out_look(night.settings, raw, night.days, since))
        for look in looks:
            changed += write(night, look)
    night.cuts = cuts_of(night)
    _windows_to_split(night, changed)
    return f"{len(changed)} new or changed, {known_notes(night).n_open} open"


def _first_new_day(night: Night) -> dt.date | None:
    """First day with readings that the notes have not seen; None when there is none up to the night's last day."""
    first_hours = [
        int(dt.datetime.fromisoformat(t).timestamp()) for t in night.counts["first_hours"].values()
    ]
    if not first_hours:
        return None
    begin = night.days.day_of(min(first_hours))
    last = night.previous
    if last is None or last.counts.get("notes") != night.settings.notes_hash:
        return begin if begin <= night.as_of else None
    since = min([*_touched(night).values(), last.as_of + DAY])
    if night.recompute_from is not None:
        since = min(since, night.recompute_from)
    since = max(since, begin)
    return since if since <= night.as_of else None


def _new_from(night: Night, keys: tuple[str, ...], since: dt.date) -> tuple[dt.date, ...] | None:
    """For each series the first day that is new or revised; None where all of them have to be looked at again."""
    last = night.previous
    touched = _touched(night)
    if last is None or since < min([last.as_of + DAY, *touched.values()]):
        return None
    return tuple(min(touched.get(key, last.as_of + DAY), last.as_of + DAY) for key in keys)


def _touched(night: Night) -> dict[str, dt.date]:
    days = night.days
    return {key: days.day_of(int(at.timestamp())) for key, at in night.changed.items()}


def known_notes(night: Night) -> KnownNotes:
    """The data notes that hold: from the store once, then remembered."""
    if night.notes is None:
        remembered = None if night.memory is None else night.memory.notes
        night.notes = KnownNotes(night.store.data_notes()) if remembered is None else remembered
        if night.memory is not None:
            night.memory.notes = night.notes
    return night.notes


def write(night: Night, look: Look) -> list[DataNote]:
    """Write down what a look changes."""
    known = known_notes(night)
    changed = changed_notes(known, look, night_id=night.id)
    if changed:
        night.store.append_notes(changed)
        known.put(changed)
    return changed


# -- windows split at a step -------------------------------------------------------------------------


def cuts_of(night: Night) -> dict[str, list[int]]:
    """For each series the seconds since 1970 at which its windows are split, ascending.

    At the noted steps that the settings say, and wherever a segment of the series begins.
    """
    kinds = _split_kinds(night)
    cuts: dict[str, list[int]] = {}
    for series in night.settings.series:
        for segment in series.segments:
            cuts.setdefault(series.key, []).append(night.days.start_of(segment.first_day))
    for note in known_notes(night).of("step"):
        if note.kind in kinds:
            cuts.setdefault(note.subject, []).append(seconds(note.begin))
    return {key: sorted(found) for key, found in cuts.items()}


def _split_kinds(night: Night) -> tuple[NoteKind, ...]:
    match night.settings.data_notes.split_at:
        case "every step":
            return STEP_KINDS
        case "unit switch":
            return (NoteKind.UNIT_SWITCH,)
        case _:
            return ()


def _windows_to_split(night: Night, changed: list[DataNote]) -> None:
    """Windows since a step that this night noted, dated anew or withdrew have to be computed again."""
    if not _split_kinds(night):
        return
    since: dict[str, dt.date] = {}
    for note in changed:
        if note.kind in STEP_KINDS:
            # A step that is dated anew moves by days; the earlier date lies this much before at most.
            day = night.days.day_of(seconds(note.begin)) - (0 if note.version == 1 else 12) * DAY
            since[note.subject] = min(day, since.get(note.subject, day))
    for i, watched in enumerate(night.watched):
        days = [since[key] for key in night.settings.series_of(watched.recipe) if key in since]
        first = _first_day(night, watched)
        if days and watched.windows_from is not None and first is not None:
            night.watched[i] = dataclasses.replace(
                watched, windows_from=max(min([*days, watched.windows_from]), first)
            )


def _first_day(night: Night, watched: WatchedPair) -> dt.date | None:
    """The first day with a reading of both members; None while one of them has never been seen."""
    known = night.counts["first_hours"]
    first = [known[key] for key in (watched.recipe.first, watched.recipe.second) if key in known]
    if len(first) < 2:
        return None
    return max(night.days.day_of(int(dt.datetime.fromisoformat(t).timestamp())) for t in first)


def split_in(night: Night, watched: WatchedPair, end_s: int, reach_hours: int) -> dict[str, int]:
    """The last cut of each series of a pair inside a window that ends with the hour ``end_s``."""
    found = {}
    for key in night.settings.series_of(watched.recipe):
        cuts = night.cuts.get(key, [])
        at = bisect_right(cuts, end_s)
        if at and cuts[at - 1] > end_s - reach_hours * HOUR_S:
            found[key] = cuts[at - 1]
    return found


# -- pairs without a result --------------------------------------------------------------------------


def note_pairs(night: Night) -> str:
    """Bring the notes about pairs whose correlation cannot be computed up to date."""
    if not night.windows or (night.previous is not None and night.previous.as_of > night.as_of):
        return "nothing new"
    changed = 0
    for since, findings in _findings_by_start(night).items():
        subjects = frozenset(findings)
        found = tuple(f for of_pair in findings.values() for f in of_pair)
        look = Look(NoteKind.NOT_COMPUTABLE.value, since - DAY_S, since, found, subjects)
        changed += len(write(night, look))
    held = sum(n.is_open for n in known_notes(night).of(NoteKind.NOT_COMPUTABLE.value))
    return f"{changed} new or changed, {held} pairs not computable"


def _findings_by_start(night: Night) -> dict[int, dict[str, list[Finding]]]:
    """Stretches of days without a correlation at lag 0, by the start of the first day computed, and by pair."""
    covered: dict[str, list[DataNote]] = {}
    for note in known_notes(night).of(NoteKind.NOT_COMPUTABLE.value):
        covered.setdefault(note.subject, []).append(note)
    window_days = max(1, night.settings.correlation.window_hours // 24)
    by_start: dict[int, dict[str, list[Finding]]] = {}
    by_key = {w.pair.key: w for w in night.watched}
    for table in night.windows:
        rows = np.flatnonzero(table["lag"] == 0)
        if len(rows):
            key = str(table["pair_key"][0])
            end_s = table["window_end"][rows]
            start = int(end_s[0]) - 23 * HOUR_S
            missing = np.isnan(table["statistic"][rows])
            before = any(
                seconds(n.begin) < start and (n.end is None or seconds(n.end) >= start - HOUR_S)
                for n in covered.get(key, ())
            )
            first = _first_day(night, by_key[key])
            if first is None or (not before and not missing.any()):
                by_start.setdefault(start, {})[key] = []
                continue
            judged = night.days.start_of(first + window_days * DAY)
            missing &= end_s >= judged
            runs = faults.runs_of(np.concatenate(([before], missing))[:, None])
            by_start.setdefault(start, {})[key] = [
                Finding(
                    key,
                    NoteKind.NOT_COMPUTABLE,
                    start + DAY_S * (begin - 1),
                    None if end == len(rows) else start + DAY_S * end - HOUR_S,
                    {"reason": table["reason"][rows[max(0, begin - 1)]]},
                )
                for begin, end in zip(runs.begin.tolist(), runs.end.tolist(), strict=True)
            ]
    return by_start
