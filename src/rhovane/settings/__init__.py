"""Configuration: one TOML file → frozen, checked settings."""

from rhovane.settings.data_quality import CheckSettings, DataNoteSettings
from rhovane.settings.load import load_settings, settings_from
from rhovane.settings.schema import (
    AlertSettings,
    CorrelationSettings,
    PairSettings,
    SectorMask,
    SeriesSettings,
    Settings,
    SourceSettings,
    parse_offset,
)

__all__ = [
    "AlertSettings",
    "CheckSettings",
    "CorrelationSettings",
    "DataNoteSettings",
    "PairSettings",
    "SectorMask",
    "SeriesSettings",
    "Settings",
    "SourceSettings",
    "load_settings",
    "parse_offset",
    "settings_from",
]
