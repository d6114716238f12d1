"""Chromium without a window, driven over WebDriver, with what the tests ask of it."""

from __future__ import annotations

import base64
from pathlib import Path
from typing import Any

from selenium import webdriver
from selenium.webdriver.chrome.options import Options
from selenium.webdriver.chrome.service import Service

from browser.finding import chromium

AXE = (Path(__file__).parent / "axe.min.js").read_text("utf-8")
RULES = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]


class Chrome:
    """A browser of a given width."""

    def __init__(self, downloads: Path, *, scripts: bool = True) -> None:
        found = chromium()
        assert found is not None, "these tests are collected only where there is a browser"
        options = Options()
        options.binary_location = found[0]
        for argument in (
            "--headless=new", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage", "--hide-scrollbars",
            "--window-size=1280,1000",
        ):  # fmt: skip
            options.add_argument(argument)
        options.add_experimental_option("prefs", {"download.default_directory": str(downloads)})
        if not scripts:
            options.add_experimental_option(
                "prefs", {"profile.managed_default_content_settings.javascript": 2}
            )
        options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
        self.driver = webdriver.Chrome(options=options, service=Service(found[1]))
        self.driver.set_page_load_timeout(60)

    def open(self, address: str, width: int = 1280) -> None:
        """Open an address in a window of this width."""
        metrics = {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": False}
        self.driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", metrics)
        self.driver.get(address)

    def text(self) -> str:
        """What can be read on the page."""
        return str(self.driver.find_element("css selector", "body").text)

    def complaints(self) -> list[str]:
        """What the browser logged since it was last asked: blocked scripts, failed requests, errors."""
        return [str(entry["message"]) for entry in self.driver.get_log("browser")]

    def faults(self) -> list[str]:
        """What axe finds serious or critical on the page, with the places."""
        self.driver.execute_script(AXE)
        found: dict[str, Any] = self.driver.execute_async_script(
            "const done = arguments[arguments.length - 1];"
            "axe.run(document, {runOnly: arguments[0], resultTypes: ['violations']}).then(done);",
            RULES,
        )
        assert found["passes"], "axe looked at something"
        return [
            f"{fault['impact']} {fault['id']}: {[node['target'] for node in fault['nodes'][:3]]}"
            for fault in found["violations"]
            if fault["impact"] in ("serious", "critical")
        ]

    def pdf(self) -> bytes:
        """The page as it prints."""
        printed = self.driver.execute_cdp_cmd(
            "Page.printToPDF", {"printBackground": True, "preferCSSPageSize": True}
        )
        return base64.b64decode(printed["data"])

    def quit(self) -> None:
        """Close the browser."""
        self.driver.quit()
