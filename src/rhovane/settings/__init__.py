"""Configuration: one TOML file → frozen, checked settings."""

from rhovane.settings.load import load_settings, settings_from
from rhovane.settings.schema import (
    AlertSettings,
    CorrelationSettings,
    PairSettings,
    SectorMask,
    SeriesSettings,
    Settings,
    SourceSettings,
    hash_of,
    parse_offset,
)

__all__ = [
    "AlertSettings",
    "CorrelationSettings",
    "PairSettings",
    "SectorMask",
    "SeriesSettings",
    "Settings",
    "SourceSettings",
    "hash_of",
    "load_settings",
    "parse_offset",
    "settings_from",
]
