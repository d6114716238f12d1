"""A new store with three series for each test."""

import shutil

import numpy as np
import pytest

from rhovane.model import RejectedRow
from rhovane.store import NewAlert, NewAlertEvent, open_store
from store.building import NOW, SERIES, parsed_file, random_files


@pytest.fixture(scope="session")
def new_store(tmp_path_factory):
    """A closed store that knows the invented series, to be copied: quicker than making one each time."""
    path = tmp_path_factory.mktemp("store") / "new.duckdb"
    with open_store(path) as opened:
        opened.ensure_series(SERIES)
    return path


@pytest.fixture
def path(tmp_path):
    """Where the store of a test is."""
    return tmp_path / "watch.duckdb"


@pytest.fixture
def store(path, new_store):
    """A new store that knows the invented series."""
    shutil.copyfile(new_store, path)
    with open_store(path) as opened:
        yield opened


@pytest.fixture
def used(store):
    """A store with readings, revisions, rejected rows and an alert."""
    store.append_files(random_files(np.random.default_rng(3), 8), now=NOW)
    store.append_files([parsed_file([], rejected=[RejectedRow(0, "", "", "empty")])], now=NOW)
    store.begin_night(kind="nightly", as_of=NOW.date(), now=NOW, settings_hash="", program_version="0")
    store.append_alerts([NewAlert("a~b", NOW.date(), 1)])
    store.append_alert_events([NewAlertEvent(1, NOW, "raised")])
    return store
