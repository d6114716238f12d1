"""Configuration: one TOML file → frozen, checked settings."""

from rhovane.settings.load import load_settings, settings_from
from rhovane.settings.schema import (
    AlertSettings,
    CorrelationSettings,
    PairSettings,
    SectorMask,
    SeriesSettings,
    Settings,
)
from rhovane.settings.source_schema import ColumnSettings, SourceSettings, parse_offset

__all__ = [
    "AlertSettings",
    "ColumnSettings",
    "CorrelationSettings",
    "PairSettings",
    "SectorMask",
    "SeriesSettings",
    "Settings",
    "SourceSettings",
    "load_settings",
    "parse_offset",
    "settings_from",
]
