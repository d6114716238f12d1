"""A Table Schema beside a file is compared with the settings; the settings decide, and contradictions are told."""

import json
import os

import pytest

from ingest.small_network import NETWORK, WRITTEN, long_source, read_parquet, wide_source
from rhovane.ingest import list_files, parse_file

TEXT = "time,station,quantity,value\n2024-03-01 00:00,KEL,NO2,1.5\n"
FIELDS = {
    "time": {"name": "time", "type": "datetime", "format": "%Y-%m-%d %H:%M"},
    "station": {"name": "station", "type": "string"},
    "quantity": {"name": "quantity"},
    "value": {"name": "value", "type": "number"},
}


def notes(tmp_path, schema, source=None, place="day.csv.schema.json", text=TEXT):
    path = tmp_path / "day.csv"
    path.write_text(text)
    os.utime(path, (WRITTEN, WRITTEN))
    (tmp_path / place).write_text(schema if isinstance(schema, str) else json.dumps(schema))
    source = source or long_source()
    parsed = parse_file(path, source, NETWORK, read_parquet=read_parquet, work_folder=tmp_path)
    assert [row for row in parsed.rejected if row.line] == []
    assert len(parsed.value) == text.count("\n") - 1
    return [row.reason for row in parsed.rejected]


def schema(**changes):
    return {"fields": [{**field, **changes.get(name, {})} for name, field in FIELDS.items()]}


def test_a_schema_that_agrees_says_nothing(tmp_path):
    assert notes(tmp_path, schema()) == []
    agreeing = {**schema(), "missingValues": ["", "-999"], "primaryKey": ["time"]}
    assert notes(tmp_path, agreeing, long_source(missing=["-999", ""])) == []


@pytest.mark.parametrize(
    ("change", "says"),
    [
        ({"value": {"decimalChar": ","}}, 'Set decimal = ","'),
        ({"value": {"type": "string"}}, 'the type "string", not a number'),
        ({"value": {"type": None}}, "not a number"),
        ({"value": {"groupChar": " "}}, "group digits"),
        ({"value": {"bareNumber": False}}, "bareNumber false"),
        ({"time": {"format": "%d.%m.%Y %H:%M"}}, 'as "%d.%m.%Y %H:%M", the settings as "%Y-%m-%d %H:%M"'),
        ({"time": {"format": "default"}}, "in the default format"),
        ({"time": {"type": "number"}}, 'the time column "time" the type "number"'),
        ({"station": {"name": "site"}}, 'lists columns that the file lacks: "site"'),
        ({"station": {"name": "site"}}, 'lacks columns of the file: "station"'),
    ],
)
def test_contradictions_are_told_with_the_remedy(tmp_path, change, says):
    found = notes(tmp_path, schema(**change))
    assert any(says in text for text in found), found
    assert all(text.startswith("The schema day.csv.schema.json ") for text in found)


def test_missing_values_are_compared_both_ways(tmp_path):
    (found,) = notes(tmp_path, {**schema(), "missingValues": ["", "NA", "-99"]}, long_source(missing=["NA"]))
    assert 'calls "-99" missing. List it under missing' in found
    (found,) = notes(tmp_path, {**schema(), "missingValues": [""]}, long_source(missing=["-999"]))
    assert 'does not call "-999" missing' in found


def test_a_schema_can_be_named_in_the_settings_and_then_it_must_be_there(tmp_path):
    named = long_source(table_schema="air.json")
    (found,) = notes(tmp_path, schema(value={"decimalChar": ","}), named, place="air.json")
    assert "The schema air.json" in found
    (found,) = notes(tmp_path, schema(), long_source(table_schema="gone.json"), place="other.json")
    assert "gone.json cannot be read" in found


def test_the_columns_of_a_wide_file_are_compared(tmp_path):
    kinds = {"time": "string", "no2": "integer", "o3": "boolean"}
    source = wide_source(series={"no2": "KEL.NO2", "o3": "KEL.O3"})
    fields = [{"name": name, "type": kind} for name, kind in kinds.items()]
    text = "time,no2,o3\n2024-03-01 00:00,1,2\n"
    path = tmp_path / "day.csv"
    path.write_text(text)
    (tmp_path / "day.csv.schema.json").write_text(json.dumps({"fields": fields}))
    parsed = parse_file(path, source, NETWORK, read_parquet=read_parquet)
    assert parsed.value.tolist() == [1, 2]
    assert [row.reason[:70] for row in parsed.rejected] == [
        'The schema day.csv.schema.json gives column "o3" the type "boolean", not'[:70]
    ]


@pytest.mark.parametrize(
    "content",
    [
        "{",
        "[]",
        '{"fields": 3}',
        '{"fields": [1]}',
        '{"fields": [{"type": "number"}]}',
        "[" * 100_000,
        "\x00",
    ],
)
def test_what_is_no_schema_is_told_and_the_file_is_read(tmp_path, content):
    (found,) = notes(tmp_path, content)
    assert "is no JSON" in found or "is no Table Schema" in found


def test_schemas_are_never_taken_for_feed_files(tmp_path):
    (tmp_path / "feed").mkdir()
    for name in ("a.json", "a.json.schema.json"):
        (tmp_path / "feed" / name).write_text("x")
    for pattern in ("feed/*.json", "feed/**/*.json"):
        assert [f.place for f in list_files(long_source(files=pattern), tmp_path)] == ["feed/a.json"]
