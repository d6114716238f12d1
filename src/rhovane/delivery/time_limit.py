"""A time limit for a whole exchange with a receiver: socket timeouts bound each wait, not their sum."""

from __future__ import annotations

import contextlib
import socket
import threading
from collections.abc import Callable, Iterator


@contextlib.contextmanager
def hang_up_after(
    seconds: float, current: Callable[[], socket.socket | None]
) -> Iterator[Callable[[], bool]]:
    """Shut the current socket down when the time is over; the value says whether that happened."""
    over = threading.Event()

    def hang_up() -> None:
        over.set()
        used = current()
        if used is not None:
            with contextlib.suppress(OSError):  # it may be down already
                used.shutdown(socket.SHUT_RDWR)

    timer = threading.Timer(seconds, hang_up)
    timer.daemon = True
    timer.start()
    try:
        yield over.is_set
    finally:
        timer.cancel()
