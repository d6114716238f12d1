"""A small invented network, and what its feed files look like."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import duckdb

from rhovane.model import ParsedFile
from rhovane.settings import SeriesSettings, SourceSettings

WRITTEN = 1_735_689_600  # 2025-01-01 00:00 UTC: when every feed file of these tests was written

LONG = {
    "name": "lab",
    "form": "long csv",
    "files": "feed/*.csv",
    "clock": "UTC",
    "label": "start",
    "columns": {"time": "time", "station": "station", "quantity": "quantity", "value": "value"},
    "series": {"KEL NO2": "KEL.NO2", "KEL O3": "KEL.O3", "TIV NO2": "TIV.NO2"},
}
WIDE = {
    **LONG,
    "form": "wide csv",
    "columns": {"time": "time"},
    "series": {"no2": "KEL.NO2", "o3": "KEL.O3", "temp": "KEL.temperature"},
}
NETWORK = {
    key: SeriesSettings(key=key, unit=unit)
    for key, unit in {
        "KEL.NO2": "ug/m3",
        "KEL.O3": "ug/m3",
        "TIV.NO2": "ug/m3",
        "KEL.CO": "mg/m3",
        "KEL.temperature": "degC",
        "KEL.wind": "m/s",
        "KEL.traffic": "1/h",
    }.items()
}


def long_source(**changes: Any) -> SourceSettings:
    """A long source; columns given are added to the usual ones."""
    columns = {**LONG["columns"], **changes.pop("columns", {})}
    return SourceSettings.model_validate({**LONG, **changes, "columns": columns})


def wide_source(**changes: Any) -> SourceSettings:
    """A wide source; columns given are added to the usual ones."""
    columns = {**WIDE["columns"], **changes.pop("columns", {})}
    return SourceSettings.model_validate({**WIDE, **changes, "columns": columns})


def read_parquet(path: Path) -> dict[str, Any]:
    """Columns of a Parquet file, as the store's reader gives them."""
    with duckdb.connect() as connection:
        return connection.execute("select * from read_parquet(?)", [str(path)]).fetchnumpy()


def places(parsed: ParsedFile) -> list[tuple[int, str, str]]:
    """Line, column and raw text of everything rejected."""
    return [(row.line, row.column, row.raw) for row in parsed.rejected]


def only_reason(parsed: ParsedFile) -> str:
    """The reason of the single rejected entry."""
    (row,) = parsed.rejected
    return row.reason
