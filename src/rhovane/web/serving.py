"""The page served on an address of this machine."""

from __future__ import annotations

import datetime as dt
import ipaddress
import socket
from collections.abc import Callable

import uvicorn

from rhovane.model import RhovaneError
from rhovane.settings import Settings
from rhovane.web.app import LOOPBACK_NAMES, make_app

SHORTEST_TOKEN = 16  # characters
CONNECTIONS = 64


class PageServer:
    """Serves the page until it is stopped; :meth:`run` blocks and may run in a thread of its own.

    Raises
    ------
    RhovaneError
        The address is not a loopback address and there is no token, the token is short, or the port is taken.
    """

    def __init__(
        self,
        settings: Settings,
        *,
        host: str = "127.0.0.1",
        port: int = 8321,
        token: str | None,
        clock: Callable[[], dt.datetime],
        names: tuple[str, ...] = (),
        as_of: dt.date | None = None,
    ) -> None:
        if not is_loopback(host) and token is None:
            raise RhovaneError(
                f"{host} can be reached from other machines, so the page needs a token: put one of at least "
                f"{SHORTEST_TOKEN} characters into a file and give --token-file FILE. Nothing was started."
            )
        if token is not None and len(token) < SHORTEST_TOKEN:
            raise RhovaneError(
                f"The token has {len(token)} characters; use {SHORTEST_TOKEN} or more. Nothing was started."
            )
        self._socket = _listening(host, port)
        self.port: int = self._socket.getsockname()[1]
        shown = f"[{host}]" if ":" in host else host
        self.address = f"http://{shown}:{self.port}/"
        known = (*names, shown, *(LOOPBACK_NAMES if is_loopback(host) else ()))
        hosts = frozenset(f"{name.lower()}:{self.port}" for name in known)
        app = make_app(settings, token=token, clock=clock, hosts=hosts, as_of=as_of)
        config = uvicorn.Config(
            app,
            access_log=False,
            log_level="warning",
            server_header=False,
            limit_concurrency=CONNECTIONS,
            timeout_keep_alive=15,
            proxy_headers=False,
        )
        self._server = uvicorn.Server(config)

    def run(self) -> None:
        """Serve until :meth:`stop`, or until the process is told to end."""
        self._server.run(sockets=[self._socket])

    def stop(self) -> None:
        """End :meth:`run` after the requests under way; may be called from another thread."""
        self._server.should_exit = True

    def close(self) -> None:
        """Give the port back; for a server that was never run."""
        self._socket.close()


def is_loopback(host: str) -> bool:
    """Whether an address can be reached from this machine only."""
    if host == "localhost":
        return True
    try:
        return ipaddress.ip_address(host).is_loopback
    except ValueError:
        return False


def _listening(host: str, port: int) -> socket.socket:
    family = socket.AF_INET6 if ":" in host else socket.AF_INET
    listening = socket.socket(family, socket.SOCK_STREAM)
    listening.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
    try:
        listening.bind((host, port))
        listening.listen(CONNECTIONS)
    except OSError as error:
        listening.close()
        raise RhovaneError(
            f"{host}:{port} cannot be used ({error.strerror}); choose another with --port. Nothing was started."
        ) from error
    return listening
