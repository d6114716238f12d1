"""Configuration: one TOML file → frozen, checked settings."""

from rhovane.settings.calendar import CalendarEntry
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
from rhovane.settings.site_log import load_site_log, site_log_entry

__all__ = [
    "AlertSettings",
    "CalendarEntry",
    "CorrelationSettings",
    "PairSettings",
    "SectorMask",
    "SeriesSettings",
    "Settings",
    "SourceSettings",
    "load_settings",
    "load_site_log",
    "parse_offset",
    "settings_from",
    "site_log_entry",
]
