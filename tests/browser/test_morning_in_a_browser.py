"""The morning walked in a real browser: read, decide, hand over; by mouse, by keyboard, without scripts, on a phone."""

from __future__ import annotations

import re
import shutil
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from click.testing import CliRunner
from selenium.webdriver.common.keys import Keys
from selenium.webdriver.support.ui import Select

from browser.chrome import Chrome
from rhovane.cli import main
from rhovane.review import alert_entry
from rhovane.settings import Settings, load_settings
from rhovane.store import open_store
from rhovane.web import PageServer
from web.morning_network import (
    LAST_DAY,
    MORNING,
    hold_store,
    large_network,
    network_of_a_failed_night,
    network_of_one_night,
    processes,
    reviewed_network,
    settings_in,
)

PATHS = (
    "", "alert/1", "pairs", "pair?key=A.NO2~B.NO2", "series", "one-series?key=A.NO2", "nights", "sitelog", "statistics",
    "downloads", f"night/{LAST_DAY}",
)  # fmt: skip


class Served:
    """The page of a network, served in a thread."""

    def __init__(self, settings: Settings, *, token: str | None = None) -> None:
        self.server = PageServer(settings, port=0, token=token, clock=lambda: MORNING, as_of=LAST_DAY)
        self.address = self.server.address
        self._thread = threading.Thread(target=self.server.run)

    def __enter__(self) -> str:
        self._thread.start()
        return self.address

    def __exit__(self, *_error: object) -> None:
        self.server.stop()
        self._thread.join(30)


