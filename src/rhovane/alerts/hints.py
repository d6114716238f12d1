"""Words for where to look first: what a change of a pair is consistent with, never a verdict."""

from __future__ import annotations

from collections.abc import Sequence

from rhovane.model import Alert, AlertSheet, Bounded, Hint

TRAFFIC = frozenset({"traffic", "lorries"})
GASES = frozenset({"NO2", "NO", "NOX", "O3", "SO2", "CO"})
PARTICLES = frozenset({"PM10", "PM25", "PM2.5"})
COPIED = 0.9995  # correlation from which two series look like one
SHRUNK = 0.7  # of the interquartile range: attenuated
FELL = 0.8  # of a median: plainly lower
NAMED = 4  # pairs named in a sentence; of more, the first ones

Sentences = tuple[str, ...]


def hints_for(alert: Alert, *, sector: bool = False) -> tuple[Hint, ...]:
    """What an alert is consistent with, each with what speaks for it, what against it, and what to check.

    Parameters
    ----------
    alert : Alert
        With its sheet; without one only its words count (suspect, direction, kind).
    sector : bool
        Whether the pair is looked at in one wind sector only.

    Notes
    -----
    Drawn from common practice of the trade (which change leaves which mark on a pair). Association is not cause:
    every hint says "consistent with" and names what to check.
    """
    facts = _Facts(alert, sector)
    what = alert.suspect.partition(" ")[0]
    hints: list[Hint] = []
    if alert.sheet is not None:
        hints += _alternatives(alert.sheet)
    if alert.after.statistic is not None and abs(alert.after.statistic) >= COPIED:
        hints.append(
            Hint(
                "consistent with one feed delivered under two names",
                (f"rho after is {alert.after.statistic:+.4f}",),
                check="compare a day of both series value by value",
            )
        )
    if alert.kind == "timing":
        return (*hints, _clock(alert, facts))
    if what == "series":
        return (*hints, *_series(alert, facts))
    if what == "station":
        return (*hints, *_station(alert, facts))
    return (*hints, *(_weaker(facts) if alert.direction == "weaker" else _stronger(facts)))


class _Facts:
    """The sheet of an alert in short sentences."""

    def __init__(self, alert: Alert, sector: bool) -> None:
        first, _, second = alert.pair_key.partition("[")[0].partition("~")
        self.members = first, second
        self.quantities = first.partition(".")[2], second.partition(".")[2]
        self.sector = sector
        self.sheet: AlertSheet | None = alert.sheet

    def moved(self, *relations: str) -> list[str]:
        return [] if self.sheet is None else self.sheet.of(*relations, moved=True)

    def held(self, *relations: str) -> list[str]:
        return [] if self.sheet is None else self.sheet.of(*relations, moved=False)

    def pairs(self, words: str, pairs: Sequence[str]) -> Sentences:
        """One sentence that names the pairs; none without pairs."""
        return (f"{words}: {named(pairs)}",) if pairs else ()

    def ratio(self, key: str) -> Bounded | None:
        levels = [] if self.sheet is None else [level for level in self.sheet.levels if level.series == key]
        return levels[0].ratio if levels else None

    def spread(self, key: str) -> float | None:
        levels = [] if self.sheet is None else [level for level in self.sheet.levels if level.series == key]
        return levels[0].spread_ratio if levels else None


def named(pairs: Sequence[str]) -> str:
    """The first pairs by name, and how many more."""
    rest = f" and {len(pairs) - NAMED} more" if len(pairs) > NAMED else ""
    return ", ".join(pairs[:NAMED]) + rest


def _clear(ratio: Bounded | None) -> bool:
    """Whether a ratio of medians differs from 1 beyond its interval."""
    if ratio is None or ratio.low is None or ratio.high is None:
        return False
    return ratio.low > 1.0 or ratio.high < 1.0


def _times(ratio: Bounded | None) -> str:
    return "n/a" if ratio is None or ratio.value is None else f"× {ratio.value:.2f}"


def _alternatives(sheet: AlertSheet) -> list[Hint]:
    """What would make the alert no news: an episode, or the same season a year ago."""
    hints = []
    if sheet.episode.days and sheet.episode.without is not None:
        days = ", ".join(day.isoformat() for day in sheet.episode.days)
        n = len(sheet.episode.days)
        hints.append(
            Hint(
                f"consistent with an episode of {n} {'day' if n == 1 else 'days'}",
                (f"without {days} rho is {sheet.episode.without:+.2f}, near its value before",),
                check="weather, works and data notes of these days",
            )
        )
    if sheet.as_year_earlier and sheet.year_earlier.statistic is not None:
        hints.append(
            Hint(
                "consistent with season: same as last year at this season",
                (f"rho a year earlier was {sheet.year_earlier.statistic:+.2f}",),
                (f"{len(sheet.of('alike', moved=False))} pairs of the same quantities held",)
                if sheet.of("alike", moved=False)
                else (),
                "whether the alert of last year's season was explained",
            )
        )
    return hints


