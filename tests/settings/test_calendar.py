"""The calendar file: days by rule, whom they concern, and every mistake at once."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import pytest

from rhovane.model import ExitCode, SettingsError
from rhovane.settings import CalendarEntry, Settings, load_settings
from rhovane.settings.calendar import load_calendar

D = dt.date
SERIES = ("A.NO2", "A.O3", "B.NO2")
SETTINGS = """
[network]
name = "Test"
[calendar]
file = "days.toml"
[[source]]
name = "feed"
form = "wide csv"
files = "feed/*.csv"
clock = "UTC"
label = "start"
columns = { time = "time" }
series = { a = "A.NO2", b = "B.NO2" }
[[series]]
key = "A.NO2"
unit = "ug/m3"
[[series]]
key = "B.NO2"
unit = "ug/m3"
[[pair]]
first = "A.NO2"
second = "B.NO2"
[[pair]]
first = "A.NO2"
second = "B.NO2"
working_days_only = true
"""


def entry(**given: object) -> CalendarEntry:
    plain = {"title": "x", "kind": "not judged", "first": D(2025, 1, 7), **given}
    return CalendarEntry.model_validate(plain)


def loaded(folder: Path, calendar: str) -> Settings:
    (folder / "days.toml").write_text(calendar, encoding="utf-8")
    (folder / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    return load_settings(folder / "monitor.toml")


def refusal(folder: Path, calendar: str) -> str:
    path = folder / "days.toml"
    path.write_text(calendar, encoding="utf-8")
    with pytest.raises(SettingsError) as caught:
        load_calendar(path, SERIES)
    assert caught.value.exit_code is ExitCode.SETTINGS_MISTAKE
    return str(caught.value)


def test_a_yearly_span_covers_the_turn_of_the_year_from_wherever_one_looks():
    break_ = entry(first=D(2024, 12, 23), last=D(2025, 1, 1), rule="FREQ=YEARLY")
    assert len(break_.dates(D(2024, 1, 1), D(2026, 12, 31))) == 10 * 2 + 9
    assert break_.dates(D(2025, 1, 1), D(2025, 12, 23)) == {D(2025, 1, 1), D(2025, 12, 23)}
    assert break_.dates(D(2020, 1, 1), D(2024, 12, 22)) == frozenset()
    assert break_.spans(D(2026, 1, 1), D(2026, 1, 5)) == [(D(2025, 12, 23), D(2026, 1, 1))]


@pytest.mark.parametrize(
    ("rule", "expected"),
    [
        ("", [7]),
        ("FREQ=WEEKLY;COUNT=3", [7, 14, 21]),
        ("FREQ=WEEKLY;BYDAY=TU;UNTIL=20250120", [7, 14]),
        ("FREQ=MONTHLY;BYDAY=1TU", [7]),
        ("FREQ=DAILY;INTERVAL=10", [7, 17, 27]),
    ],
)
def test_rules_of_rfc_5545_give_their_days(rule: str, expected: list[int]):
    found = entry(rule=rule).dates(D(2025, 1, 1), D(2025, 1, 31))
    assert sorted(day.day for day in found) == expected


def test_an_entry_concerns_its_series_its_stations_or_all():
    assert entry().concerns("B.NO2")
    assert entry(series=("A.NO2",)).concerns("A.NO2")
    assert not entry(series=("A.NO2",)).concerns("A.O3")
    assert entry(stations=("A",)).concerns("A.O3")
    assert not entry(stations=("A",)).concerns("B.NO2")


def test_all_mistakes_of_the_file_are_told_at_once_with_entry_key_and_remedy(tmp_path: Path):
    text = refusal(
        tmp_path,
        """
        holidays = 3
        [[entry]]
        title = "spring"
        kind = "holiday"
        first = 2025-04-18
        [[entry]]
        kind = "maintenance"
        first = 2025-01-08
        last = 2025-01-07
        rule = "FREQ=WEEKLY;BYDAY=TU"
        hours = [11, 9]
        series = ["A.PM10"]
        stations = ["C"]
        repeat = true
        [[entry]]
        title = "check"
        kind = "maintenance"
        first = 2025-01-08
        last = 2025-01-07
        rule = "FREQ=WEEKLY;BYDAY=TU"
        hours = [11, 9]
        series = ["A.PM10"]
        stations = ["C"]
        """,
    )
    assert "days.toml has 9 mistakes" in text
    for told in (
        "holidays: not known here",
        "entry[0] (spring).kind: 'holiday' is not a kind; write one of 'other days'",
        "entry[1].title: must be given",
        "entry[1].repeat: not known; known here: title, kind",
        "entry[2] (check).last: 2025-01-07 is before",
        "entry[2] (check).rule: the first day 2025-01-08 does not follow it; begin on 2025-01-14",
        "entry[2] (check).hours: [11, 9] is no part of a day",
        "entry[2] (check).series: series 'A.PM10' is not defined; known: A.NO2",
        "entry[2] (check).stations: station 'C' has no series; known: A, B",
    ):
        assert told in text


@pytest.mark.parametrize(
    ("keys", "told"),
    [
        ('rule = "every tuesday"', "is no part of a rule for days"),
        ('rule = "FREQ=HOURLY"', "write FREQ=DAILY|WEEKLY|MONTHLY|YEARLY"),
        ('rule = "FREQ=WEEKLY;BYDAY=XX"', "is not a rule of RFC 5545"),
        ('rule = "FREQ=YEARLY;BYEASTER=-2"', "'BYEASTER' is no part of a rule"),
        ('rule = "FREQ=YEARLY;BYMONTH=2;BYMONTHDAY=30"', "has no day within 30 years"),
        ("hours = [8, 10]", "hours are for kind"),
        ('kind = "other days"\nseries = ["A.NO2"]', "leave series and stations out"),
        ("first = 7", "first: "),
    ],
)
def test_an_entry_that_makes_no_sense_is_refused(tmp_path: Path, keys: str, told: str):
    plain = {"title": 'title = "x"', "kind": 'kind = "not judged"', "first": "first = 2025-01-07"}
    lines = [line for name, line in plain.items() if f"{name} = " not in keys]
    assert told in refusal(tmp_path, "\n".join(["[[entry]]", *lines, keys]))


def test_a_calendar_that_is_named_but_not_there_says_what_to_do(tmp_path: Path):
    (tmp_path / "monitor.toml").write_text(SETTINGS, encoding="utf-8")
    with pytest.raises(SettingsError, match=r'days\.toml: the calendar cannot be read.*set it to ""'):
        load_settings(tmp_path / "monitor.toml")
    (tmp_path / "days.toml").write_text("[[entry]\n", encoding="utf-8")
    with pytest.raises(SettingsError, match=r"days\.toml: not valid TOML.*line 1"):
        load_settings(tmp_path / "monitor.toml")


def test_other_days_make_another_recipe_of_working_days_and_maintenance_of_none(tmp_path: Path):
    holiday = '[[entry]]\ntitle = "h"\nkind = "other days"\nfirst = 2025-05-01\n'
    service = '[[entry]]\ntitle = "s"\nkind = "maintenance"\nfirst = 2025-05-02\n'
    plain, rest, visited = (loaded(tmp_path, text) for text in ("", holiday, service))
    assert rest.other_days(D(2025, 4, 1), D(2025, 6, 1)) == {D(2025, 5, 1)}
    assert visited.other_days(D(2025, 4, 1), D(2025, 6, 1)) == frozenset()
    hashes = [[s.pair_of(p).recipe_hash for p in s.pair] for s in (plain, rest, visited)]
    assert hashes[1][0] == hashes[0][0]
    assert hashes[1][1] != hashes[0][1]
    assert hashes[2] == hashes[0]
    assert len({plain.settings_hash, rest.settings_hash, visited.settings_hash}) == 3
