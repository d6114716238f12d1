"""Whether the tests in a real browser can run here."""

from __future__ import annotations

import os

import pytest

from browser.finding import NEEDED, chromium


def pytest_configure() -> None:
    """Where a browser is demanded, its absence is a failure."""
    if os.environ.get(NEEDED) and chromium() is None:
        raise pytest.UsageError(f"{NEEDED} is set, but chromium and chromedriver are not installed.")


def pytest_report_header() -> str:
    """Say at the top whether the tests in a browser run."""
    found = chromium()
    if found is None:
        return "browser: no chromium with chromedriver here; tests/browser is not collected"
    return f"browser: {found[0]}"
