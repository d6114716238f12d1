"""Messages to an HTTP receiver: POST, one CloudEvent a request, in structured mode."""

from __future__ import annotations

import http.client
import ssl
from pathlib import Path
from urllib.parse import urlsplit

from rhovane.delivery.cloudevents import CONTENT_TYPE, cloudevent_text
from rhovane.delivery.failure import Undelivered
from rhovane.delivery.secret import read_secret
from rhovane.delivery.time_limit import hang_up_after
from rhovane.model import Message
from rhovane.settings import HttpDelivery

REFUSED_FOR_ITSELF = (400, 413, 415, 422)  # the receiver objects to this message, not to all of them


def post(settings: HttpDelivery, folder: Path, message: Message, source: str, timeout_s: float) -> None:
    """Post a message; any answer from 200 to 299 means that it was accepted. Redirects are not followed.

    The time limit holds for the whole exchange, however slowly the receiver talks.

    Raises
    ------
    Undelivered
        The receiver could not be reached, took too long, or answered otherwise.
    """
    secret = read_secret(settings.token_env, settings.token_file, folder)
    parts = urlsplit(settings.url)
    shown = f"{parts.scheme}://{parts.hostname}" + (f":{parts.port}" if parts.port else "")
    headers = {"Content-Type": CONTENT_TYPE, "User-Agent": "rhovane"}
    if secret.reveal():
        headers["Authorization"] = f"Bearer {secret.reveal()}"
    path = (parts.path or "/") + (f"?{parts.query}" if parts.query else "")
    connection = _connection(settings, folder, timeout_s)
    try:
        with hang_up_after(timeout_s, lambda: connection.sock) as over:
            connection.request("POST", path, cloudevent_text(message, source).encode(), headers)
            status = connection.getresponse().status
    except (OSError, http.client.HTTPException, ValueError) as error:
        late = isinstance(error, TimeoutError) or over()
        why = (
            f"no answer within {timeout_s:g} s"
            if late
            else secret.hide_in(str(error)) or type(error).__name__
        )
        raise Undelivered(f"{shown}: {why}") from None
    finally:
        connection.close()
    if not 200 <= status < 300:
        raise Undelivered(f"{shown} answered {status}", others_may_go=status in REFUSED_FOR_ITSELF)


def _connection(settings: HttpDelivery, folder: Path, timeout_s: float) -> http.client.HTTPConnection:
    parts = urlsplit(settings.url)
    assert parts.hostname is not None
    if parts.scheme == "http":
        return http.client.HTTPConnection(parts.hostname, parts.port, timeout=timeout_s)
    return http.client.HTTPSConnection(
        parts.hostname, parts.port, timeout=timeout_s, context=trusted(settings.ca_file, folder)
    )


def trusted(ca_file: str, folder: Path) -> ssl.SSLContext:
    """Encryption that checks the receiver's certificate, with further certificates to trust if named.

    Raises
    ------
    Undelivered
        The certificates cannot be read.
    """
    context = ssl.create_default_context()
    if ca_file:
        try:
            context.load_verify_locations(folder / ca_file)
        except (OSError, ssl.SSLError) as error:
            raise Undelivered(f"{folder / ca_file} cannot be used as certificates ({error})") from error
    return context
