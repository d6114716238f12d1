"""Files from the page: whole, named, with cautions; and readable as README says."""

from __future__ import annotations

import json
import re
from pathlib import Path

import duckdb
import pandas as pd
import pytest

from rhovane.model import CAUTION
from rhovane.web.downloads import TABLES
from web.morning_network import LAST_DAY, N_DAYS

README = (Path(__file__).parents[2] / "README.md").read_text("utf-8")
FILES = [(what, form) for what, forms in TABLES.items() for form in forms]


@pytest.mark.parametrize(("what", "form"), FILES)
def test_every_table_carries_network_and_cautions(reader, tmp_path: Path, what: str, form: str):
    response = reader.get(f"/download/{what}.{form}")
    assert response.status_code == 200
    assert response.headers["content-disposition"] == f'attachment; filename="rhovane-{what}.{form}"'
    path = tmp_path / f"{what}.{form}"
    path.write_bytes(response.content)
    if form == "parquet":
        about = duckdb.sql(f"select value from parquet_kv_metadata('{path}')").fetchall()
        said = " ".join(bytes(value).decode() for (value,) in about)
        assert len(duckdb.sql(f"from '{path}'").fetchall()) > 0
    else:
        said = response.text
    assert CAUTION in said
    assert "Two stations" in said


@pytest.mark.parametrize("what", ["readings", "windows", "alerts"])
def test_every_column_is_in_the_data_dictionary(reader, tmp_path: Path, what: str):
    path = tmp_path / "table.csv"
    path.write_bytes(reader.get(f"/download/{what}.csv").content)
    listed = README.partition("## Files for a notebook")[2].partition("```python")[0]
    part = listed.partition(f"| {what} |")[2]
    rows = [line for line in part.split("\n| ") if line]
    mine = [rows[0], *(row for row in rows[1:] if row.startswith("| `"))]
    named = set(re.findall(r"`(\w+)`", " ".join(mine)))
    assert set(pd.read_csv(path, comment="#").columns) <= named


def test_the_reading_example_of_the_readme_runs(reader, tmp_path: Path, monkeypatch, capsys):
    (tmp_path / "windows.csv").write_bytes(reader.get("/download/windows.csv").content)
    monkeypatch.chdir(tmp_path)
    code = README.partition("## Files for a notebook")[2].partition("```python")[2].partition("```")[0]
    names: dict[str, object] = {}
    exec(compile(code, "README.md", "exec"), names)
    assert names["at_lag_0"].shape == (N_DAYS, 2)
    assert "A.NO2~B.NO2" in capsys.readouterr().out


def test_reports_and_json_of_an_alert_can_be_taken_away(reader):
    night = reader.get(f"/report/night/{LAST_DAY}")
    assert night.headers["content-disposition"] == f'attachment; filename="night-{LAST_DAY}.html"'
    assert 'id="alert-1"' in night.text
    assert "handover sheet" in reader.get("/report/alert/1").text
    plain = json.loads(reader.get("/report/alert/1.json").text)
    assert plain["caution"] == CAUTION
    assert plain["alert"]["pair_key"] == "A.NO2~B.NO2"
    assert reader.get("/report/alert/9").status_code == 404
    assert reader.get("/report/night/2020-01-01").status_code == 404


def test_nothing_is_left_behind_after_a_download(reader, tmp_path: Path, monkeypatch):
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path))
    assert reader.get("/download/alerts.csv").status_code == 200
    assert list(tmp_path.iterdir()) == []
