"""A new store with three series for each test."""

import shutil

import pytest

from rhovane.store import open_store
from store.building import SERIES


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
