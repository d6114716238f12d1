"""The page of a small network with one alert, asked without a browser."""

from __future__ import annotations

import datetime as dt
import shutil
from collections.abc import Callable
from pathlib import Path

import pytest
from starlette.testclient import TestClient

from rhovane.settings import Settings, load_settings
from rhovane.web import make_app
from web.morning_network import LAST_DAY, MORNING, reviewed_network


class Clock:
    """A clock that stands still until it is set."""

    def __init__(self) -> None:
        self.now = MORNING

    def __call__(self) -> dt.datetime:
        return self.now


@pytest.fixture
def clock() -> Clock:
    return Clock()


@pytest.fixture(scope="session")
def kept(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The network of the tests, to be looked at only."""
    folder = tmp_path_factory.mktemp("reviewed")
    reviewed_network(folder)
    return folder


@pytest.fixture
def settings(kept: Path) -> Settings:
    """Settings of the network that is looked at only."""
    return load_settings(kept / "monitor.toml")


@pytest.fixture(scope="session")
def reader(kept: Path) -> TestClient:
    """A client for the page of the network that is looked at only; one for all tests, because templates are compiled once."""
    network = load_settings(kept / "monitor.toml")
    app = make_app(network, token=None, clock=lambda: MORNING, as_of=LAST_DAY, replay_wait_s=60.0)
    return TestClient(app, base_url="http://127.0.0.1", follow_redirects=False)


@pytest.fixture
def own(kept: Path, tmp_path: Path) -> Settings:
    """Settings of a copy of the network that a test may write to."""
    shutil.copytree(kept, tmp_path / "own")
    return load_settings(tmp_path / "own" / "monitor.toml")


@pytest.fixture
def browse(clock: Clock) -> Callable[..., TestClient]:
    """A client for the page of a network."""

    def client(of: Settings, token: str | None = None) -> TestClient:
        app = make_app(of, token=token, clock=clock, as_of=LAST_DAY, replay_wait_s=60.0)
        return TestClient(app, base_url="http://127.0.0.1", follow_redirects=False)

    return client
