"""The one place that connects to the store's file."""

from __future__ import annotations

import time
from pathlib import Path

import duckdb

from rhovane.model import NotFound, RhovaneError, StoreDamaged, StoreLocked
from rhovane.store.holder import holder_of
from rhovane.store.manifest import manifest_path, read_manifest
from rhovane.store.migrations import migrate
from rhovane.store.session import failure
from rhovane.store.store import Store

RETRY_S = 0.02  # seconds between two attempts; other commands hold the file for about 0.1 s (measured)
CHECKPOINT_THRESHOLD = "16MB"  # size of the write-ahead log at which DuckDB folds it into the file by itself


def open_store(
    path: Path,
    *,
    lock_wait_s: float = 10.0,
    memory_limit_mb: int = 1024,
    threads: int = 2,
    read_only: bool = False,
) -> Store:
    """Open the store, creating it if it is opened for writing and does not exist; use it in a ``with`` block.

    Parameters
    ----------
    path : the DuckDB file; the manifest and the folder for spilled data are beside it
    lock_wait_s : seconds to wait while another process holds the file, 0 or more
    memory_limit_mb : MB that DuckDB may take
    threads : threads that DuckDB may use

    Raises
    ------
    NotFound
        Opened for reading only, and there is no such file.
    StoreLocked
        Another process held the file for all of ``lock_wait_s``.
    StoreDamaged
        The file is no store, is damaged, has lost something, or was written by a newer program.
    """
    _require_file(path, read_only=read_only)
    connection = _connect(
        path,
        time.monotonic() + lock_wait_s,
        lock_wait_s,
        read_only=read_only,
        config={
            "memory_limit": f"{memory_limit_mb}MB",
            "threads": threads,
            "temp_directory": str(path.with_name(path.name + ".tmp")),
            "checkpoint_threshold": CHECKPOINT_THRESHOLD,
            "autoinstall_known_extensions": "false",
        },
    )
    store = Store(connection, path, read_only=read_only)
    try:
        try:
            migrate(connection, str(path), read_only=read_only)
        except duckdb.Error as error:
            raise failure(error, path) from error
        store.compare_with_manifest()
    except BaseException:
        store.close()
        raise
    return store


def _require_file(path: Path, *, read_only: bool) -> None:
    if path.exists():
        return
    expected = read_manifest(path)
    if expected is not None and expected.ingest_rows:
        raise StoreDamaged(
            f"{path} is missing, but {manifest_path(path)} says that it held {expected.ingest_rows} ingests. Put "
            "a backup in its place (`rhovane restore`), or delete the manifest to begin with an empty store."
        )
    if read_only:
        raise NotFound(
            f"There is no store at {path}. Run `rhovane ingest` to create it, or name the right place with "
            "network.work_folder and store.file in the settings."
        )
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise RhovaneError(
            f"{path.parent} cannot be created ({error.strerror}); name a folder that can be written to."
        ) from error


def _connect(
    path: Path, until: float, lock_wait_s: float, *, read_only: bool, config: dict[str, object]
) -> duckdb.DuckDBPyConnection:
    while True:
        try:
            return duckdb.connect(str(path), read_only=read_only, config=config)
        except (duckdb.IOException, duckdb.ConnectionException) as error:
            holder = holder_of(str(error))
            if holder is None:
                raise failure(error, path) from error
            if time.monotonic() >= until:
                raise StoreLocked(
                    f"{path} is in use by {holder}; waited {lock_wait_s:g} s. Nothing was changed. Wait for it to "
                    "end and run again, or raise store.lock_wait_s. A process that hangs may be ended (`kill` with its "
                    "number): the store keeps all that was committed."
                ) from error
        except duckdb.Error as error:
            raise failure(error, path) from error
        time.sleep(RETRY_S)
