"""What every request passes before it reaches a page: host, rate, size, token, form token; and headers on the way out.

The page may be opened by any program of this machine, and a foreign web site may make a browser send requests
to it. So the Host header must name this page (against rebinding of names), a form must carry a token that only
our own pages hold, and nothing of ours may be framed or run a script that is not a file of ours.
"""

from __future__ import annotations

import datetime as dt
import hashlib
import hmac
import secrets
from collections import deque
from collections.abc import Callable
from http.cookies import CookieError, SimpleCookie
from urllib.parse import parse_qsl

from starlette.datastructures import Headers, MutableHeaders
from starlette.responses import PlainTextResponse, RedirectResponse, Response
from starlette.types import ASGIApp, Message, Receive, Scope, Send

MAX_BODY_BYTES = 64 * 1024  # a long note is a few thousand
MAX_FIELDS = 40
WRITES_A_MINUTE = 30  # a person decides on a handful of alerts a minute
READS_A_MINUTE = 900
TOKENS_A_MINUTE = 6
ENTRY_HOURS = 12  # a working day
FORM_COOKIE, ENTRY_COOKIE = "rhovane_form", "rhovane_entry"
OPEN_PATHS = ("/enter", "/static/")
POLICY = (
    "default-src 'none'; style-src 'self'; script-src 'self'; img-src 'self' data:; connect-src 'none'; "
    "form-action 'self'; frame-ancestors 'none'; base-uri 'none'"
)
HEADERS = {
    "content-security-policy": POLICY,
    "x-content-type-options": "nosniff",
    "x-frame-options": "DENY",
    "referrer-policy": "same-origin",
    "cross-origin-opener-policy": "same-origin",
    "cross-origin-resource-policy": "same-origin",
    "permissions-policy": "camera=(), geolocation=(), microphone=()",
}


