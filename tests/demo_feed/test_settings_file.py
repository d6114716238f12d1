"""The shipped settings: complete, loadable, and in step with what the feed delivers."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest
from pydantic import BaseModel

import rhovane_demo
from rhovane.model import ReadingsUse
from rhovane.settings import Settings, load_settings, load_site_log
from rhovane_demo import clocks, layouts
from rhovane_demo.instruments import FAIL, MISSING, PASS, SUSPECT, UNITS

CONFIG = Path(__file__).parents[2] / "config" / "monitor.toml"
WORDS = {PASS: "pass", SUSPECT: "suspect", FAIL: "fail", MISSING: "missing"}


@pytest.fixture(scope="module")
def settings() -> Settings:
    return load_settings(CONFIG)


def sections(model: type[BaseModel]) -> list[type[BaseModel]]:
    found = [model]
    for field in model.model_fields.values():
        for inner in (field.annotation, *getattr(field.annotation, "__args__", ())):
            if isinstance(inner, type) and issubclass(inner, BaseModel):
                found += sections(inner)
    return found


def test_every_setting_of_the_schema_is_in_the_file():
    text = CONFIG.read_text(encoding="utf-8")
    looked_for = 0
    for section in sections(Settings):
        for name in set(section.model_fields) - {"origin"}:
            written = re.search(rf"(^|[\s#{{]){name} = |^(# )?\[+(\w+\.)?{name}\]+$", text, re.MULTILINE)
            assert written, f"{section.__name__}.{name} is not in {CONFIG.name}"
            looked_for += 1
    assert looked_for > 50


def test_every_plain_setting_has_a_comment():
    lines = CONFIG.read_text(encoding="utf-8").split("[[source]]")[0].splitlines()
    settings_lines = [i for i, line in enumerate(lines) if re.match(r"^\w+ = ", line)]
    assert len(settings_lines) == 45
    for i in settings_lines:
        assert lines[i - 1].startswith("# "), lines[i]


def test_network_and_calendar_are_those_of_the_world(settings):
    assert settings.network.standard_offset.total_seconds() == 3600 * clocks.STANDARD_OFFSET_HOURS
    assert settings.network.civil_zone == clocks.CIVIL_ZONE
    expected = {
        first + (last - first) / max((last - first).days, 1) * i
        for first, last in clocks.OTHER_DAYS
        for i in range((last - first).days + 1)
    }
    assert settings.other_days(min(expected), max(expected)) == expected
    assert settings.work_folder == (CONFIG.parent / "../rhovane-demo").resolve()
    assert settings.alerts.false_alarms_per_year == 4


def test_series_and_units_are_those_of_the_world(settings):
    assert {series.key: series.unit for series in settings.series} == UNITS
    assert all(series.label for series in settings.series)
    assert {s.key for s in settings.series if s.kind == "circular"} == {
        "DOR.wind_direction",
        "UVE.wind_direction",
    }
    assert {s.key for s in settings.series if s.kind == "accumulated"} == {"DOR.rain", "UVE.rain"}


def test_pairs_are_24_and_distinct(settings):
    keys = [pair.key for pair in settings.pair]
    assert len(keys) == len(set(keys)) == 24
    assert "KEL.traffic~KEL.NO2[adjusted]" in keys
    assert "SKA.lorries~SKA.PM10[20-90deg]" in keys
    assert "UVE.rain~DOR.rain[wet]" in keys


def test_sources_are_declared_as_they_are_written(settings):
    declared = {source.name: source for source in settings.source}
    assert list(declared) == [source.name for source in layouts.SOURCES]
    clock = {"utc": "UTC", "standard": "+01:00", "civil": "civil CET"}
    for written in layouts.SOURCES:
        source = declared[written.name]
        assert source.series == written.series
        assert source.clock == clock[written.clock]
        if isinstance(written, layouts.ParquetSource):
            continue
        assert source.time_format == written.time_format
        assert source.delimiter == written.delimiter
        assert source.encoding == written.encoding
        assert source.missing == (written.missing,)
        columns = source.columns.model_dump()
        header = written.header.split(source.delimiter)
        assert {name for name in columns.values() if name} <= set(header)
        if isinstance(written, layouts.LongSource):
            assert source.label == "start"
            assert source.flags == {letter: WORDS[q] for q, letter in written.codes.items()}
            roles = {
                "time": "time",
                "station": "station",
                "component": "quantity",
                "value": "value",
                "code": "flag",
                "unit": "unit",
                "stage": "stage",
                "issued": "issued",
            }
            assert [columns[roles[field]] for field in written.fields] == header
        else:
            assert source.label == ("end" if written.label_end else "start")
            assert source.decimal == written.decimal
            assert header == [source.columns.time, *written.series]


def test_settings_text_is_the_file_of_the_checkout():
    assert rhovane_demo.settings_text() == CONFIG.read_text(encoding="utf-8")
    for name in rhovane_demo.SETTINGS_FILES:
        assert rhovane_demo.settings_text(name) == (CONFIG.parent / name).read_text(encoding="utf-8")


def test_all_settings_files_travel_with_the_installed_package():
    built = tomllib.loads((CONFIG.parents[1] / "pyproject.toml").read_text(encoding="utf-8"))
    included = built["tool"]["hatch"]["build"]["targets"]["wheel"]["force-include"]
    assert included == {f"config/{name}": f"rhovane_demo/{name}" for name in rhovane_demo.SETTINGS_FILES}


def test_the_shipped_site_log_holds_notes_only(settings):
    entries = load_site_log(
        settings.site_log_path, settings.series_by_key(), settings.network.standard_offset
    )
    assert len(entries) == 2
    assert {entry.readings for entry in entries} == {ReadingsUse.AS_USUAL}


def run_with_package_at(folder: Path, code: str) -> subprocess.CompletedProcess[str]:
    environment = {**os.environ, "PYTHONPATH": str(folder)}
    return subprocess.run(
        [sys.executable, "-c", code], env=environment, capture_output=True, text=True, check=False
    )


def test_installed_package_uses_its_own_copy_and_says_when_it_has_none(tmp_path):
    package = tmp_path / "lib" / "site" / "rhovane_demo"
    package.mkdir(parents=True)
    shutil.copy(rhovane_demo.__file__, package / "__init__.py")
    code = "import rhovane_demo; print(rhovane_demo.settings_text())"
    without = run_with_package_at(package.parent, code)
    assert without.returncode != 0
    assert "demo settings are missing" in without.stderr
    (package / "monitor.toml").write_text("# the copy", encoding="utf-8")
    assert run_with_package_at(package.parent, code).stdout.strip() == "# the copy"


def test_importing_the_package_loads_no_numpy():
    code = "import sys, rhovane_demo; print('numpy' in sys.modules, 'duckdb' in sys.modules)"
    ran = run_with_package_at(Path(rhovane_demo.__file__).parents[1], code)
    assert ran.stdout.split() == ["False", "False"]
