"""The Ostrel Basin: an invented network with known changes, its feed and its settings file.

``world`` makes the readings, ``feed`` the files that deliver them, ``planted`` lists what is hidden in them.
Importing this package loads none of them.
"""

from __future__ import annotations

from pathlib import Path


def settings_text() -> str:
    """The annotated settings file of the demo network, TOML.

    An installed package carries it beside this module; in a checkout it is ``config/monitor.toml``.

    Raises
    ------
    FileNotFoundError
        Neither place has the file: the installation is incomplete.
    """
    here = Path(__file__).resolve().parent
    places = (here / "monitor.toml", here.parent.parent / "config" / "monitor.toml")
    for place in places:
        if place.is_file():
            return place.read_text(encoding="utf-8")
    raise FileNotFoundError(
        f"the demo settings are missing; looked for {places[0]} and {places[1]}. Reinstall rhovane."
    )
