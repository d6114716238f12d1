"""The open store with everything it can be asked to keep or to show."""

from __future__ import annotations

from rhovane.store.copies import Copies
from rhovane.store.exports import Exports
from rhovane.store.ingesting import ReadingWriter
from rhovane.store.looking import Looking
from rhovane.store.nights import NightLedger
from rhovane.store.notes import NoteBook
from rhovane.store.outbox import Outbox
from rhovane.store.reading import ReadingReader
from rhovane.store.results import Results
from rhovane.store.segments import Segments
from rhovane.store.site_log import SiteLog
from rhovane.store.upkeep import Upkeep


class Store(
    ReadingWriter,
    ReadingReader,
    NightLedger,
    NoteBook,
    Results,
    Segments,
    Exports,
    SiteLog,
    Looking,
    Outbox,
    Copies,
    Upkeep,
):
    """An open store; made by :func:`rhovane.store.open_store`, used in a ``with`` block.

    Datetimes given without a zone are taken as UTC; datetimes returned say UTC. Spans of time are
    half-open: ``start <= t < end``. A store belongs to the thread that opened it.
    """
