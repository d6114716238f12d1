"""A real browser, and pages served to it; without a browser this folder is not collected."""

from __future__ import annotations

from browser.finding import chromium

if chromium() is None:
    collect_ignore_glob = ["test_*.py"]
