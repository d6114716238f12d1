"""The engine on the demo world: false alarms with nothing planted; what is found, when, and who is blamed."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np
from world_scores import WorldScores, score_world

from rhovane.stats.network import quantity_of
from rhovane.stats.watch import Incident, Watch, watch
from rhovane_demo.planted import ANSWER_DAYS_AFTER, BY_ID, TABLE, Planted

YEAR = 365.0
RATE = 4.0
AFTERMATH_DAYS = 10
CHANGES = ("T1", "T2", "T3", "T4", "T5")
SHARP = ("T1", "T3", "T4", "T5")
DECOYS = ("D1", "D2", "D3", "D4", "D5", "D6", "D10")
SUSPECTS = {
    "T1": {
        ("series", "KEL.NO2"),
        ("series", "KEL.traffic"),
        ("station", "KEL"),
        ("pair", "KEL.traffic~KEL.NO2"),
    },
    "T2": {("series", "PEL.NO2")},
    "T3": {("station", "UVE")},
    "T4": {("series", "DOR.PM25"), ("station", "DOR")},
    "T5": {("series", "SKA.PM10"), ("station", "SKA"), ("pair", "SKA.lorries~SKA.PM10")},
}


def classes_of(world: WorldScores) -> list[str]:
    """Class of each pair: its quantities and its recipe."""
    return [
        "~".join(sorted(map(quantity_of, members))) + key[len("~".join(members)) :]
        for members, key in zip(world.members, world.keys, strict=True)
    ]


def watch_world(world: WorldScores, rate: float = RATE) -> Watch:
    """The watch over one world's pairs, as a night replays it."""
    return watch(
        world.scores,
        false_alarms_per_year=rate,
        members=world.members,
        classes=classes_of(world),
        choice=world.choice,
    )


@dataclass
class Quiet:
    """Alarms with nothing planted: by network and seed, and by class of pairs."""

    rate: float
    counts: list[int] = field(default_factory=list)
    by_class: Counter[str] = field(default_factory=Counter)
    pairs_in_class: Counter[str] = field(default_factory=Counter)
    years: float = 0.0

    @property
    def ratio(self) -> float:
        """Realised over nominal."""
        return sum(self.counts) / self.years / self.rate

    @property
    def error(self) -> float:
        """Standard error of the ratio over seeds."""
        per_seed = self.years / len(self.counts)
        return float(np.std(self.counts, ddof=1) / np.sqrt(len(self.counts)) / per_seed / self.rate)

    def class_ratios(self) -> dict[str, float]:
        """Realised over nominal by class, largest first; the nominal share is that of its pairs."""
        n_pairs = sum(self.pairs_in_class.values())
        ratios = {
            c: self.by_class[c] / self.years / (self.rate * n / n_pairs)
            for c, n in self.pairs_in_class.items()
        }
        return dict(sorted(ratios.items(), key=lambda item: -item[1]))


def quiet_worlds(seeds: Iterable[int], rate: float = RATE) -> Quiet:
    """False alarms over seeds of the demo world with nothing planted."""
    out = Quiet(rate)
    for seed in seeds:
        world = score_world(seed, False)
        classes = classes_of(world)
        seen = watch_world(world, rate)
        out.counts.append(len(seen.incidents))
        out.years += (len(seen.day) - 90) / YEAR
        out.pairs_in_class = Counter(classes)
        for incident in seen.incidents:
            touched = {classes[p] for p in incident.pairs}
            for name in touched:
                out.by_class[name] += 1.0 / len(touched)
    return out


@dataclass
class Found:
    """How one planted change was answered in one world; ``delay`` None: not found."""

    delay: int | None = None
    right_at_once: bool = False
    right_settled: bool = False
    timing: bool = False
    repeats: int = 0


@dataclass
class Eventful:
    """Answers by change and seed, alarms in decoy windows, and alarms that answer to no change."""

    found: dict[str, list[Found]] = field(default_factory=lambda: {k: [] for k in CHANGES})
    decoys: Counter[str] = field(default_factory=Counter)
    others: list[int] = field(default_factory=list)
    after_end: int = 0


def eventful_worlds(seeds: Iterable[int], rate: float = RATE) -> Eventful:
    """What the engine finds in seeds of the demo world with everything planted."""
    out = Eventful()
    for seed in seeds:
        world = score_world(seed, True)
        incidents = watch_world(world, rate).incidents
        taken: set[int] = set()
        for key in CHANGES:
            event = BY_ID[key]
            first, last = (_day(world, d) for d in (event.first, event.last))
            hits = [
                n for n, i in enumerate(incidents)
                if first <= i.alarm_day <= last + 1 and n not in taken and _touches(world, event, i)
            ]  # fmt: skip
            taken.update(hits)
            out.found[key].append(_answer(world, key, [incidents[n] for n in hits], first))
        rest = [i for n, i in enumerate(incidents) if n not in taken]
        out.others.append(len(rest))
        for event in (BY_ID[k] for k in DECOYS):
            first, last = _day(world, event.first), _day(world, event.last) + AFTERMATH_DAYS
            out.decoys[event.id] += sum(first <= i.alarm_day <= last for i in rest)
        for event in (p for p in TABLE if p.id in CHANGES):
            end = _day(world, event.last)
            out.after_end += sum(
                end + 1 < i.alarm_day <= end + ANSWER_DAYS_AFTER and _touches(world, event, i) for i in rest
            )
    return out


def decoy_days() -> int:
    """Days on which an alarm counts as one in a decoy window."""
    return sum((BY_ID[k].last - BY_ID[k].first).days + 1 + AFTERMATH_DAYS for k in DECOYS)


def _day(world: WorldScores, date: object) -> int:
    return int((np.datetime64(date, "D") - world.first_day) / np.timedelta64(1, "D"))


def _touches(world: WorldScores, event: Planted, incident: Incident) -> bool:
    """Whether the incident's leading pair, or its suspect, is one that the event alters."""
    if event.concerns(world.keys[incident.lead]):
        return True
    kind, name = incident.suspect
    return kind == "series" and name in event.series


def _answer(world: WorldScores, key: str, hits: list[Incident], first: int) -> Found:
    if not hits:
        return Found()
    incident = hits[0]
    settled = incident.settled or incident.judged
    return Found(
        incident.alarm_day - first + 1,
        _plain(world, incident.suspect) in SUSPECTS[key],
        _plain(world, settled.suspect) in SUSPECTS[key],
        settled.kind == "timing",
        len(hits) - 1,
    )


def _plain(world: WorldScores, suspect: tuple[str, object]) -> tuple[str, object]:
    """A suspect with pairs named without their recipe."""
    kind, what = suspect
    return (kind, world.keys[int(str(what))].partition("[")[0]) if kind == "pair" else (kind, what)
