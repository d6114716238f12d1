"""Settings of a source that would make every file of it unreadable are refused before the night."""

import pytest
from pydantic import ValidationError

from ingest.small_network import long_source, wide_source


@pytest.mark.parametrize(
    "time_format", ["%Y-%m-%d", "%H:%M", "%d.%m. %H:%M", "%Y-%m-%d %I:%M", "%Q", "", "%Y-%m-%d %H:%M %"]
)
def test_time_formats_that_name_no_whole_hour_are_refused(time_format):
    with pytest.raises(ValidationError, match="year, month, day and hour"):
        long_source(time_format=time_format)


@pytest.mark.parametrize(
    "time_format", ["%Y-%m-%d %H", "%y%m%d%H", "%d %b %Y %I %p", "%Y-%m-%dT%H:%M:%S%z", "%Y-%jT%H:%MZ"]
)
def test_time_formats_that_name_a_whole_hour_are_accepted(time_format):
    assert long_source(time_format=time_format).time_format == time_format


@pytest.mark.parametrize("column", ["station", "quantity", "value", "unit"])
def test_columns_that_a_wide_form_would_ignore_are_refused(column):
    with pytest.raises(ValidationError, match=f"columns.{column} is for long forms"):
        wide_source(columns={column: "x"})