@pytest.fixture(scope="module")
def downloads(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("downloads")


@pytest.fixture(scope="module")
def chrome(downloads: Path) -> Iterator[Chrome]:
    browser = Chrome(downloads)
    yield browser
    browser.quit()


@pytest.fixture(scope="module")
def kept(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("network")
    reviewed_network(folder)
    return folder


@pytest.fixture(scope="module")
def page(kept: Path) -> Iterator[str]:
    """Address of the page of a network with one alert, with the watch replayed."""
    with Served(load_settings(kept / "monitor.toml")) as address:
        yield address


@pytest.fixture
def own(kept: Path, tmp_path: Path) -> Settings:
    shutil.copytree(kept, tmp_path / "own")
    return load_settings(tmp_path / "own" / "monitor.toml")


def events_of(settings: Settings) -> list[tuple[str, str, str]]:
    with open_store(settings.store_path, read_only=True) as store:
        return [(e.kind.value, e.who, e.note) for e in alert_entry(store, 1, MORNING).events[1:]]


def decide(chrome: Chrome, decision: str, *, note: str, who: str | None) -> None:
    """Fill the form of an alert and send it."""
    find = chrome.driver.find_element
    find("css selector", f"input[value={decision}]").click()
    find("name", "note").send_keys(note)
    if who is not None:
        find("name", "who").send_keys(who)
    find("css selector", "form.record button").click()


def test_a_morning_from_the_list_to_the_handover(chrome: Chrome, own: Settings, downloads: Path):
    with Served(own) as address:
        chrome.open(address)
        said = chrome.text()
        assert "1 new alert" in said
        assert "complete" in said
        chrome.driver.find_element("partial link text", "Alert 1: A.NO2 and B.NO2").click()
        assert "How large, how sure" in chrome.text()
        chrome.driver.find_element("link text", "Decide and write a note").click()
        decide(chrome, "acknowledge", note="belt torn\nordered a new one", who="Ana Müller")
        assert "Recorded in the alert log" in chrome.text()
        find = chrome.driver.find_element
        assert find("name", "who").get_attribute("value") == "Ana Müller"
        Select(find("name", "outcome")).select_by_visible_text("instrument")
        decide(chrome, "outcome", note="replaced", who=None)
        assert "outcome: instrument" in chrome.text()
        chrome.driver.find_element("link text", "Handover sheet as one file").click()
        wanted = downloads / "alert-1.html"
        for _ in range(100):
            if wanted.exists():
                break
            time.sleep(0.1)
        assert "Ana Müller" in wanted.read_text("utf-8")
        chrome.open(address)
        assert "0 not yet reviewed" in chrome.text()
    assert events_of(own) == [
        ("acknowledged", "Ana Müller", "belt torn\r\nordered a new one"),
        ("outcome", "Ana Müller", "replaced"),
    ]


@pytest.mark.parametrize("width", [1280, 390])
@pytest.mark.parametrize("path", PATHS)
def test_pages_have_no_serious_fault_and_fit_their_window(chrome: Chrome, page: str, path: str, width: int):
    chrome.open(page + path, width)
    assert chrome.faults() == []
    assert chrome.complaints() == []
    assert chrome.driver.execute_script("return document.documentElement.scrollWidth") <= width
    small = chrome.driver.execute_script(
        "return [...document.querySelectorAll('.drawing svg')].filter(s => s.getBoundingClientRect().width > 0)"
        ".map(s => s.getBoundingClientRect().width / s.viewBox.baseVal.width).filter(r => r < 0.85)"
    )
    assert small == []  # letters of pictures stay at 10 px or more


def test_everything_can_be_reached_and_zoomed_by_keyboard(chrome: Chrome, page: str):
    chrome.open(page + "alert/1")
    chrome.driver.find_element("css selector", "body").send_keys(Keys.TAB)
    assert chrome.driver.switch_to.active_element.text == "To the content"
    button = chrome.driver.find_element("css selector", "button[aria-label^='Zoom: Rolling']")
    button.send_keys(Keys.ENTER)
    assert button.get_attribute("aria-expanded") == "true"
    chart = chrome.driver.switch_to.active_element
    assert "plus and minus zoom" in chart.get_attribute("aria-label")
    picture = "return document.querySelector('.zoomed canvas').toDataURL()"
    whole = chrome.driver.execute_script(picture)
    chart.send_keys("+")
    time.sleep(0.3)
    closer = chrome.driver.execute_script(picture)
    assert closer != whole
    chart.send_keys("0")
    time.sleep(0.3)
    assert chrome.driver.execute_script(picture) == whole
    assert chrome.faults() == []
    button.send_keys(Keys.ENTER)
    assert not chart.is_displayed()


def test_without_scripts_everything_but_zooming_works(own: Settings, tmp_path: Path):
    chrome = Chrome(tmp_path, scripts=False)
    try:
        with Served(own) as address:
            chrome.open(address + "alert/1")
            assert chrome.driver.find_elements("css selector", ".plain-button") == []
            assert chrome.driver.find_element("css selector", ".drawing .wide svg").is_displayed()
            decide(chrome, "note", note="seen without scripts", who="bo")
            assert "Recorded in the alert log" in chrome.text()
    finally:
        chrome.quit()
    assert events_of(own) == [("note", "bo", "seen without scripts")]


def test_pages_print_on_a4(chrome: Chrome, page: str):
    chrome.open(page + "alert/1")
    printed = chrome.pdf()
    assert printed.startswith(b"%PDF")
    sizes = {tuple(map(float, m.split())) for m in re.findall(rb"/MediaBox \[([\d. ]+)\]", printed)}
    ((_, _, wide, tall),) = sizes
    assert (round(wide), round(tall)) == (595, 842)
    assert 3 <= len(re.findall(rb"/Type /Page\b", printed)) <= 8


def test_a_report_opens_from_disk_without_a_network(chrome: Chrome, kept: Path, tmp_path: Path):
    out = tmp_path / "night.html"
    options = ["report", "--night", str(LAST_DAY), "--out", str(out), "--config", str(kept / "monitor.toml")]
    assert CliRunner().invoke(main, options).exit_code == 0
    for width in (1280, 390):
        chrome.open(out.as_uri(), width)
        assert "Alert 1: A.NO2 and B.NO2" in chrome.text()
        assert chrome.complaints() == []
        assert chrome.faults() == []
        assert chrome.driver.execute_script("return performance.getEntriesByType('resource').length") == 0
        assert chrome.driver.execute_script("return document.documentElement.scrollWidth") <= width
    assert chrome.pdf().startswith(b"%PDF")


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (settings_in, "Nothing is stored yet"),
        (network_of_one_night, "No data is not no change"),
        (network_of_a_failed_night, "the disk said <script>alert(1)</script>"),
        (lambda folder: large_network(folder, 3), "0 new alerts"),
    ],
    ids=["empty", "one night", "failed night", "500 pairs"],
)
def test_other_mornings_are_readable_too(chrome: Chrome, tmp_path: Path, make, words: str):
    with Served(make(tmp_path)) as address:
        for path in ("", "pairs", "nights"):
            chrome.open(address + path)
            if not path:
                assert words in chrome.text()
            assert chrome.faults() == []
            assert chrome.complaints() == []


def test_a_locked_store_is_told_with_its_holder(chrome: Chrome, own: Settings):
    held, release = processes.Event(), processes.Event()
    holder = processes.Process(target=hold_store, args=(own.store_path, held, release))
    with Served(own) as address:
        holder.start()
        try:
            assert held.wait(60)
            chrome.open(address)
            assert f"process {holder.pid}" in chrome.text()
            assert chrome.faults() == []
            chrome.complaints()  # the browser logs the status 503
        finally:
            release.set()
            holder.join(60)
        chrome.open(address)
        assert "1 new alert" in chrome.text()


def test_the_token_is_asked_for_once(chrome: Chrome, own: Settings):
    with Served(own, token="the token of the office") as address:
        chrome.open(address)
        assert chrome.faults() == []
        chrome.driver.find_element("name", "token").send_keys("the token of the office")
        chrome.driver.find_element("css selector", "button").click()
        assert "Morning list" in chrome.text()
        assert "the token of the office" not in chrome.driver.current_url + chrome.driver.page_source
