"""Passwords and tokens: read when they are needed, from the environment or a private file, and never shown."""

from __future__ import annotations

import os
import stat
from pathlib import Path

from rhovane.delivery.failure import Undelivered

OTHERS = stat.S_IRWXG | stat.S_IRWXO


class Secret:
    """A text that does not show itself."""

    def __init__(self, text: str) -> None:
        self._text = text

    def reveal(self) -> str:
        """The text itself, for the one place that sends it."""
        return self._text

    def hide_in(self, text: str) -> str:
        """A text without the secret, should a receiver have sent it back."""
        return text.replace(self._text, "•••") if self._text else text

    def __repr__(self) -> str:
        return "Secret(•••)"

    __str__ = __repr__


NOTHING = Secret("")


def read_secret(env: str, file: str, folder: Path) -> Secret:
    """The secret in an environment variable or a file (relative to ``folder``); an empty one when neither is named.

    Raises
    ------
    Undelivered
        The variable is not set, or the file cannot be read, is empty, or can be read by others.
    """
    if env:
        text = os.environ.get(env, "")
        if not text:
            raise Undelivered(f"the environment variable {env} is not set; set it for the service")
        return Secret(text)
    if not file:
        return NOTHING
    path = folder / file
    try:
        with path.open(encoding="utf-8") as stream:
            mode = stat.S_IMODE(os.fstat(stream.fileno()).st_mode)
            if mode & OTHERS:
                raise Undelivered(f"{path} can be read by others (mode {mode:04o}); run: chmod 600 {path}")
            text = stream.read().strip()
    except (OSError, UnicodeDecodeError) as error:
        why = error.strerror if isinstance(error, OSError) else "not UTF-8"
        raise Undelivered(f"{path} cannot be read ({why})") from error
    if not text:
        raise Undelivered(f"{path} is empty; write the secret into it")
    return Secret(text)
