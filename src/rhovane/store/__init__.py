"""The only place that knows DuckDB: readings, results, alert log and night ledger in one file."""

from rhovane.store.alert_log import NewAlert, NewAlertEvent, StoredAlert, StoredAlertEvent
from rhovane.store.liveness import EVENTS_KEPT, Liveness, Noticed, read_liveness, write_liveness
from rhovane.store.nights import NightRecord
from rhovane.store.opening import open_store
from rhovane.store.outbox import Attempt, OutboxEntry
from rhovane.store.reading import Readings, read_parquet
from rhovane.store.results import EVIDENCE_COLUMNS, LATER_COLUMNS, WINDOW_COLUMNS
from rhovane.store.store import Store

__all__ = [
    "EVENTS_KEPT",
    "EVIDENCE_COLUMNS",
    "LATER_COLUMNS",
    "WINDOW_COLUMNS",
    "Attempt",
    "Liveness",
    "NewAlert",
    "NewAlertEvent",
    "NightRecord",
    "Noticed",
    "OutboxEntry",
    "Readings",
    "Store",
    "StoredAlert",
    "StoredAlertEvent",
    "open_store",
    "read_liveness",
    "read_parquet",
    "write_liveness",
]
