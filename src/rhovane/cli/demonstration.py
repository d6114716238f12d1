"""The demo: an invented network walked night by night in a working folder of its own."""

from __future__ import annotations

import datetime as dt
import gc
import shutil
import subprocess
import sys
import time
import tomllib
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from rhovane.cli.alert_wording import alert_table
from rhovane.cli.wording import caution_lines
from rhovane.model import STEP_KINDS, DataNote, NoteKind, NoteState, RhovaneError
from rhovane.pipeline import nights_between, walk_nights
from rhovane.review import AlertEntry, alert_entries, all_notes
from rhovane.settings import Settings, load_settings
from rhovane.store import Store
from rhovane_demo import SETTINGS_FILES, settings_text
from rhovane_demo.feed import deliveries, write_files
from rhovane_demo.planted import BY_ID, TABLE, Planted, answers
from rhovane_demo.world import make_world

NIGHT_HOUR = dt.time(3, 40)
LONGEST_LINE = 110
COMPILED_TOGETHER = {
    "hourly scores": ("scores", "windows"),
    "alerts": ("watch",),
}  # by the step that waits for it
LONGEST_EVENT_DAYS = 200  # a turning of the seasons lasts longer than any planted change
ARCHIVE_DAYS = 215  # days taken in at once at the start, to the end of January: an archive


@dataclass
class Walked:
    """What walking the nights did; ``night`` is the one at work."""

    night: dt.date
    nights: int = 0
    incomplete: int = 0
    seconds: float = 0.0
    new: int = 0
    revised: int = 0
    rejected: int = 0


class Demonstration:
    """The demo's settings, world and working folder.

    Raises
    ------
    RhovaneError
        The settings file watches another network: the demo never writes into somebody's own folder.
    """

    def __init__(self, config: Path, *, seed: int, events: bool, fresh: bool) -> None:
        if not config.exists():
            config.parent.mkdir(parents=True, exist_ok=True)
            for name in SETTINGS_FILES:
                place = config if name == "monitor.toml" else config.parent / name
                if not place.exists():
                    place.write_text(settings_text(name), encoding="utf-8")
        self.config = config
        self.settings: Settings = load_settings(config)
        if self.settings.network.name != tomllib.loads(settings_text())["network"]["name"]:
            raise RhovaneError(
                f"{config} watches {self.settings.network.name!r}, not the demo's network. "
                "Nothing was run. Give the demo a settings file of its own: "
                "rhovane demo --config demo-config/monitor.toml"
            )
        self.seed, self.events = seed, events
        self.folder = self.settings.work_folder
        self._prepare_folder(fresh)

    def _prepare_folder(self, fresh: bool) -> None:
        """Make the working folder, or go on in the one that the same demo left."""
        mark = self.folder / "demo-world.txt"
        wanted = f"seed {self.seed}, {'with' if self.events else 'without'} planted changes\n"
        if fresh and mark.exists():
            shutil.rmtree(self.folder)
        if self.folder.exists() and any(self.folder.iterdir()) and not mark.exists():
            raise RhovaneError(
                f"{self.folder} is not empty and was not made by the demo. Nothing was run. "
                "Move it away, or change network.work_folder."
            )
        if mark.exists() and mark.read_text(encoding="utf-8") != wanted:
            raise RhovaneError(
                f"{self.folder} holds a demo with {mark.read_text(encoding='utf-8').strip()}; "
                f"asked for {wanted.strip()}. Nothing was run. Add --fresh to begin again."
            )
        self.folder.mkdir(parents=True, exist_ok=True)
        mark.write_text(wanted, encoding="utf-8")

    def opening_line(self) -> str:
        """What is about to happen."""
        what = "with planted changes and decoys" if self.events else "with nothing planted"
        return (
            f"Demo: {self.settings.network.name}, seed {self.seed}, {what}.\n"
            f"Working folder: {self.folder}\n"
            f"The first {ARCHIVE_DAYS} days come as an archive, then night by night. The first run compiles the "
            "statistics once (some seconds)."
        )

    def walk(
        self,
        store: Store,
        *,
        nights: int | None,
        tell: Callable[[dt.date, int, int], None],
    ) -> Walked:
        """Deliver each day's files and run its night, oldest first; goes on where an earlier demo stopped.

        The first days, which no night could judge yet, arrive together as the network's archive.
        """
        started = time.perf_counter()
        compiling = {
            step: subprocess.Popen([sys.executable, "-m", "rhovane.stats.compile_ahead", *parts])
            for step, parts in COMPILED_TOGETHER.items()
        }
        arriving = {d.night: d.files for d in deliveries(make_world(seed=self.seed, events=self.events))}
        first, last = min(arriving), max(arriving)
        if nights is not None:
            last = min(last, first + dt.timedelta(days=nights - 1))
        archive = min(last, first + dt.timedelta(days=ARCHIVE_DAYS - 1))
        total = (last - archive).days + 1
        zone = dt.timezone(self.settings.network.standard_offset)

        def deliver(day: dt.date) -> list[Path]:
            walked.night = day
            days = nights_between(first, day) if day == archive else [day]
            return [path for one in days for path in write_files(arriving[one], self.folder / "feed")]

        def moment(day: dt.date) -> dt.datetime:
            run_at = dt.datetime.combine(day + dt.timedelta(days=1), NIGHT_HOUR, zone)
            return run_at.astimezone(dt.UTC)

        def before_step(step: str) -> None:
            learning = walked.night < first + dt.timedelta(days=self.settings.alerts.baseline_days)
            if step in compiling and not (step == "alerts" and learning):
                compiling.pop(step).wait()

        walked = Walked(night=archive)
        gc.freeze()  # the feed's thousands of files need not be looked through again and again
        for report in walk_nights(
            self.settings, store, archive, last, moment_of=moment, arrivals=deliver, progress=before_step
        ):
            walked.nights += 1
            walked.incomplete += report.outcome != "complete"
            walked.new += report.counts.get("readings new", 0)
            walked.revised += report.counts.get("readings revised", 0)
            walked.rejected += report.counts.get("rows rejected", 0)
            tell(report.as_of, (report.as_of - archive).days + 1, total)
        for one in compiling.values():
            one.wait()
        walked.seconds = time.perf_counter() - started
        return walked

    def closing_lines(self, store: Store, walked: Walked, now: dt.datetime) -> list[str]:
        """The alert list, the planted changes it answers to, and what to run next."""
        last = store.last_finished_night()
        entries = list(reversed(alert_entries(store, now)))
        lines = [
            f"{walked.nights} nights walked in {walked.seconds:.0f} s"
            + (f", up to {last.as_of}" if last else "")
            + f": {walked.new} readings new, {walked.revised} revised, {walked.rejected} rows in quarantine"
            + (f"; {walked.incomplete} nights incomplete" if walked.incomplete else ""),
            "",
            f"Alert list ({len(entries)}; {self.settings.alerts.false_alarms_per_year:g} false alarms "
            "a year accepted over the network):",
        ]
        if self.events:
            answered = {e.alert.id: answer_of(e) for e in entries}
            lines += alert_table(entries, {k: answer_words(v) for k, v in answered.items()})
            lines += ["", "Planted changes and what answers to them:"]
            notes = [n for n in all_notes(store) if n.kind is not NoteKind.NOT_COMPUTABLE]
            lines += planted_lines(entries, answered, last.as_of if last else None, notes)
        else:
            lines += alert_table(entries)
        first = entries[0].alert.id if entries else None
        config = "" if self.config == Path("config/monitor.toml") else f" --config {self.config}"
        lines += ["", "Next:"]
        if first is not None:
            lines += [
                f"  rhovane alert {first}{config}",
                f'  rhovane acknowledge {first} --note "checked the site log"{config}',
                f"  rhovane outcome {first} real-change{config}",
            ]
        lines += [
            f"  rhovane notes --all{config}",
            f"  rhovane status --as-of {last.as_of if last else 'DATE'}{config}",
            f"  rhovane page --as-of {last.as_of if last else 'DATE'}{config}",
            f"  rhovane report{config}",
            f"  rhovane export windows windows.parquet{config}",
            "",
            *caution_lines(),
            "Demo data are invented.",
        ]
        return lines


