"""The demo feed: layouts, arrivals, malformed rows, and an exact round trip by an independent small reader."""

from __future__ import annotations

import csv
import io
import math
from collections import Counter, defaultdict
from datetime import UTC, date, datetime, timedelta, timezone
from functools import cache
from zoneinfo import ZoneInfo

import duckdb
import numpy as np
import pytest

from rhovane_demo.feed import DEFECTS, FeedFile, deliveries, feed_files, truth, write_files
from rhovane_demo.world import World, make_world

STANDARD = timezone(timedelta(hours=1))
HOUR = timedelta(hours=1)

# Everything the reader knows about the layouts, written down here once more.
LONG = {
    # source: delimiter, encoding, time format, (time, station, component, value, code, stage) columns, missing
    "kelvane": (",", "utf-8", "%Y-%m-%d %H:%M", (0, 1, 2, 3, 5, 6), "-999"),
    "dorrimoor": (";", "latin-1", "%d.%m.%Y %H:%M", (2, 0, 1, 3, 4, 6), ""),
    "pellhask": ("|", "utf-8", "%Y-%m-%dT%H:%MZ", (0, 1, 2, 4, 5, 6), "-999"),
    "skarnet": ("\t", "utf-8", "%Y%m%d%H%M", (2, 0, 1, 3, 5, 6), "NA"),
    "tivrel": (",", "utf-8", "%Y-%m-%d %H:%M", (0, 1, 2, 3, 4, 5), "-999"),
}
COMPONENT = {
    "NO2": "NO2",
    "n2": "NO2",
    "no2": "NO2",
    "O3": "O3",
    "oz": "O3",
    "PM2.5": "PM25",
    "PM25": "PM25",
    "p25": "PM25",
    "pm10": "PM10",
}
FLAG = {
    "kelvane": {"A": 1, "D": 3, "C": 4, "N": 9},
    "dorrimoor": {"g": 1, "h": 3, "k": 4, "z": 9},
    "pellhask": {"R": 1, "S": 3, "T": 4, "U": 9},
    "skarnet": {"E": 1, "F": 3, "I": 4, "O": 9},
    "tivrel": {"W": 1, "X": 3, "Y": 4, "M": 9},
}
UVENHOLT = {
    "NO2": "NO2",
    "O3": "O3",
    "PM25": "PM25",
    "wind": "wind_speed",
    "dir": "wind_direction",
    "temp": "temperature",
    "rain": "rain",
    "solar": "solar_radiation",
    "mix": "mixing_height",
}
COUNTERS = {"kelvane_road": "KEL.traffic", "tivrel_ring": "TIV.traffic", "skarnet_gate": "SKA.lorries"}

# (series key, start of the hour) → (value, flag, verified)
Reading = tuple[float, int, bool]


@cache
def parse_time(text: str, form: str) -> datetime:
    return datetime.strptime(text, form)


class Reader:
    """Reads files in any order; a verified value replaces a preliminary one, a later file an earlier one."""

    def __init__(self) -> None:
        self.kept: dict[tuple[str, datetime], Reading] = {}
        self.rank: dict[tuple[str, datetime], tuple[bool, datetime]] = {}
        self.bad: Counter[str] = Counter()

    def keep(self, key: str, hour: datetime, reading: Reading, modified: datetime) -> None:
        rank = (reading[2], modified)
        if (key, hour) not in self.rank or rank >= self.rank[key, hour]:
            self.kept[key, hour], self.rank[key, hour] = reading, rank

    def read(self, file: FeedFile) -> None:
        source = file.path.partition("/")[0]
        if source in LONG:
            self.read_long(source, file)
        elif source == "uvenholt":
            self.read_uvenholt(file)
        elif source == "counters":
            self.read_counters(file)
        else:
            assert source == "dorrimoor_weather"

    def read_long(self, source: str, file: FeedFile) -> None:
        delimiter, encoding, form, columns, missing = LONG[source]
        rows = csv.reader(io.StringIO(file.content.decode(encoding)), delimiter=delimiter)
        width = len(next(rows))
        for row in rows:
            if len(row) != width:
                self.bad[source] += 1
                continue
            time, station, component, text, code, stage = (row[i] for i in columns)
            try:
                hour = parse_time(time, form)
                value = math.nan if text == missing else float(text)
                flag = FLAG[source][code]
            except (ValueError, KeyError):
                self.bad[source] += 1
                continue
            key = f"{station}.{COMPONENT[component]}"
            self.keep(key, hour, (value, flag, stage == "V"), file.modified)

    def read_uvenholt(self, file: FeedFile) -> None:
        for row in csv.DictReader(io.StringIO(file.content.decode()), delimiter=";"):
            end = parse_time(row.pop("hour_end"), "%d.%m.%Y %H:%M").replace(tzinfo=STANDARD)
            hour = (end - HOUR).astimezone(UTC).replace(tzinfo=None)
            for column, text in row.items():
                self.keep_cell("uvenholt", f"UVE.{UVENHOLT[column]}", hour, text, "-", file.modified)

    def read_counters(self, file: FeedFile) -> None:
        previous = None
        for row in csv.DictReader(io.StringIO(file.content.decode())):
            local = parse_time(row.pop("local_time"), "%Y-%m-%d %H:%M")
            aware = local.replace(tzinfo=ZoneInfo("MET"), fold=int(local == previous))
            hour = aware.astimezone(UTC).replace(tzinfo=None)
            previous = local
            for column, text in row.items():
                self.keep_cell("counters", COUNTERS[column], hour, text, "", file.modified)

    def keep_cell(
        self, source: str, key: str, hour: datetime, text: str, missing: str, modified: datetime
    ) -> None:
        try:
            value = math.nan if text == missing else float(text.replace(",", "."))
        except ValueError:
            self.bad[source] += 1
            return
        self.keep(key, hour, (value, 0, False), modified)


