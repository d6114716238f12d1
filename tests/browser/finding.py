"""Where the browser is."""

from __future__ import annotations

import shutil

NEEDED = "RHOVANE_BROWSER_NEEDED"  # set it, and tests without a browser fail instead of staying away


def chromium() -> tuple[str, str] | None:
    """The places of chromium and its driver; None where one of them is not installed."""
    browser = shutil.which("chromium") or shutil.which("chromium-browser")
    driver = shutil.which("chromedriver")
    return (browser, driver) if browser and driver else None