def _clock(alert: Alert, facts: _Facts) -> Hint:
    what = alert.suspect.partition(" ")[0]
    where = f" of {alert.suspect}" if what in ("series", "station") else " of one of the two loggers"
    hours = abs(alert.lag_steps)
    way = "late" if alert.lag_steps > 0 else "early"
    told = (f"readings seem {hours} h {way}",) if hours and what in ("series", "station") else ()
    return Hint(
        f"consistent with a clock{where} that slipped by a whole hour",
        (*told, *facts.pairs("moved", facts.moved("own"))),
        facts.pairs("held all the same", facts.held("own")),
        "its time setting, also summer time, and whether labels mean the start or the end of an hour",
    )


def _series(alert: Alert, facts: _Facts) -> list[Hint]:
    name = alert.suspect.partition(" ")[2]
    quantity = name.partition(".")[2]
    ratio, spread = facts.ratio(name), facts.spread(name)
    supports = (
        *facts.pairs("its pairs moved", facts.moved("own")),
        *facts.pairs("other pairs of its partners held", facts.held("partner")),
    )
    against = (
        *facts.pairs("its pairs held", facts.held("own")),
        *facts.pairs("other pairs of its partners moved too", facts.moved("partner")),
    )
    hints = [
        Hint(
            f"consistent with the instrument behind {name} drifting or failing",
            supports,
            against,
            "calibration and fault log; a co-located or spare instrument",
        )
    ]
    if quantity in PARTICLES:
        shrunk = spread is not None and spread < SHRUNK
        told = () if spread is None else (f"its spread is × {spread:.2f} of before",)
        hints.append(
            Hint(
                "consistent with a blocked inlet or low flow",
                told if shrunk else (),
                () if shrunk else told,
                "flow log, inlet head, filter change",
            )
        )
    warmer = [p for p in facts.moved("own") if "temperature" in p and _grew(facts, p)]
    if warmer:
        hints.append(
            Hint(
                f"consistent with {name} following temperature (cross-sensitivity, heated inlet, shelter)",
                facts.pairs("grew stronger", warmer),
                check="shelter temperature, and the series against it on cool and on warm days",
            )
        )
    if _clear(ratio):
        hints.append(
            Hint(
                f"consistent with an instrument swap or a new span at {name}",
                (f"its median is {_times(ratio)} of before",),
                check="site log; if so, a new segment begins there",
            )
        )
    hints.append(
        Hint(
            "consistent with a source near that station only",
            facts.pairs("other pairs of its partners held", facts.held("partner")),
            facts.pairs("other pairs of its partners moved too", facts.moved("partner")),
            "site log; wind sectors and hours in which the pairs disagree",
        )
    )
    return hints


def _grew(facts: _Facts, pair: str) -> bool:
    assert facts.sheet is not None
    one = next(w for w in facts.sheet.witnesses if w.pair == pair)
    return one.before is not None and one.after is not None and abs(one.after) > abs(one.before)


def _station(alert: Alert, facts: _Facts) -> list[Hint]:
    name = alert.suspect.partition(" ")[2]
    own = facts.moved("own")
    series = sorted({k for p in own for k in p.partition("[")[0].split("~") if k.partition(".")[0] == name})
    hints = [
        Hint(
            f"consistent with something that concerns all of station {name}: logger, power, clock, or a source beside it",
            facts.pairs("its pairs moved", own),
            facts.pairs("its pairs held", facts.held("own")),
            "site log, logger and power records",
        )
    ]
    if len(series) >= 2:
        hints.append(
            Hint(
                f"consistent with crossed channels at {name}",
                (f"{len(series)} of its series changed at once: {', '.join(series)}",),
                check="whether one of them now looks like the other: values, units, daily course",
            )
        )
    return hints


def _weaker(facts: _Facts) -> list[Hint]:
    (first, second), (q1, q2) = facts.members, facts.quantities
    sides = {q1, q2}
    if sides & TRAFFIC and sides - TRAFFIC:
        source, receptor = (first, second) if q1 in TRAFFIC else (second, first)
        return _road(source, receptor, facts)
    if q1 == q2:
        return _same_quantity(q1, facts)
    return [
        Hint(
            "consistent with a new or vanished source, a sensor fault, or a change of season",
            facts.pairs("alike pairs held", facts.held("alike")),
            facts.pairs("alike pairs moved too, as with weather or season", facts.moved("alike")),
            "both series; the same weeks a year earlier",
        ),
        *_sector(facts),
    ]