def answer_of(entry: AlertEntry) -> list[str]:
    """Id of the planted change or decoy that an alert answers to best; empty when there is none.

    Changes come before decoys, the one that began nearest to the onset first; a turning of the seasons,
    which lasts all the time, counts only where nothing else does.
    """
    alert = entry.alert
    pairs = (alert.pair_key, *alert.members)
    found = {one for pair in pairs for one in answers(pair, alert.onset_day, alert.alarm_day)}
    events = sorted(
        (event for event in TABLE if event.id in found), key=lambda e: abs((e.first - alert.onset_day).days)
    )
    dated = [event for event in events if (event.last - event.first).days < LONGEST_EVENT_DAYS]
    planted = [event for event in dated if event.kind in ("change", "blind spot")]
    return [event.id for event in planted or dated or events][:1]


def answer_words(ids: list[str]) -> str:
    """What an alert answers to, in a few words."""
    if not ids:
        return "nothing planted"
    return (
        ", ".join(ids) if BY_ID[ids[0]].kind in ("change", "blind spot") else f"nothing planted ({ids[0]}?)"
    )


NOTES_OF = {  # data notes that may answer to an entry of the table, and days after its first day
    "T6": (STEP_KINDS, 7),
    "T7": ((NoteKind.DRY,), 14),
    "D1": (STEP_KINDS, 3),
    "D4": ((NoteKind.GAP,), 3),
    "D6": (STEP_KINDS, 3),
}


def note_answer(event: Planted, notes: Sequence[DataNote]) -> str:
    """The data note that answers to an entry of the table, in few words; empty when none does."""
    if event.id not in NOTES_OF:
        return ""
    kinds, within = NOTES_OF[event.id]
    for note in notes:
        after = (note.begin.date() - event.first).days  # UTC: midnight of standard time is the evening before
        if note.subject in event.series and note.kind in kinds and -1 <= after <= within:
            filled = ", filled" if note.state is NoteState.WITHDRAWN else ""
            return f"note: {note.kind.value}{filled}"
    return ""


def planted_lines(
    entries: list[AlertEntry],
    answered: dict[int, list[str]],
    last_day: dt.date | None,
    notes: Sequence[DataNote] = (),
) -> list[str]:
    """One line for each planted change, decoy, blind spot and data note: the alert or note that answers to it."""
    lines = []
    for event in TABLE:
        mine = [e for e in entries if event.id in answered[e.alert.id]]
        wanted = event.kind == "change"
        if last_day is not None and event.first > last_day:
            told = "not reached"
        elif mine:
            first = min(mine, key=lambda e: e.alert.alarm_day)
            after = (first.alert.alarm_day - event.first).days + 1
            told = f"alert {first.alert.id} on day {after}" if wanted else f"alert {first.alert.id}"
            told += f" (+{len(mine) - 1})" if len(mine) > 1 else ""
        else:
            told = "MISSED" if wanted else note_answer(event, notes)
            told = told or ("MISSED" if event.kind == "data note" else "no alert, rightly")
        lines.append(
            f"  {event.id:<3} {event.kind:<10} {event.first}  {told:<20}  {event.what}"[:LONGEST_LINE]
        )
    return lines
