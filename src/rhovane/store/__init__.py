"""The only place that knows DuckDB: readings, results, alert log and night ledger in one file."""

from rhovane.store.alert_log import NewAlert, NewAlertEvent, StoredAlert, StoredAlertEvent
from rhovane.store.copies import BackedUp, archives_in, back_up, copies_in, restore
from rhovane.store.liveness import EVENTS_KEPT, Liveness, Noticed, read_liveness, write_liveness
from rhovane.store.looking import Revision
from rhovane.store.manifest import read_manifest
from rhovane.store.nights import NightRecord
from rhovane.store.opening import open_store
from rhovane.store.outbox import Attempt, OutboxEntry
from rhovane.store.previewing import preview_files
from rhovane.store.reading import Origin, Readings, parquet_reader, read_parquet
from rhovane.store.results import EVIDENCE_COLUMNS, LATER_COLUMNS, WINDOW_COLUMNS
from rhovane.store.site_log import SITE_LOG_FILE, StoredSiteLogEntry
from rhovane.store.store import Store
from rhovane.store.tidying import Tidied, tidy
from rhovane.store.upkeep import Check

__all__ = [
    "EVENTS_KEPT",
    "EVIDENCE_COLUMNS",
    "LATER_COLUMNS",
    "SITE_LOG_FILE",
    "WINDOW_COLUMNS",
    "Attempt",
    "BackedUp",
    "Check",
    "Liveness",
    "NewAlert",
    "NewAlertEvent",
    "NightRecord",
    "Noticed",
    "Origin",
    "OutboxEntry",
    "Readings",
    "Revision",
    "Store",
    "StoredAlert",
    "StoredAlertEvent",
    "StoredSiteLogEntry",
    "Tidied",
    "archives_in",
    "back_up",
    "copies_in",
    "open_store",
    "parquet_reader",
    "preview_files",
    "read_liveness",
    "read_manifest",
    "read_parquet",
    "restore",
    "tidy",
    "write_liveness",
]
