"""OGC SensorThings 1.1 observations in every shape that the standard gives them."""

import json

import numpy as np
import pytest

from ingest.small_network import long_source, only_reason, places
from reference.feed_layouts import SENSORTHINGS_SHAPES, write_sensorthings

MARCH_1 = 1_709_251_200  # 2024-03-01 00:00 UTC
HOUR = 3600
NO2, O3 = ("7", "KEL nitrogen dioxide"), ("'a b'", "KEL ozone")


COLUMNS = {
    "time": "phenomenonTime",
    "station": "",
    "quantity": "Datastream",
    "value": "result",
    "unit": "unitOfMeasurement",
    "issued": "resultTime",
}


def source(**changes):
    usual = {
        "form": "long sensorthings",
        "series": {"7": "KEL.NO2", "KEL ozone": "KEL.O3"},
        "unit_names": {"µg/m3": "ug/m3"},
    }
    return long_source(**{**usual, **changes, "columns": COLUMNS | changes.get("columns", {})})


def observation(**members):
    usual = {
        "phenomenonTime": "2024-03-01T00:00:00Z/2024-03-01T01:00:00Z",
        "resultTime": "2024-03-01T01:10:00Z",
        "result": 12.5,
        "Datastream": {"@iot.id": 7, "unitOfMeasurement": {"symbol": "ug/m3"}},
    }
    return usual | members


def read(parse, document, **changes):
    return parse(json.dumps(document), source(**changes))


@pytest.mark.parametrize("interval", [True, False])
@pytest.mark.parametrize("label", ["start", "end"])
@pytest.mark.parametrize("shape", SENSORTHINGS_SHAPES)
def test_every_shape_gives_the_same_readings(parse, shape, label, interval):
    rng = np.random.default_rng(5)
    readings = [
        (stream, MARCH_1 + HOUR * i, None if rng.random() < 0.1 else float(rng.integers(0, 6)))
        for stream in (NO2, O3)
        for i in range(30)
    ]
    parsed = parse(write_sensorthings(readings, shape, label=label, interval=interval), source(label=label))
    assert [r for r in parsed.rejected if r.line] == []
    assert parsed.series_key.tolist() == ["KEL.NO2"] * 30 + ["KEL.O3"] * 30
    assert parsed.hour_start.tolist() == [t for _, t, _ in readings]
    np.testing.assert_array_equal(parsed.value, [np.nan if v is None else v for *_, v in readings])


def test_a_page_that_is_not_the_last_is_told(parse):
    page = {"value": [observation()], "@iot.nextLink": "http://x/v1.1/Observations?$skip=1"}
    parsed = read(parse, page)
    assert len(parsed.value) == 1
    assert "more observations follow" in only_reason(parsed)


def test_the_datastream_is_known_from_the_links_of_a_page(parse):
    bare = {k: v for k, v in observation().items() if k != "Datastream"}
    page = {"value": [bare], "@iot.nextLink": "http://x/v1.1/Datastreams(7)/Observations?$skip=1"}
    assert read(parse, page, columns={"unit": ""}).series_key.tolist() == ["KEL.NO2"]
    link = bare | {"Datastream@iot.navigationLink": "http://x/v1.1/Datastreams(7)"}
    assert read(parse, link, columns={"unit": ""}).series_key.tolist() == ["KEL.NO2"]
    parsed = read(parse, [bare], columns={"unit": ""}, series={"": "KEL.NO2"})
    assert parsed.series_key.tolist() == ["KEL.NO2"]


def test_an_observation_of_no_known_datastream_is_rejected_by_its_name(parse):
    stray = observation(Datastream={"@iot.id": 99, "name": "mystery"})
    parsed = read(parse, {"value": [observation(), stray]})
    assert places(parsed) == [(2, "Datastream", "mystery")]
    assert 'List "mystery" under [source.series]' in only_reason(parsed)


