"""The table of what is hidden, and which of it an alert may answer to."""

from __future__ import annotations

from datetime import date, timedelta

import pytest

from rhovane_demo.clocks import FIRST_DAY, LAST_DAY
from rhovane_demo.instruments import KEYS
from rhovane_demo.planted import BY_ID, TABLE, answers, pair_members


def test_ids_are_unique_and_series_exist():
    assert len(BY_ID) == len(TABLE) == 17
    for planted in TABLE:
        assert planted.series, planted.id
        assert set(planted.series) <= set(KEYS), planted.id
        assert FIRST_DAY <= planted.first <= planted.last <= LAST_DAY, planted.id


def test_kinds_are_five_changes_a_blind_spot_a_data_note_and_decoys():
    kinds = {planted.id: planted.kind for planted in TABLE}
    assert [i for i, kind in kinds.items() if kind == "change"] == ["T1", "T2", "T3", "T4", "T5"]
    assert kinds["T6"] == "blind spot"
    assert kinds["T7"] == "data note"
    assert {i for i, kind in kinds.items() if kind == "decoy"} == {f"D{n}" for n in range(1, 11)}


@pytest.mark.parametrize(
    ("event", "first", "last"),
    [
        ("T1", date(2025, 2, 10), date(2025, 3, 23)),
        ("T2", date(2025, 4, 1), date(2025, 6, 19)),
        ("T3", date(2025, 5, 14), date(2025, 8, 11)),
        ("T4", date(2025, 10, 6), date(2025, 11, 9)),
        ("T5", date(2025, 7, 21), date(2025, 12, 31)),
        ("T7", date(2025, 8, 25), date(2025, 10, 5)),
        ("D4", date(2025, 2, 24), date(2025, 3, 4)),
    ],
)
def test_dates_are_those_of_the_scenario(event, first, last):
    assert (BY_ID[event].first, BY_ID[event].last) == (first, last)


def test_pair_key_with_and_without_recipe():
    assert pair_members("KEL.traffic~KEL.NO2[adjusted]") == ("KEL.traffic", "KEL.NO2")
    assert pair_members("PEL.NO2~DOR.NO2") == ("PEL.NO2", "DOR.NO2")


@pytest.mark.parametrize("key", ["KEL.NO2", "~KEL.NO2", "KEL.NO2~", "", "[a~b]"])
def test_other_keys_are_refused(key):
    with pytest.raises(ValueError, match="write FIRST~SECOND"):
        pair_members(key)


def test_alert_answers_from_the_first_day_to_21_days_after_the_last():
    drift = BY_ID["T2"]
    for raised, expected in (
        (drift.first - timedelta(days=1), False),
        (drift.first, True),
        (drift.last + timedelta(days=21), True),
        (drift.last + timedelta(days=22), False),
    ):
        found = answers("PEL.NO2~DOR.NO2", raised - timedelta(days=5), raised)
        assert ("T2" in found) == expected, raised


def test_alert_on_untouched_series_answers_to_nothing():
    assert answers("UVE.rain~UVE.mixing_height", date(2025, 5, 1), date(2025, 5, 3)) == []
    assert answers("DOR.NO2~UVE.NO2", date(2025, 4, 20), date(2025, 4, 22)) == []


def test_nearest_first_day_comes_first():
    late_june = date(2025, 6, 20)
    assert answers("PEL.NO2~UVE.NO2", date(2025, 5, 15), late_june) == ["T3", "T2"]
    assert answers("PEL.NO2~UVE.NO2", date(2025, 4, 3), late_june) == ["T2", "T3"]


def test_smoke_concerns_pairs_of_particles_only():
    during = date(2025, 6, 18)
    assert "D5" in answers("DOR.PM25~PEL.PM25", during, during)
    assert "D5" not in answers("DOR.PM25~DOR.NO2", during, during)
    assert "T5" in answers("SKA.lorries~SKA.PM10[20-90deg]", date(2025, 7, 22), date(2025, 7, 25))


def test_alert_before_its_onset_is_refused():
    with pytest.raises(ValueError, match="cannot begin later"):
        answers("PEL.NO2~DOR.NO2", date(2025, 5, 2), date(2025, 5, 1))
