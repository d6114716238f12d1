"""The settings file: every mistake at once, with key and remedy; nothing is guessed or ignored."""

from __future__ import annotations

import copy
import datetime as dt
import re
import tomllib
from pathlib import Path
from typing import Any, get_args

import pytest
from pydantic import BaseModel

import rhovane_demo
from rhovane.model import ExitCode, Flag, SettingsError
from rhovane.settings import Settings, load_settings, parse_offset, settings_from

PLACE = Path("monitor.toml")


def plain() -> dict[str, Any]:
    return {
        "network": {"name": "Test", "standard_time": "+01:00", "civil_zone": "CET"},
        "source": [
            {
                "name": "feed",
                "form": "wide csv",
                "files": "feed/*.csv",
                "clock": "UTC",
                "label": "start",
                "columns": {"time": "time"},
                "series": {"a": "A.NO2", "b": "B.NO2", "d": "B.wind_direction"},
            }
        ],
        "series": [
            {"key": "A.NO2", "unit": "ug/m3"},
            {"key": "B.NO2", "unit": "ug/m3"},
            {"key": "B.wind_direction", "unit": "deg", "kind": "circular"},
        ],
        "pair": [{"first": "A.NO2", "second": "B.NO2"}],
    }


def refusal(raw: dict[str, Any]) -> str:
    with pytest.raises(SettingsError) as caught:
        settings_from(raw, PLACE)
    assert caught.value.exit_code is ExitCode.SETTINGS_MISTAKE
    return str(caught.value)


def test_plain_settings_are_accepted_and_defaults_filled_in():
    settings = settings_from(plain(), PLACE)
    assert settings.correlation.window_hours == 672
    assert settings.alerts.false_alarms_per_year == 4
    assert settings.pair[0].key == "A.NO2~B.NO2"
    assert settings.accepted_flags() == {Flag.PASS, Flag.NOT_EVALUATED}


def test_an_unknown_key_is_refused_and_the_known_ones_are_named():
    raw = plain()
    raw["correlation"] = {"window_hour": 100}
    text = refusal(raw)
    assert "correlation.window_hour: not a setting" in text
    assert "window_hours" in text
    assert "monitor.toml has 1 mistake" in text
    assert "Nothing was run" in text


def test_all_mistakes_are_told_at_once():
    raw = plain()
    raw["correlation"] = {"window_hours": 5, "min_coverage": 2}
    raw["network"]["standard_time"] = "Paris"
    del raw["source"][0]["clock"]
    text = refusal(raw)
    assert "has 4 mistakes" in text
    for key in (
        "correlation.window_hours",
        "correlation.min_coverage",
        "network.standard_time",
        "source[0] (feed).clock",
    ):
        assert key in text


@pytest.mark.parametrize("key", ["clock", "label"])
def test_an_undeclared_clock_or_label_is_never_guessed(key: str):
    raw = plain()
    del raw["source"][0][key]
    text = refusal(raw)
    assert f"source[0] (feed).{key}: must be given" in text


@pytest.mark.parametrize("clock", ["local", "civil Nowhere/City", "+25:00", "civil"])
def test_a_clock_that_does_not_exist_is_refused_with_the_forms_allowed(clock: str):
    raw = plain()
    raw["source"][0]["clock"] = clock
    text = refusal(raw)
    assert "source[0] (feed).clock" in text
    assert clock in text


def test_a_circular_series_is_never_ranked_and_the_remedy_is_told():
    raw = plain()
    raw["pair"].append({"first": "A.NO2", "second": "B.wind_direction"})
    text = refusal(raw)
    assert "circular" in text
    assert "sector mask" in text


@pytest.mark.parametrize(
    ("change", "told"),
    [
        ({"adjusted_for": ["A.NO2"]}, "member of the pair"),
        ({"adjusted_for": ["C.NO2"]}, "is not defined"),
        ({"second": "A.NO2"}, "paired with itself"),
        ({"lags": [3, -3]}, "after last lag"),
        ({"lags": [-400, 400]}, "within ±168 hours"),
        ({"sector": {"direction": "A.NO2", "from_deg": 0, "to_deg": 90}}, "not of kind"),
    ],
)
def test_a_pair_that_contradicts_itself_is_refused(change: dict[str, Any], told: str):
    raw = plain()
    raw["pair"][0].update(change)
    assert told in refusal(raw)


def test_names_used_twice_and_series_nobody_delivers_are_refused():
    raw = plain()
    raw["series"].append({"key": "C.NO2", "unit": "ug/m3"})
    raw["pair"].append(copy.deepcopy(raw["pair"][0]))
    text = refusal(raw)
    assert "no source delivers it" in text
    assert "'A.NO2~B.NO2' is defined 2 times" in text


