"""The site log file: times of standard time, what becomes of the readings, every mistake with line and column."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import pytest

from rhovane.model import ReadingsUse, SettingsError, SiteLogEntry
from rhovane.settings import load_site_log

HOUR = dt.timedelta(hours=1)
SERIES = ("A.NO2", "A.O3", "B.NO2")
HEADER = "subject,from,to,what,readings\n"


def load(folder: Path, text: str) -> tuple[SiteLogEntry, ...]:
    path = folder / "site_log.csv"
    path.write_text(text, encoding="utf-8")
    return load_site_log(path, SERIES, HOUR)


def utc(*parts: int) -> dt.datetime:
    return dt.datetime(*parts, tzinfo=dt.UTC)


def test_days_are_whole_and_times_exact_on_standard_time(tmp_path: Path):
    found = load(
        tmp_path,
        "# a comment\n"
        + HEADER
        + "A.NO2,2025-03-01,2025-03-02,lamp changed,not used\n"
        + '\nA,2025-03-05 09:30,2025-03-05 11:00,"span check, zero check",as usual\n'
        + "*,2025-04-01,,new logger,\n",
    )
    assert found == (
        SiteLogEntry(
            "A.NO2", utc(2025, 2, 28, 23), utc(2025, 3, 2, 23), "lamp changed", ReadingsUse.NOT_USED
        ),
        SiteLogEntry(
            "A",
            utc(2025, 3, 5, 8, 30),
            utc(2025, 3, 5, 10),
            "span check, zero check",
            ReadingsUse.AS_USUAL,
        ),
        SiteLogEntry("*", utc(2025, 3, 31, 23), None, "new logger", ReadingsUse.NO_REFERENCE),
    )
    assert [[e.concerns(k) for k in SERIES] for e in found] == [
        [True, False, False],
        [True, True, False],
        [True, True, True],
    ]


def test_all_mistakes_are_told_with_line_and_column(tmp_path: Path):
    with pytest.raises(SettingsError) as caught:
        load(
            tmp_path,
            HEADER
            + "# the third line is wrong in every column\n"
            + "C,1.3.2025,soon,,ignore\n"
            + "A,2025-03-05,2025-03-04,lamp,as usual\n"
            + "A,2025-03-05,,lamp, changed,as usual\n"
            + "A,2025-03-09,,lamp,as usual\n"
            + "A,2025-03-09,,lamp,as usual\n",
        )
    text = str(caught.value)
    assert "site_log.csv has 8 mistakes" in text
    for told in (
        "line 3, column subject: 'C' is no series or station; write one of A, B",
        "line 3, column from: '1.3.2025' is no time; write YYYY-MM-DD",
        "line 3, column to: 'soon' is no time",
        "line 3, column what: is empty",
        "line 3, column readings: 'ignore' is not known; write one of as usual, no reference, not used",
        "line 4, column to: 2025-03-04 is not after 2025-03-05",
        "line 5: 6 cells for 5 columns; put quotes",
        "line 7: the same entry stands further up",
    ):
        assert told in text


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("station,from,to\n", "line 1: the columns are station,from,to; write subject,from,to"),
        (None, "cannot be read"),
    ],
)
def test_a_file_without_its_columns_or_that_is_not_there_is_refused(
    tmp_path: Path, text: str | None, told: str
):
    if text is not None:
        (tmp_path / "log.csv").write_text(text, encoding="utf-8")
    with pytest.raises(SettingsError, match=told):
        load_site_log(tmp_path / "log.csv", SERIES, HOUR)


def test_a_file_with_its_header_only_holds_no_entries(tmp_path: Path):
    assert load(tmp_path, HEADER) == ()
