"""How often data notes are written with nothing planted, and whether planted faults are noted for what they are.

``python tests/studies/data_notes/study.py`` with ``src`` and ``demo_feed`` on the path, about half a minute; the committed
result is beside it.
"""

from __future__ import annotations

import datetime as dt
from collections import Counter
from pathlib import Path

import numpy as np

from rhovane.model import STEP_KINDS, NoteKind
from rhovane.pipeline.findings import Finding, Looker, Network
from rhovane.prepare import Grid, days_of
from rhovane.settings import load_settings
from rhovane_demo.planted import BY_ID
from rhovane_demo.world import make_world

SETTINGS = load_settings(Path(__file__).parents[3] / "config" / "monitor.toml")
FIRST = dt.date(2024, 7, 2)
QUIET_SEEDS, PLANTED_SEEDS = range(40, 60), range(40, 60)
YEARS = 1.5
PLANTED = {  # entry of the table: series that carries it, days after its first day on which a note counts
    "D1": ("TIV.NO2", 3),
    "D6": ("KEL.NO2", 3),
    "T1": ("KEL.NO2", 6),
    "T2": ("PEL.NO2", 90),
    "T3": ("UVE.O3", 6),
    "T4": ("DOR.PM25", 6),
    "T5": ("SKA.PM10", 6),
    "T6": ("KEL.NO2", 6),
}


def findings(seed: int, events: bool) -> list[Finding]:
    """Everything that a look at the final readings of a world finds."""
    world = make_world(seed=seed, events=events)
    values = np.where(world.quality < 3, world.values, np.nan)[23:]
    days = days_of(SETTINGS.network.standard_offset)
    start = days.start_of(FIRST)
    grid = Grid(start, world.keys, values[: len(values) // 24 * 24])
    hour = days.moment(start).isoformat()
    network = Network.of(SETTINGS, world.keys, dict.fromkeys(world.keys, hour))
    looker = Looker(SETTINGS, network, grid, days, FIRST)
    looks = (*looker.looks(), looker.steps()[0])
    return [finding for look in looks for finding in look.findings]


def main() -> None:
    """Print both tables."""
    days = days_of(SETTINGS.network.standard_offset)
    quiet = Counter(f.kind for seed in QUIET_SEEDS for f in findings(seed, False))
    series_years = len(QUIET_SEEDS) * YEARS * len(SETTINGS.series)
    print(f"Nothing planted, {len(QUIET_SEEDS)} worlds, {series_years:.0f} series-years:\n")
    print("| kind | notes |\n| --- | --- |")
    for kind in NoteKind:
        if kind not in (NoteKind.NOT_COMPUTABLE, NoteKind.LEFT_OUT):
            print(f"| {kind.value} | {quiet[kind]} |")
    noted: dict[str, Counter[str]] = {name: Counter() for name in PLANTED}
    dry = 0
    for seed in PLANTED_SEEDS:
        found = findings(seed, True)
        for name, (key, within) in PLANTED.items():
            since = (
                days.start_of(BY_ID[name].first),
                days.start_of(BY_ID[name].first + dt.timedelta(within)),
            )
            kinds = {
                f.kind
                for f in found
                if f.subject == key and f.kind in STEP_KINDS and since[0] - 86_400 <= f.begin <= since[1]
            }
            noted[name].update(kind.value for kind in kinds)
        gauge = [f for f in found if f.kind is NoteKind.DRY and f.subject == "DOR.rain"]
        dry += any(abs(days.day_of(f.begin) - BY_ID["T7"].first) <= dt.timedelta(7) for f in gauge)
    print(
        f"\nPlanted, {len(PLANTED_SEEDS)} worlds; worlds with a note of the kind on the series that carries it:\n"
    )
    kinds = [kind.value for kind in STEP_KINDS]
    print(f"| what | series | {' | '.join(kinds)} |\n| --- | --- | {' | '.join('---' for _ in kinds)} |")
    for name, (key, _) in PLANTED.items():
        counts = " | ".join(str(noted[name][kind]) for kind in kinds)
        print(f"| {name}: {BY_ID[name].what} | {key} | {counts} |")
    print(
        f"\nBlocked rain gauge (T7) noted from within a week of its first day: {dry} of {len(PLANTED_SEEDS)} worlds."
    )


if __name__ == "__main__":
    main()
