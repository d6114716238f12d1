"""The only place that knows DuckDB: readings, results, alert log and night ledger in one file."""

from rhovane.store.alert_log import NewAlert, NewAlertEvent, StoredAlert, StoredAlertEvent
from rhovane.store.looking import Revision
from rhovane.store.nights import NightRecord
from rhovane.store.opening import open_store
from rhovane.store.reading import Readings, read_parquet
from rhovane.store.results import EVIDENCE_COLUMNS, LATER_COLUMNS, WINDOW_COLUMNS
from rhovane.store.site_log import StoredSiteLogEntry
from rhovane.store.store import Store

__all__ = [
    "EVIDENCE_COLUMNS",
    "LATER_COLUMNS",
    "WINDOW_COLUMNS",
    "NewAlert",
    "NewAlertEvent",
    "NightRecord",
    "Readings",
    "Revision",
    "Store",
    "StoredAlert",
    "StoredAlertEvent",
    "StoredSiteLogEntry",
    "open_store",
    "read_parquet",
]
