"""Words for where to look first: what a change of a pair is consistent with, never a verdict."""

from __future__ import annotations

TRAFFIC = frozenset({"traffic", "lorries"})
GASES = frozenset({"NO2", "NO", "NOX", "O3", "SO2", "CO"})
PARTICLES = frozenset({"PM10", "PM25", "PM2.5"})


def hints_for(
    first: str, second: str, direction: str, *, suspect: str = "", kind: str = "strength"
) -> tuple[str, ...]:
    """Short sentences "consistent with …" for an alert.

    Parameters
    ----------
    first, second : str
        Series keys ``STATION.quantity`` of the pair whose evidence crossed.
    direction : str
        "weaker" or "stronger".
    suspect : str
        What is likeliest to have changed: "series KEY", "station NAME", or a pair.
    kind : str
        "strength", or "timing" where the best lag moved.

    Notes
    -----
    Drawn from common practice of the trade (which change leaves which mark on a pair); association is not
    cause, so every sentence names what to check.
    """
    what, _, name = suspect.partition(" ")
    if kind == "timing":
        where = f" of {suspect}" if what in ("series", "station") else " of one of the two loggers"
        return (
            f"consistent with a clock{where} that slipped by a whole hour; check its time setting, also summer time",
        )
    if what == "series":
        hints = [
            f"consistent with the instrument behind {name} drifting or failing: its pairs changed, its partners' others held"
        ]
        if name.partition(".")[2] in PARTICLES:
            hints.append("consistent with a blocked inlet or low flow; check the flow log")
        return (*hints, "consistent with a source near that station only; check the site log")
    if what == "station":
        return (
            f"consistent with something that concerns all of station {name}: logger, power, clock, or a source beside it; "
            "check the site log",
        )
    q1, q2 = first.partition(".")[2], second.partition(".")[2]
    sides = {q1, q2}
    if direction != "weaker":
        return (
            "consistent with a common influence that has grown: a weather regime, an episode, or a source "
            "near both; check the neighbours' pairs of the same days",
        )
    if sides & TRAFFIC and sides - TRAFFIC:
        return (
            "consistent with a weaker local source (closure, works, diverted traffic); check the site log",
            "consistent with a fault of the counter; check its count against the neighbouring counter",
        )
    if q1 == q2 and q1 in GASES | PARTICLES:
        hints = [
            f"consistent with one of the two instruments drifting or failing; check whether other {q1} pairs "
            "of either station changed too",
            "consistent with a clock that slipped; check whether the best lag moved by a whole hour",
        ]
        if q1 in PARTICLES:
            hints.insert(1, "consistent with a blocked inlet or low flow; check the flow log")
        return tuple(hints)
    if q1 == q2:
        return (
            f"consistent with a fault of one {q1} sensor or its logger's clock; compare both with a third",
        )
    return (
        "consistent with a new or vanished source, a sensor fault, or a change of season; compare both series",
    )
