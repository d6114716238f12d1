"""What is hidden in the demo world: changes to find, decoys to leave alone, blind spots, data notes."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date, timedelta
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from rhovane_demo.clocks import FIRST_DAY, LAST_DAY, Hours, between, standard_time

Kind = Literal["change", "decoy", "blind spot", "data note"]

# Days after its last day during which an alert may still answer to an event: a window of 28 days
# that began inside it is by then three quarters over.
ANSWER_DAYS_AFTER = 21

NO2 = tuple(f"{station}.NO2" for station in ("KEL", "TIV", "DOR", "PEL", "SKA", "UVE"))
O3 = tuple(f"{station}.O3" for station in ("DOR", "PEL", "UVE"))
PM = (*(f"{station}.PM25" for station in ("KEL", "DOR", "PEL", "UVE")), "SKA.PM10")
TRAFFIC = ("KEL.traffic", "TIV.traffic", "SKA.lorries")
UVENHOLT_LOGGER = tuple(
    f"UVE.{quantity}" for quantity in ("NO2", "O3", "PM25", "temperature", "wind_speed", "solar_radiation")
)
WIND_AND_MIXING = ("DOR.wind_speed", "UVE.wind_speed", "UVE.mixing_height")


@dataclass(frozen=True)
class Planted:
    """One entry of the table.

    ``first`` and ``last`` are days of standard time, both included. ``series`` are the series whose relations the
    event can be seen in (a closed road also changes the town's air elsewhere a little, which no rank shows).
    ``joint``: only pairs with both members among ``series`` are concerned (default: either).
    ``built_in``: part of the physics or the calendar, so present with ``events=False`` too.
    """

    id: str
    kind: Kind
    what: str
    first: date
    last: date
    series: tuple[str, ...]
    joint: bool = False
    built_in: bool = False

    def concerns(self, pair_key: str) -> bool:
        """Whether the pair (``FIRST~SECOND``, any recipe in brackets) touches the series concerned."""
        members = [member in self.series for member in pair_members(pair_key)]
        return all(members) if self.joint else any(members)


TABLE: tuple[Planted, ...] = (
    Planted(
        "T1",
        "change",
        "Kelvane Road closed: traffic × 0.15, ring road × 1.25",
        date(2025, 2, 10),
        date(2025, 3, 23),
        ("KEL.traffic", "TIV.traffic", "KEL.NO2", "TIV.NO2"),
    ),
    Planted(
        "T2",
        "change",
        "Pellhask NO2 analyser drifts over 60 days and follows temperature, then is recalibrated",
        date(2025, 4, 1),
        date(2025, 6, 19),
        ("PEL.NO2",),
    ),
    Planted(
        "T3",
        "change",
        "Uvenholt logger stamps one hour late",
        date(2025, 5, 14),
        date(2025, 8, 11),
        UVENHOLT_LOGGER,
    ),
    Planted(
        "T4",
        "change",
        "Dorrimoor PM2.5 inlet blocked: × 0.12 and leaking",
        date(2025, 10, 6),
        date(2025, 11, 9),
        ("DOR.PM25",),
    ),
    Planted(
        "T5",
        "change",
        "new stockpile near Skarnet Yard, seen with wind from 20 to 90 degrees",
        date(2025, 7, 21),
        LAST_DAY,
        ("SKA.PM10",),
    ),
    Planted(
        "T6",
        "blind spot",
        "cleaner vehicles on Kelvane Road: emission factor × 0.45; ranks keep their order",
        date(2025, 9, 15),
        LAST_DAY,
        ("KEL.NO2",),
    ),
    Planted(
        "T7",
        "data note",
        "Dorrimoor rain gauge blocked: only zeros",
        date(2025, 8, 25),
        date(2025, 10, 5),
        ("DOR.rain",),
    ),
    Planted(
        "D1",
        "decoy",
        "Tivrel NO2 switches from ppb to µg/m³ without a word: × 1.9125",
        date(2024, 11, 18),
        date(2024, 11, 18),
        ("TIV.NO2",),
    ),
    Planted(
        "D2",
        "decoy",
        "year-end holidays",
        date(2024, 12, 23),
        date(2025, 1, 1),
        (*TRAFFIC, *NO2, "SKA.PM10"),
        built_in=True,
    ),
    Planted(
        "D3",
        "decoy",
        "calm inversion: wind × 0.35, mixing height × 0.4",
        date(2025, 1, 8),
        date(2025, 1, 19),
        (*NO2, *O3, *PM, *WIND_AND_MIXING),
    ),
    Planted(
        "D4",
        "decoy",
        "Pellhask telemetry gap, filled two weeks after its end",
        date(2025, 2, 24),
        date(2025, 3, 4),
        ("PEL.NO2", "PEL.O3", "PEL.PM25"),
    ),
    Planted(
        "D5", "decoy", "regional smoke: particles × 4.2", date(2025, 6, 17), date(2025, 6, 20), PM, joint=True
    ),
    Planted(
        "D6",
        "decoy",
        "Kelvane NO2 zero corrected: −3 µg/m³ from here on",
        date(2025, 8, 4),
        date(2025, 8, 4),
        ("KEL.NO2",),
    ),
    Planted(
        "D7",
        "decoy",
        "ozone and temperature turn from spring to summer and back",
        FIRST_DAY,
        LAST_DAY,
        ("DOR.O3", "DOR.temperature"),
        joint=True,
        built_in=True,
    ),
    Planted(
        "D8",
        "decoy",
        "ozone between stations tightens and loosens with the seasons",
        FIRST_DAY,
        LAST_DAY,
        O3,
        joint=True,
        built_in=True,
    ),
    Planted(
        "D9",
        "decoy",
        "particles between stations tighten and loosen with the seasons",
        FIRST_DAY,
        LAST_DAY,
        PM,
        joint=True,
        built_in=True,
    ),
    Planted(
        "D10",
        "decoy",
        "year-end holidays, second year",
        date(2025, 12, 23),
        LAST_DAY,
        (*TRAFFIC, *NO2, "SKA.PM10"),
        built_in=True,
    ),
)

BY_ID = {planted.id: planted for planted in TABLE}


def pair_members(pair_key: str) -> tuple[str, str]:
    """The two series of a pair key such as ``KEL.traffic~KEL.NO2[adjusted]``.

    Raises
    ------
    ValueError
        The key is not of the form ``FIRST~SECOND`` with an optional recipe in brackets.
    """
    first, joined, second = pair_key.partition("[")[0].partition("~")
    if not (first and joined and second):
        raise ValueError(f"{pair_key!r} is not a pair key; write FIRST~SECOND, such as PEL.NO2~DOR.NO2")
    return first, second


def answers(pair_key: str, onset: date, raised: date) -> list[str]:
    """Ids of the table's entries that an alert on a pair may answer to; nearest first day to ``onset`` first.

    An alert may answer to an entry when its pair touches the series concerned and it was raised between the entry's
    first day and 21 days after its last. An empty list is a false alarm. The ids cover every kind: look up
    :data:`BY_ID` to tell a change from a decoy.

    Raises
    ------
    ValueError
        ``raised`` lies before ``onset``, or ``pair_key`` is not a pair key.
    """
    if raised < onset:
        raise ValueError(f"an alert raised on {raised} cannot begin later, on {onset}")
    after = timedelta(days=ANSWER_DAYS_AFTER)
    fitting = [p for p in TABLE if p.first <= raised <= p.last + after and p.concerns(pair_key)]
    return [p.id for p in sorted(fitting, key=lambda p: abs((p.first - onset).days))]


class Planting:
    """When each planted event is on; never, when nothing is planted."""

    def __init__(self, hour_start: Hours, events: bool) -> None:
        self.hour_start = hour_start
        self.events = events

    def during(self, event: str) -> NDArray[np.bool_]:
        """Hours from the event's first day to its last."""
        planted = BY_ID[event]
        return between(self.hour_start, planted.first, planted.last) & self.events

    def since(self, event: str) -> NDArray[np.bool_]:
        """Hours from the event's first day to the end of the world."""
        return between(self.hour_start, BY_ID[event].first, LAST_DAY) & self.events

    def days_since(self, event: str) -> NDArray[np.float64]:
        """Days since the event began; negative before."""
        start = np.datetime64(BY_ID[event].first, "s")
        return (standard_time(self.hour_start) - start) / np.timedelta64(86400, "s")
