"""How each source of the demo feed writes its files: clock, columns, codes, marks for missing."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, date, datetime
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from rhovane_demo import clocks
from rhovane_demo.instruments import FAIL, MISSING, PASS, SUSPECT, WHOLE_NUMBERS
from rhovane_demo.physics import Hourly
from rhovane_demo.world import World

Clock = Literal["utc", "standard", "civil"]
CHECK_GAS_UG_M3 = 400.0  # what an analyser reads during its span check


@dataclass(frozen=True)
class Source:
    """What all sources have: a folder, a clock that cuts the files into days, and series by their code in the feed."""

    name: str
    clock: Clock
    series: dict[str, str]

    def local_time(self, hour_start: clocks.Hours) -> clocks.Hours:
        """Start of each hour on the clock of the source, naive datetime64[s]."""
        if self.clock == "utc":
            return hour_start
        return clocks.standard_time(hour_start) if self.clock == "standard" else clocks.civil_time(hour_start)

    def day_rows(self, hour_start: clocks.Hours) -> dict[date, range]:
        """Rows of the world that each day of the source's clock covers; 23 to 25, fewer at the world's edges."""
        day = self.local_time(hour_start).astype("datetime64[D]")
        starts = np.flatnonzero(np.append(True, day[1:] != day[:-1]))
        ends = np.append(starts[1:], len(day))
        return {day[a].item(): range(int(a), int(b)) for a, b in zip(starts, ends, strict=True)}


@dataclass(frozen=True)
class LongSource(Source):
    """A reading a row. ``row`` is the layout of a row; ``codes`` maps quality to the letters of the source.

    ``verified``: a verified file follows in the next month.
    """

    header: str
    row: str
    time_format: str
    missing: str
    codes: dict[int, str]
    encoding: str = "utf-8"
    verified: bool = False

    @property
    def delimiter(self) -> str:
        """What stands between the cells of a row."""
        return self.row[self.row.index("}") + 1]

    @property
    def fields(self) -> list[str]:
        """Names of the cells in a row, in order; a cell that is always the same is named ``unit``."""
        return [cell.strip("{}") if "{" in cell else "unit" for cell in self.row.split(self.delimiter)]

    def lines(self, text: Text, rows: range, stage: str, issued: datetime) -> list[str]:
        """Rows of the file for these hours, hour by hour, station by station."""
        issued_text = issued.strftime(self.time_format)
        codes = [code.split(" ") for code in self.series]
        layout = self.row
        return [
            layout.format(
                time=text.label[i],
                station=station,
                component=component,
                value=value[i],
                code=quality[i],
                stage=stage,
                issued=issued_text,
            )
            for i in rows
            for (station, component), value, quality in zip(codes, text.value, text.quality, strict=True)
        ]


@dataclass(frozen=True)
class WideSource(Source):
    """An hour a row, a series a column. ``label_end``: labels name the end of the hour."""

    time_column: str
    time_format: str
    delimiter: str
    missing: str
    decimal: str = "."
    label_end: bool = False
    encoding: str = "utf-8"

    @property
    def header(self) -> str:
        """First line of every file."""
        return self.delimiter.join([self.time_column, *self.series])

    def lines(self, text: Text, rows: range) -> list[str]:
        """Rows of the file for these hours."""
        return [self.delimiter.join([text.label[i], *(value[i] for value in text.value)]) for i in rows]


@dataclass(frozen=True)
class ParquetSource(Source):
    """An hour a row in Parquet, a series a column; ``time`` is a naive timestamp, a null is a missing value."""


@dataclass(frozen=True)
class Text:
    """All readings of a source as its files write them: labels by hour, values and quality codes by series and hour."""

    label: list[str]
    value: list[list[str]]
    quality: list[list[str]]


LONG_SOURCES = (
    LongSource(
        "kelvane",
        "utc",
        {"KEL NO2": "KEL.NO2", "KEL PM2.5": "KEL.PM25"},
        header="time,station,component,value,unit,code,stage",
        row="{time},{station},{component},{value},µg/m³,{code},{stage}",
        time_format="%Y-%m-%d %H:%M",
        missing="-999",
        codes={PASS: "A", SUSPECT: "D", FAIL: "C", MISSING: "N"},
    ),
    LongSource(
        "dorrimoor",
        "utc",
        {"DOR n2": "DOR.NO2", "DOR oz": "DOR.O3", "DOR p25": "DOR.PM25"},
        header="site;code;start_utc;reading;q;units;level",
        row="{station};{component};{time};{value};{code};µg/m³;{stage}",
        time_format="%d.%m.%Y %H:%M",
        missing="",
        codes={PASS: "g", SUSPECT: "h", FAIL: "k", MISSING: "z"},
        encoding="latin-1",
    ),
    LongSource(
        "pellhask",
        "utc",
        {"PEL NO2": "PEL.NO2", "PEL O3": "PEL.O3", "PEL PM25": "PEL.PM25"},
        header="from|loc|component|unit|val|flag|stage|issued",
        row="{time}|{station}|{component}|ug/m3|{value}|{code}|{stage}|{issued}",
        time_format="%Y-%m-%dT%H:%MZ",
        missing="-999",
        codes={PASS: "R", SUSPECT: "S", FAIL: "T", MISSING: "U"},
        verified=True,
    ),
    LongSource(
        "skarnet",
        "utc",
        {"SKA no2": "SKA.NO2", "SKA pm10": "SKA.PM10"},
        header="station\tpollutant\thour\tmean\tunit\tstatus\tstage",
        row="{station}\t{component}\t{time}\t{value}\tug/m^3\t{code}\t{stage}",
        time_format="%Y%m%d%H%M",
        missing="NA",
        codes={PASS: "E", SUSPECT: "F", FAIL: "I", MISSING: "O"},
    ),
    LongSource(
        "tivrel",
        "utc",
        {"TIV NO2": "TIV.NO2"},
        header="utc,station,component,value,quality,stage",
        row="{time},{station},{component},{value},{code},{stage}",
        time_format="%Y-%m-%d %H:%M",
        missing="-999",
        codes={PASS: "W", SUSPECT: "X", FAIL: "Y", MISSING: "M"},
        verified=True,
    ),
)
WIDE_SOURCES = (
    WideSource(
        "uvenholt",
        "standard",
        {
            "NO2": "UVE.NO2",
            "O3": "UVE.O3",
            "PM25": "UVE.PM25",
            "wind": "UVE.wind_speed",
            "dir": "UVE.wind_direction",
            "temp": "UVE.temperature",
            "rain": "UVE.rain",
            "solar": "UVE.solar_radiation",
            "mix": "UVE.mixing_height",
        },
        time_column="hour_end",
        time_format="%d.%m.%Y %H:%M",
        delimiter=";",
        missing="-",
        decimal=",",
        label_end=True,
    ),
    WideSource(
        "counters",
        "civil",
        {"kelvane_road": "KEL.traffic", "tivrel_ring": "TIV.traffic", "skarnet_gate": "SKA.lorries"},
        time_column="local_time",
        time_format="%Y-%m-%d %H:%M",
        delimiter=",",
        missing="",
    ),
)
PARQUET_SOURCE = ParquetSource(
    "dorrimoor_weather",
    "standard",
    {
        "wind_speed": "DOR.wind_speed",
        "wind_direction": "DOR.wind_direction",
        "temperature": "DOR.temperature",
        "rain": "DOR.rain",
    },
)
SOURCES: tuple[Source, ...] = (*LONG_SOURCES, *WIDE_SOURCES, PARQUET_SOURCE)


def value_text(key: str, values: Hourly, missing: str, decimal: str = ".") -> list[str]:
    """Values as a source writes them: no or one decimal, ``missing`` for NaN."""
    form = "%.0f" if key in WHOLE_NUMBERS else "%.1f"
    text = [missing if v != v else form % v for v in values.tolist()]
    return text if decimal == "." else [t.replace(".", decimal) for t in text]


def label_text(hours: clocks.Hours, time_format: str) -> list[str]:
    """Time labels as a source writes them."""
    seconds = hours.astype("datetime64[s]").astype(np.int64).tolist()
    return [datetime.fromtimestamp(s, UTC).strftime(time_format) for s in seconds]


def delivered_values(world: World, key: str) -> Hourly:
    """What the files hold for a series: the readings, and the value of the check gas where its source sends it."""
    column = world.column(key)
    checking = world.quality[:, column] == FAIL
    return np.where(checking, CHECK_GAS_UG_M3, world.values[:, column])


def long_text(source: LongSource, world: World, values: list[Hourly]) -> Text:
    """A long source's readings as text; ``values`` has one array (n_hours,) a series."""
    keys = list(source.series.values())
    letters = np.full(max(source.codes) + 1, "?", dtype=object)
    for quality, letter in source.codes.items():
        letters[quality] = letter
    return Text(
        label_text(source.local_time(world.hour_start), source.time_format),
        [value_text(key, value, source.missing) for key, value in zip(keys, values, strict=True)],
        [letters[world.quality[:, world.column(key)]].tolist() for key in keys],
    )