@pytest.fixture(scope="module")
def world() -> World:
    return make_world(7)


@pytest.fixture(scope="module")
def files(world) -> list[FeedFile]:
    return feed_files(world)


@pytest.fixture(scope="module")
def by_path(files) -> dict[str, FeedFile]:
    return {file.path: file for file in files}


@pytest.fixture(scope="module")
def weather_rows(files, tmp_path_factory) -> list[tuple]:
    folder = tmp_path_factory.mktemp("weather")
    write_files([f for f in files if f.path.endswith(".parquet")], folder)
    with duckdb.connect() as connection:
        return connection.execute(
            f"select * from read_parquet('{folder}/dorrimoor_weather/*.parquet') order by time"
        ).fetchall()


def rows_of(file: FeedFile, delimiter: str, encoding: str = "utf-8") -> list[list[str]]:
    return list(csv.reader(io.StringIO(file.content.decode(encoding)), delimiter=delimiter))[1:]


def grids(world: World, reader: Reader) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Kept readings on the world's grid: values, delivered, flag, verified."""
    shape = world.values.shape
    values, delivered = np.full(shape, np.nan), np.zeros(shape, dtype=bool)
    flag, verified = np.zeros(shape, dtype=np.uint8), np.zeros(shape, dtype=bool)
    column = {key: i for i, key in enumerate(world.keys)}
    start = datetime(2024, 7, 1)
    for (key, hour), (value, quality, is_verified) in reader.kept.items():
        at = (hour - start) // HOUR, column[key]
        values[at], delivered[at], flag[at], verified[at] = value, True, quality, is_verified
    return values, delivered, flag, verified


def keep_weather(reader: Reader, rows: list[tuple]) -> None:
    for time, *cells in rows:
        hour = time.replace(tzinfo=STANDARD).astimezone(UTC).replace(tzinfo=None)
        names = ("wind_speed", "wind_direction", "temperature", "rain")
        for name, cell in zip(names, cells, strict=True):
            value = math.nan if cell is None else cell
            reader.keep(f"DOR.{name}", hour, (value, 0, False), datetime.min.replace(tzinfo=UTC))


@pytest.fixture(scope="module")
def reader(files) -> Reader:
    """A reader that has seen all text files as they arrive."""
    reader = Reader()
    for file in files:
        reader.read(file)
    return reader


def assert_holds_the_truth(world: World, reader: Reader, stations: tuple[str, ...] = ()) -> None:
    """Everything the reader holds is the truth, for all series or for those of some stations."""
    expected = truth(world)
    chosen = [not stations or key.startswith(stations) for key in world.keys]
    assert any(chosen)
    wanted = (expected.values, expected.delivered, expected.flag, expected.verified)
    for found, want in zip(grids(world, reader), wanted, strict=True):
        np.testing.assert_array_equal(found[:, chosen], want[:, chosen])


def test_what_a_reader_finally_holds_is_the_truth(world, reader, weather_rows):
    keep_weather(reader, weather_rows)
    assert_holds_the_truth(world, reader)


def test_verified_sources_read_backwards_end_in_the_same_truth(world, files):
    backwards = Reader()
    for file in reversed(files):
        if file.path.startswith("pellhask/"):
            backwards.read(file)
    assert_holds_the_truth(world, backwards, ("PEL",))


def test_world_without_events_arrives_as_exactly_and_without_the_gap():
    world = make_world(3, events=False)
    files = feed_files(world)
    reader = Reader()
    for file in files:
        if file.path.startswith(("pellhask/", "uvenholt/")):
            reader.read(file)
    assert_holds_the_truth(world, reader, ("PEL", "UVE"))
    paths = {file.path for file in files}
    assert "pellhask/2025-02-26.csv" in paths
    assert not any("_2025" in path for path in paths)  # no gap, so no back-fill


