"""Configuration: one TOML file → frozen, checked settings."""

from rhovane.settings.calendar import CalendarEntry
from rhovane.settings.data_quality import CheckSettings, DataNoteSettings
from rhovane.settings.load import load_settings, settings_from, settings_of_text
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
from rhovane.settings.site_log import load_site_log, site_log_entry
from rhovane.settings.unattended import DeliverySettings, HttpDelivery, MailDelivery, ServiceSettings

__all__ = [
    "AlertSettings",
    "CalendarEntry",
    "CheckSettings",
    "CorrelationSettings",
    "DataNoteSettings",
    "DeliverySettings",
    "HttpDelivery",
    "MailDelivery",
    "PairSettings",
    "SectorMask",
    "SeriesSettings",
    "ServiceSettings",
    "Settings",
    "SourceSettings",
    "hash_of",
    "load_settings",
    "load_site_log",
    "parse_offset",
    "settings_from",
    "settings_of_text",
    "site_log_entry",
]
