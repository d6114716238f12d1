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
    parse_offset,
)
from rhovane.settings.unattended import DeliverySettings, HttpDelivery, MailDelivery, ServiceSettings

__all__ = [
    "AlertSettings",
    "CorrelationSettings",
    "DeliverySettings",
    "HttpDelivery",
    "MailDelivery",
    "PairSettings",
    "SectorMask",
    "SeriesSettings",
    "ServiceSettings",
    "Settings",
    "SourceSettings",
    "load_settings",
    "parse_offset",
    "settings_from",
]
