"""Pictures and pages of results: SVG charts, shared page sections, and reports that need nothing but themselves."""

from rhovane.report.documents import alert_document, night_document
from rhovane.report.rendering import alert_sections, page_environment, pair_sections, series_sections

__all__ = [
    "alert_document",
    "alert_sections",
    "night_document",
    "page_environment",
    "pair_sections",
    "series_sections",
]