def test_a_source_that_delivers_an_undefined_series_is_refused():
    raw = plain()
    raw["source"][0]["series"]["x"] = "X.NO2"
    assert "'X.NO2' is not defined" in refusal(raw)


def test_a_missing_file_says_how_to_get_one(tmp_path: Path):
    with pytest.raises(SettingsError, match=r"no such settings file.*rhovane demo"):
        load_settings(tmp_path / "absent.toml")


def test_text_that_is_not_toml_is_told_with_its_line(tmp_path: Path):
    path = tmp_path / "bad.toml"
    path.write_text("[network]\nname = \n", encoding="utf-8")
    with pytest.raises(SettingsError, match=r"not valid TOML.*line 2"):
        load_settings(path)


def test_recipes_that_differ_in_numbers_differ_in_hash_and_labels_do_not():
    base = settings_from(plain(), PLACE)
    labelled, lagged, windowed = plain(), plain(), plain()
    labelled["pair"][0]["label"] = "neighbours"
    lagged["pair"][0]["lags"] = [0, 1]
    windowed["correlation"] = {"window_hours": 336}
    hashes = [
        s.pair_of(s.pair[0]).recipe_hash
        for s in (settings_from(r, PLACE) for r in (labelled, lagged, windowed))
    ]
    own = base.pair_of(base.pair[0]).recipe_hash
    assert hashes[0] == own
    assert len({own, *hashes[1:]}) == 3


def test_the_settings_hash_changes_with_any_setting_but_not_with_the_place():
    base = settings_from(plain(), PLACE)
    assert settings_from(plain(), Path("elsewhere/x.toml")).settings_hash == base.settings_hash
    raw = plain()
    raw["alerts"] = {"false_alarms_per_year": 2}
    assert settings_from(raw, PLACE).settings_hash != base.settings_hash


@pytest.mark.parametrize(("text", "minutes"), [("+01:00", 60), ("-05:30", -330), ("+00:00", 0)])
def test_offsets_are_read_with_their_sign(text: str, minutes: int):
    assert parse_offset(text) == dt.timedelta(minutes=minutes)


def described_keys(model: type[BaseModel], prefix: str = "") -> set[str]:
    keys = set()
    for name, field in model.model_fields.items():
        if name == "origin":
            continue
        candidates = (field.annotation, *get_args(field.annotation))
        inner = [c for c in candidates if isinstance(c, type) and issubclass(c, BaseModel)]
        keys |= described_keys(inner[0], f"{prefix}{name}.") if inner else {f"{prefix}{name}"}
    return keys


def test_the_shipped_settings_file_shows_every_setting():
    text = rhovane_demo.settings_text()
    settings = settings_from(tomllib.loads(text), PLACE)
    assert isinstance(settings, Settings)
    missing = [
        key
        for key in described_keys(Settings)
        if not re.search(rf"(?m)^[#\s{{]*(.*[\s{{,])?{re.escape(key.split('.')[-1])}\b\s*(=|  )", text)
        and f"[source.{key.split('.')[-1]}]" not in text
    ]
    assert missing == []


def with_segments(*segments: tuple[str, str]) -> dict[str, Any]:
    raw = plain()
    raw["series"][0]["segments"] = [{"first_day": day, "what": what} for day, what in segments]
    return raw


def test_segments_are_days_in_order_and_move_the_recipe_hash_of_their_pairs_only():
    raw = with_segments(("2025-03-01", "new analyser"), ("2025-06-01", "moved across the road"))
    settings = settings_from(raw, PLACE)
    base = settings_from(plain(), PLACE)
    assert [s.first_day for s in settings.domain_series()[0].segments] == [
        dt.date(2025, 3, 1),
        dt.date(2025, 6, 1),
    ]
    assert settings.domain_series()[1].segments == ()
    assert settings.pair_of(settings.pair[0]).recipe_hash != base.pair_of(base.pair[0]).recipe_hash
    reworded = settings_from(with_segments(("2025-03-01", "a"), ("2025-06-01", "b")), PLACE)
    assert reworded.pair_of(reworded.pair[0]).recipe_hash == settings.pair_of(settings.pair[0]).recipe_hash
    for days in (("2025-06-01", "2025-03-01"), ("2025-03-01", "2025-03-01")):
        assert "give each day once, in order" in refusal(with_segments(*((day, "x") for day in days)))
    assert "first_day" in refusal(with_segments(("next spring", "x")))