def test_truth_is_the_world_but_for_check_gas_and_lost_rows(world):
    expected = truth(world)
    usable = expected.delivered & (expected.flag != 4)
    np.testing.assert_array_equal(expected.values[usable], world.values[usable])
    assert set(expected.values[expected.flag == 4]) == {400.0}
    lost = sum(defect.loses_reading for defect in DEFECTS) - 1  # the verified file brings back Tivrel's
    last_hour_not_delivered = 9 + 3 + 4  # Uvenholt, counters, Dorrimoor's weather
    assert (~expected.delivered).sum() == lost + last_hour_not_delivered


def test_paths_are_unique_and_a_folder_is_a_source(files):
    assert len({file.path for file in files}) == len(files)
    assert {file.path.partition("/")[0] for file in files} == {
        *LONG,
        "uvenholt",
        "counters",
        "dorrimoor_weather",
    }


def test_nights_are_all_days_and_hold_the_same_files_when_made_again(world, files):
    nights = list(deliveries(world))
    assert [n.night for n in nights] == [date(2024, 7, 1) + timedelta(days=i) for i in range(549)]
    assert [file for night in nights for file in night.files] == files
    assert all(file.arrives == night.night for night in nights for file in night.files)


def test_files_are_written_before_their_night_begins_and_after_their_day_ends(files):
    for file in files:
        night_begins = datetime.combine(
            file.arrives + timedelta(days=1), datetime.min.time(), UTC
        ) + timedelta(hours=2, minutes=40)
        assert night_begins - timedelta(hours=3) < file.modified < night_begins, file.path


def test_most_files_come_in_their_own_night_and_some_one_to_five_days_late(files):
    delays: dict[str, list[int]] = defaultdict(list)
    for file in files:
        source, _, name = file.path.partition("/")
        stem = name.partition(".")[0]
        if len(stem) == 10:
            delays[source].append((file.arrives - date.fromisoformat(stem)).days)
    for source, days in delays.items():
        assert len(days) in (549, 540), source
        assert set(days) <= set(range(6)), source
        assert 3 <= sum(d > 0 for d in days) <= 45, source  # 3 % of 549 is 16


def test_telemetry_gap_is_filled_two_weeks_later(by_path):
    gap = [date(2025, 2, 24) + timedelta(days=i) for i in range(9)]
    assert not any(f"pellhask/{day}.csv" in by_path for day in gap)
    fill = by_path["pellhask/2025-02-24_2025-03-04.csv"]
    assert fill.arrives == date(2025, 3, 18)
    times = [row[0] for row in rows_of(fill, "|")]
    assert len(times) == 9 * 24 * 3
    assert (times[0], times[-1]) == ("2025-02-24T00:00Z", "2025-03-04T23:00Z")
    earlier = [
        f for f in by_path.values() if f.path.startswith("pellhask/2025-0") and f.arrives < fill.arrives
    ]
    assert not any(b"2025-03-01T" in f.content for f in earlier)


def test_verified_files_come_about_the_20th_and_revise_some_hours_by_a_few_per_cent(by_path):
    for source, series in (("pellhask", 3), ("tivrel", 1)):
        verified = sorted(p for p in by_path if p.startswith(f"{source}/verified-"))
        assert len(verified) == 17
        assert all(18 <= by_path[path].arrives.day <= 22 for path in verified)
        assert by_path[f"{source}/verified-2025-05.csv"].arrives.month == 6
        delimiter, _, _, (time, _, component, value, code, stage), _ = LONG[source]
        final = {
            (r[time], r[component]): r for r in rows_of(by_path[f"{source}/verified-2025-05.csv"], delimiter)
        }
        assert len(final) == 31 * 24 * series
        assert {row[stage] for row in final.values()} == {"V"}
        first = {
            (r[time], r[component]): r
            for day in range(1, 32)
            for r in rows_of(by_path[f"{source}/2025-05-{day:02d}.csv"], delimiter)
        }
        changed = [k for k, row in final.items() if row[value] != first[k][value]]
        assert 0.01 < len(changed) / len(final) < 0.08
        assert {first[k][code] for k in changed} <= {"R", "W"}
        large = [k for k in changed if float(final[k][value]) > 20]
        ratios = [float(first[k][value]) / float(final[k][value]) for k in large]
        assert 0.01 < np.std(ratios) < 0.06
        assert all(0.85 < ratio < 1.15 for ratio in ratios)