def _road(source: str, receptor: str, facts: _Facts) -> list[Hint]:
    count, level = facts.ratio(source), facts.ratio(receptor)
    lower = count is not None and count.value is not None and count.value < FELL
    fell = _clear(level) and level is not None and level.value is not None and level.value < 1.0
    rose = _clear(level) and not fell
    unmoved = level is not None and not _clear(level)
    told = () if count is None else (f"median of {source} is {_times(count)} of before",)
    follows = () if level is None else (f"median of {receptor} is {_times(level)} of before",)
    others = facts.pairs("other pairs moved too", facts.moved("partner"))
    return [
        Hint(
            "consistent with a weaker local source (closure, works, diverted traffic)",
            (*(told if lower else ()), *(follows if fell else ())),
            (*(() if lower else told), *(() if fell else follows)),
            "site log, road works, the count on other roads",
        ),
        *_new_source(receptor, follows if rose else ()),
        Hint(
            "consistent with a fault of the counter (a lane lost, a loop dead)",
            (*(told if lower else ()), *(follows if unmoved else ())),
            () if unmoved else follows,
            "its lanes one by one, and the neighbouring counter",
        ),
        Hint(
            f"consistent with a fault of the instrument behind {receptor}",
            others,
            facts.pairs("other pairs held", facts.held("partner")),
            f"other pairs of {receptor}",
        ),
        *_sector(facts),
    ]


def _new_source(receptor: str, risen: Sentences) -> list[Hint]:
    """A receptor that rose while it follows its old source less."""
    if not risen:
        return []
    return [
        Hint(
            f"consistent with a new source beside {receptor}",
            risen,
            check="site log; wind sectors and hours in which it is high",
        )
    ]


def _same_quantity(quantity: str, facts: _Facts) -> list[Hint]:
    first, second = facts.members
    alike = facts.pairs("alike pairs elsewhere held", facts.held("alike"))
    moved = facts.pairs("alike pairs elsewhere moved too, as with weather or season", facts.moved("alike"))
    others = facts.moved("partner")
    hints = []
    for one, other in ((first, second), (second, first)):
        against = [p for p in facts.held("partner") if one in p.partition("[")[0].split("~")]
        supports = [p for p in others if one in p.partition("[")[0].split("~")]
        ratio = facts.ratio(one)
        level = (f"its median is {_times(ratio)} of before",) if _clear(ratio) else ()
        hints.append(
            Hint(
                f"consistent with the {quantity} instrument behind {one} drifting or failing",
                (*facts.pairs("also moved", supports), *level, *alike),
                (*facts.pairs("held", against), *moved),
                f"calibration and fault log of {one}, and its other neighbours than {other}",
            )
        )
    hints.sort(key=lambda hint: len(hint.against) - len(hint.supports))
    if quantity in PARTICLES:
        shrunk = [k for k in facts.members if (facts.spread(k) or 1.0) < SHRUNK]
        hints.append(
            Hint(
                "consistent with a blocked inlet or low flow",
                tuple(f"spread of {k} is × {facts.spread(k):.2f} of before" for k in shrunk),
                () if shrunk else ("neither spread has shrunk",),
                "flow log, inlet head, filter change",
            )
        )
    if quantity in GASES | PARTICLES:
        hints.append(
            Hint(
                "consistent with a source near one of the two stations",
                alike,
                moved,
                "site log; wind sectors and hours in which the two disagree",
            )
        )
    return [*hints, *_sector(facts)]


def _sector(facts: _Facts) -> list[Hint]:
    """What only a pair looked at in one wind sector can show."""
    if not facts.sector:
        return []
    return [
        Hint(
            "consistent with a source that began or ended in this wind sector",
            check="what lies upwind; site log",
        ),
        Hint(
            "consistent with a wind vane that has turned in its mount",
            check="north alignment; wind direction against a neighbour",
        ),
    ]


def _stronger(facts: _Facts) -> list[Hint]:
    return [
        Hint(
            "consistent with a common influence that has grown: a weather regime, an episode, or a source near both",
            facts.pairs("other pairs moved too", facts.moved("partner", "alike")),
            facts.pairs("other pairs held", facts.held("partner", "alike")),
            "weather of these days; the same pairs a year earlier",
        ),
        *_sector(facts),
    ]
