"""Forms as a browser sends them."""

from __future__ import annotations

import re

from httpx2 import Response
from starlette.testclient import TestClient

TOKEN = re.compile(r'name="form_token" value="([0-9a-f]+)"')


def form_token(client: TestClient, path: str) -> str:
    """The token of the form on a page."""
    found = TOKEN.search(client.get(path).text)
    assert found, path
    return found[1]


def record(client: TestClient, **fields: str) -> Response:
    """Send the form of alert 1."""
    token = form_token(client, "/alert/1")
    return client.post("/alert/1/record", data={"form_token": token, "who": "ana", "note": "", **fields})