def test_some_files_repeat_the_day_before(files):
    layouts = {source: (*LONG[source][:3], LONG[source][3][0]) for source in LONG}
    layouts["uvenholt"] = (";", "utf-8", "%d.%m.%Y %H:%M", 0)
    layouts["counters"] = (",", "utf-8", "%Y-%m-%d %H:%M", 0)
    repeating = Counter()
    for file in files:
        source, _, name = file.path.partition("/")
        if source in layouts and len(name) == len("2025-01-01.csv"):
            delimiter, encoding, form, column = layouts[source]
            labels = [row[column] for row in rows_of(file, delimiter, encoding)]
            begins, day = parse_time(labels[0], form).date(), date.fromisoformat(name[:10])
            if begins < day:
                repeating[source] += 1
                assert begins == day - timedelta(days=1)
                assert (
                    45 <= len(set(labels)) <= 49
                )  # fewer on the second day of the world and at a clock change
    assert set(repeating) == set(layouts)
    assert all(2 <= count <= 30 for count in repeating.values())  # 2 % of 549 is 11


def test_malformed_rows_are_where_the_table_says(reader, files, by_path):
    assert len(DEFECTS) == 11
    expected = Counter(d.source for d in DEFECTS if d.kind != "repeated row")
    assert reader.bad == expected
    for defect in DEFECTS:
        one = Reader()
        one.read(by_path[f"{defect.source}/{defect.day}.csv"])
        assert one.bad.total() == (defect.kind != "repeated row"), defect
    twice = Counter(tuple(row) for row in rows_of(by_path["pellhask/2025-02-06.csv"], "|"))
    assert [row[:3] for row, count in twice.items() if count == 2] == [("2025-02-06T12:00Z", "PEL", "O3")]
    assert not by_path["skarnet/2025-05-22.csv"].content.endswith(b"\n")
    assert all(
        f.content.endswith(b"\n") for f in files if f.path.endswith("csv") and "2025-05-22" not in f.path
    )


def test_uvenholt_labels_the_end_of_the_hour_with_decimal_commas(world, by_path):
    content = by_path["uvenholt/2025-08-20.csv"].content.decode()
    rows = list(csv.DictReader(io.StringIO(content), delimiter=";"))
    assert [rows[0]["hour_end"], rows[-1]["hour_end"]] == ["20.08.2025 01:00", "21.08.2025 00:00"]
    assert len(rows) == 24
    assert "." not in "".join(row["temp"] + row["NO2"] for row in rows)
    at = np.flatnonzero(world.hour_start == np.datetime64("2025-08-20T10:00:00"))[0]
    noon = rows[11]  # ends 12:00 standard time, so it starts 10:00 UTC
    assert float(noon["temp"].replace(",", ".")) == world.series("UVE.temperature")[at]


@pytest.mark.parametrize(
    ("day", "hours", "two"),
    [("2025-03-30", 23, 0), ("2025-10-26", 25, 2), ("2024-10-27", 25, 2), ("2025-07-10", 24, 1)],
)
def test_counters_live_on_the_civil_clock(by_path, day, hours, two):
    labels = [row[0] for row in rows_of(by_path[f"counters/{day}.csv"], ",")][-hours:]
    assert labels[0] == f"{day} 00:00"
    assert labels == sorted(labels)
    assert labels.count(f"{day} 02:00") == two
    assert len([label for label in labels if label.startswith(day)]) == hours


def test_tivrel_says_no_unit(by_path):
    header = by_path["tivrel/2024-11-18.csv"].content.decode().splitlines()[0]
    assert header == "utc,station,component,value,quality,stage"


def test_dorrimoor_writes_latin_1_and_kelvane_utf_8(by_path):
    assert b"\xb5g/m\xb3" in by_path["dorrimoor/2024-07-02.csv"].content
    assert "µg/m³".encode() in by_path["kelvane/2024-07-02.csv"].content


def test_weather_days_are_standard_days(weather_rows, by_path, tmp_path):
    assert weather_rows[0][0] == datetime(2024, 7, 1, 1)
    assert weather_rows[-1][0] == datetime(2025, 12, 31, 23)
    assert len(weather_rows) == 13_175
    assert sum(row[1] is None for row in weather_rows) > 0
    (place,) = write_files([by_path["dorrimoor_weather/2025-10-26.parquet"]], tmp_path)
    with duckdb.connect() as connection:
        described = connection.execute(f"describe select * from '{place}'").fetchall()
        count = connection.execute(f"select count(*), min(time), max(time) from '{place}'").fetchone()
    assert [row[:2] for row in described] == [
        ("time", "TIMESTAMP"),
        *((name, "DOUBLE") for name in ("wind_speed", "wind_direction", "temperature", "rain")),
    ]
    assert count == (24, datetime(2025, 10, 26, 0), datetime(2025, 10, 26, 23))


def test_written_files_keep_their_time(by_path, tmp_path):
    file = by_path["kelvane/2024-07-01.csv"]
    (place,) = write_files([file], tmp_path / "feed")
    assert place == tmp_path / "feed" / "kelvane" / "2024-07-01.csv"
    assert place.read_bytes() == file.content
    assert place.stat().st_mtime == file.modified.timestamp()
