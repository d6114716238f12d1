"""The Ostrel Basin: an invented network with known changes, its feed and its settings file.

``world`` makes the readings, ``feed`` the files that deliver them, ``planted`` lists what is hidden in them.
Importing this package loads none of them.
"""

from __future__ import annotations

from pathlib import Path

SETTINGS_FILES = ("monitor.toml", "calendar.toml", "site_log.csv")


def settings_text(name: str = "monitor.toml") -> str:
    """One of the demo network's settings files (``SETTINGS_FILES``), annotated; by default the settings themselves.

    An installed package carries them beside this module; in a checkout they are in ``config/``.

    Raises
    ------
    FileNotFoundError
        Neither place has the file: the installation is incomplete.
    """
    here = Path(__file__).resolve().parent
    places = (here / name, here.parent.parent / "config" / name)
    for place in places:
        if place.is_file():
            return place.read_text(encoding="utf-8")
    raise FileNotFoundError(
        f"the demo settings are missing; looked for {places[0]} and {places[1]}. Reinstall rhovane."
    )