@pytest.mark.parametrize(
    ("time", "says"),
    [
        ("2024-03-01T00:00:00Z/2024-03-01T00:30:00Z", "lasts 1800 s, but the step of this source is 1h"),
        ("2024-03-01T00:00:00Z/2024-03-01T01:00:00", "one end has an offset"),
        ("2024-03-01T01:00:00Z/2024-03-01T00:00:00Z", "lasts -3600 s"),
        ("2024-03-01T00:00:00Z/..", "neither a time"),
        ("yesterday", "neither a time"),
        (None, "no phenomenonTime"),
        (17, "no phenomenonTime"),
    ],
)
def test_times_that_name_no_interval_are_rejected(parse, time, says):
    parsed = read(parse, {"value": [observation(phenomenonTime=time), observation()]})
    assert [(row.line, row.column) for row in parsed.rejected] == [(1, "phenomenonTime")]
    assert says in only_reason(parsed)
    assert parsed.rows_read == 2


def test_times_without_an_offset_are_on_the_clock_of_the_source(parse):
    one = observation(phenomenonTime="2024-03-01T05:00:00", resultTime=None)
    assert read(parse, one, clock="+01:00").hour_start.tolist() == [MARCH_1 + 4 * HOUR]
    with_offset = observation(phenomenonTime="2024-03-01T05:00:00+02:00")
    assert read(parse, with_offset, clock="+01:00").hour_start.tolist() == [MARCH_1 + 3 * HOUR]


def test_the_result_time_decides_between_two_observations_of_an_hour(parse):
    early = observation(result=1.0)
    late = observation(result=2.0, resultTime="2024-03-05T00:00:00Z")
    for order in ([early, late], [late, early]):
        parsed = read(parse, order)
        assert parsed.value.tolist() == [2.0]
        assert "was issued later" in only_reason(parsed)


@pytest.mark.parametrize(
    "quality",
    [
        "good",
        {"code": "good"},
        [{"code": "good"}],
        {"DQ_Result": {"code": "good"}},
        {"DQ_Element": {"DQ_Result": {"code": "good"}}},
    ],
)
def test_quality_codes_are_found_where_services_put_them(parse, quality):
    parsed = read(
        parse, observation(resultQuality=quality), columns={"flag": "resultQuality"}, flags={"good": "pass"}
    )
    assert parsed.flag.tolist() == [1]


def test_a_quality_nobody_mapped_is_rejected_with_its_text(parse):
    parsed = read(
        parse,
        observation(resultQuality={"a": 1, "b": 2}),
        columns={"flag": "resultQuality"},
        flags={"good": "pass"},
    )
    assert places(parsed) == [(1, "resultQuality", '{"a": 1, "b": 2}')]


def test_nested_members_are_named_with_dots(parse):
    one = observation(parameters={"state": "P"})
    parsed = read(parse, one, columns={"stage": "parameters.state"}, stages={"P": "preliminary"})
    assert parsed.stage.tolist() == [1]


@pytest.mark.parametrize("result", [True, [1, 2], {"a": 1}, "many", "1e999", 10**400])
def test_results_that_are_no_number_are_rejected(parse, result):
    parsed = read(parse, {"value": [observation(result=result)]})
    assert (parsed.rejected[0].line, parsed.rejected[0].column) == (1, "result")
    assert parsed.rows_read == 1


def test_entries_that_are_no_observations_count_and_are_rejected(parse):
    parsed = read(parse, {"value": [observation(), 5, {"name": "KEL"}, None]})
    assert [row.line for row in parsed.rejected] == [2, 3, 4]
    assert parsed.rows_read == 4


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ('{"value": [', "is no JSON"),
        ("[" * 100_000, "nested too deeply"),
        ("[" * 50 + "]" * 50, "nested too deeply"),
        ('{"result": 1, "result": 2}', "twice"),
        ("   ", "is empty"),
        ('{"value": []}', "no rows"),
    ],
)
def test_documents_that_hold_no_observations_are_refused_as_a_whole(parse, text, says):
    parsed = parse(text, source())
    assert says in only_reason(parsed)
    assert parsed.rows_read == 0


def test_a_document_that_is_not_utf8_is_refused(parse):
    assert "not UTF-8" in only_reason(parse('{"value": "é"}'.encode("latin-1"), source()))