class Guard:
    """ASGI middleware around all pages; ``hosts`` are the values of the Host header that name this page."""

    def __init__(
        self,
        app: ASGIApp,
        *,
        hosts: frozenset[str],
        token: str | None,
        clock: Callable[[], dt.datetime],
    ) -> None:
        self.app = app
        self.hosts = hosts
        self._token = None if token is None else hashlib.sha256(token.encode()).digest()
        self._clock = clock
        self._secret = secrets.token_bytes(32)
        self._seen: dict[tuple[str, str], deque[dt.datetime]] = {}

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Let a request through to the pages, or answer it here."""
        if scope["type"] == "lifespan":
            await self.app(scope, receive, send)
            return
        if scope["type"] != "http":
            return
        headers = Headers(scope=scope)
        cookies = _cookies(headers.get("cookie", ""))
        form_cookie = cookies.get(FORM_COOKIE, "")
        fresh = not form_cookie.isalnum() or len(form_cookie) != 64
        if fresh:
            form_cookie = secrets.token_hex(32)
        state = scope.setdefault("state", {})
        state["form_token"] = self._sign("form", form_cookie)
        state["cookies"] = cookies

        async def answer(message: Message) -> None:
            if message["type"] == "http.response.start":
                out = MutableHeaders(scope=message)
                for name, value in HEADERS.items():
                    out[name] = value
                if "cache-control" not in out:
                    out["cache-control"] = "no-store"
                if fresh and not scope["path"].startswith("/static/"):
                    out.append("set-cookie", cookie(FORM_COOKIE, form_cookie))
            await send(message)

        refused = self._refusal(scope, headers, cookies)
        if refused is None and scope["method"] == "POST":
            body = await _body(receive)
            refused = self._form_refusal(headers, body, state)
            if refused is None and scope["path"] == "/enter":
                refused = self._entered(state["form"])
        if refused is not None:
            await refused(scope, receive, answer)
            return
        await self.app(scope, receive, answer)

    def _refusal(self, scope: Scope, headers: Headers, cookies: dict[str, str]) -> Response | None:
        """Why a request is answered here, from its head alone; None when it may go on."""
        if headers.get("host", "").lower() not in self.hosts:
            return _words(
                400, "This address does not name the page. Open it by the address that was printed."
            )
        if scope["method"] not in ("GET", "HEAD", "POST"):
            return _words(405, "Only GET, HEAD and POST are answered here.")
        kind, most = ("write", WRITES_A_MINUTE) if scope["method"] == "POST" else ("read", READS_A_MINUTE)
        if scope["path"] == "/enter" and scope["method"] == "POST":
            kind, most = "token", TOKENS_A_MINUTE
        if self._too_many(str((scope.get("client") or ("?",))[0]), kind, most):
            return _words(429, "Too many requests in a minute. Wait a minute and try again.")
        length = headers.get("content-length", "0")
        if not length.isdigit() or int(length) > MAX_BODY_BYTES:
            return _words(413, f"At most {MAX_BODY_BYTES // 1024} KB can be sent. Shorten the note.")
        if self._token is None or scope["path"].startswith(OPEN_PATHS):
            return None
        bearer = headers.get("authorization", "")
        if bearer.startswith("Bearer ") and self._is_token(bearer[7:]):
            return None
        if self._has_entered(cookies.get(ENTRY_COOKIE, "")):
            return None
        if scope["method"] == "GET":
            return RedirectResponse("/enter", 303)
        return _words(403, "Enter the token first: open /enter.")

    def _form_refusal(
        self, headers: Headers, body: bytes | None, state: dict[str, object]
    ) -> Response | None:
        """Why a form is not taken; otherwise its fields are put into ``state``."""
        if body is None:
            return _words(413, f"At most {MAX_BODY_BYTES // 1024} KB can be sent. Shorten the note.")
        origin = headers.get("origin")
        host = headers.get("host", "").lower()
        if origin is not None and origin.lower() not in (f"http://{host}", f"https://{host}"):
            return _words(403, "The form was sent from another site. Nothing was written.")
        if headers.get("sec-fetch-site", "same-origin") not in ("same-origin", "none"):
            return _words(403, "The form was sent from another site. Nothing was written.")
        if headers.get("content-type", "").partition(";")[0].strip() != "application/x-www-form-urlencoded":
            return _words(415, "Only forms of this page are taken.")
        try:
            pairs = parse_qsl(body.decode("utf-8"), keep_blank_values=True, max_num_fields=MAX_FIELDS)
        except (UnicodeDecodeError, ValueError):
            return _words(400, "The form cannot be read. Nothing was written.")
        form = dict(pairs)
        if not hmac.compare_digest(form.get("form_token", "").encode(), str(state["form_token"]).encode()):
            return _words(403, "The form is too old or not ours. Open the page again. Nothing was written.")
        state["form"] = form
        return None

    def _entered(self, form: object) -> Response:
        """The answer to a token that was given."""
        given = form.get("token", "") if isinstance(form, dict) else ""
        if self._token is None or not self._is_token(given):
            return RedirectResponse("/enter?wrong=1", 303)
        until = int(self._clock().timestamp()) + ENTRY_HOURS * 3600
        response = RedirectResponse("/", 303)
        value = f"{until}-{self._sign('entry', str(until))}"
        response.headers.append("set-cookie", cookie(ENTRY_COOKIE, value, seconds=ENTRY_HOURS * 3600))
        return response

    def _has_entered(self, value: str) -> bool:
        until, _, signature = value.partition("-")
        if not until.isdigit() or int(until) < self._clock().timestamp():
            return False
        return hmac.compare_digest(signature.encode(), self._sign("entry", until).encode())

    def _is_token(self, given: str) -> bool:
        return self._token is not None and hmac.compare_digest(
            hashlib.sha256(given.encode()).digest(), self._token
        )

    def _sign(self, purpose: str, value: str) -> str:
        return hmac.new(self._secret, f"{purpose}:{value}".encode(), hashlib.sha256).hexdigest()

    def _too_many(self, client: str, kind: str, most: int) -> bool:
        now = self._clock()
        if len(self._seen) > 1000:  # clients that were never seen again
            self._seen = {k: v for k, v in self._seen.items() if v and now - v[-1] < dt.timedelta(minutes=1)}
        times = self._seen.setdefault((client, kind), deque())
        while times and now - times[0] >= dt.timedelta(minutes=1):
            times.popleft()
        if len(times) >= most:
            return True
        times.append(now)
        return False


def cookie(name: str, value: str, *, seconds: int | None = None) -> str:
    """A Set-Cookie header that scripts cannot read and other sites cannot send."""
    age = "" if seconds is None else f"; Max-Age={seconds}"
    return f"{name}={value}; Path=/; HttpOnly; SameSite=Strict{age}"


def _cookies(header: str) -> dict[str, str]:
    jar: SimpleCookie = SimpleCookie()
    try:
        jar.load(header)
    except CookieError:
        return {}
    return {name: morsel.value for name, morsel in jar.items()}


async def _body(receive: Receive) -> bytes | None:
    """The whole body; None when it is too long, whatever its head said."""
    body = b""
    while True:
        message = await receive()
        if message["type"] == "http.disconnect":
            return body
        body += message.get("body", b"")
        if len(body) > MAX_BODY_BYTES:
            return None
        if not message.get("more_body"):
            return body


def _words(status: int, text: str) -> Response:
    return PlainTextResponse(text + "\n", status)