def wide_text(source: WideSource, world: World) -> Text:
    """A wide source's readings as text."""
    label = source.local_time(world.hour_start) + np.timedelta64(1 if source.label_end else 0, "h")
    value = [
        value_text(key, delivered_values(world, key), source.missing, source.decimal)
        for key in source.series.values()
    ]
    return Text(label_text(label, source.time_format), value, [])


def write_parquet_days(source: ParquetSource, world: World) -> dict[date, bytes]:
    """Content of one Parquet file for each day of the source's clock."""
    import tempfile
    from pathlib import Path

    import duckdb

    local = source.local_time(world.hour_start)
    first = local[0].astype("datetime64[D]")
    day: NDArray[np.int64] = (local.astype("datetime64[D]") - first).astype(np.int64)
    columns = {"time": local, "day": day}
    columns |= {code: world.series(key) for code, key in source.series.items()}
    numbers = ", ".join(f"nullif({code}, 'NaN'::DOUBLE) as {code}" for code in source.series)
    content: dict[date, bytes] = {}
    with tempfile.TemporaryDirectory() as folder, duckdb.connect(config={"threads": 1}) as connection:
        connection.execute(
            f"create table hourly as select time::timestamp as time, {numbers}, day from columns order by time"
        )
        connection.execute(
            f"copy hourly to '{folder}' (format parquet, partition_by (day), overwrite_or_ignore)"
        )
        for part in Path(folder).glob("day=*"):
            which = first.item() + (date(2000, 1, 2) - date(2000, 1, 1)) * int(part.name.removeprefix("day="))
            (file,) = part.iterdir()
            content[which] = file.read_bytes()
    return content
