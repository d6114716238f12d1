"""Receivers on this machine: HTTP and SMTP servers that accept, refuse, dawdle or hang up, as they are told."""

from __future__ import annotations

import contextlib
import http.server
import socketserver
import ssl
import threading
import time
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path

CERTIFICATE = Path(__file__).with_name("localhost.pem")


@contextlib.contextmanager
def running(server: socketserver.BaseServer) -> Iterator[int]:
    """Serve in a thread; the port."""
    thread = threading.Thread(target=server.serve_forever, kwargs={"poll_interval": 0.01}, daemon=True)
    thread.start()
    try:
        yield server.server_address[1]
    finally:
        server.shutdown()
        server.server_close()
        thread.join(5)


def encrypted() -> ssl.SSLContext:
    context = ssl.SSLContext(ssl.PROTOCOL_TLS_SERVER)
    context.load_cert_chain(CERTIFICATE)
    return context


@dataclass
class HttpReceiver:
    """Answers with the statuses of ``answers`` in turn, then with the last of them; "drip" never ends its answer."""

    answers: list[int | str] = field(default_factory=lambda: [204])
    requests: list[tuple[str, dict[str, str], bytes]] = field(default_factory=list)
    tls: bool = False

    @contextlib.contextmanager
    def listen(self) -> Iterator[int]:
        receiver = self

        class Handler(http.server.BaseHTTPRequestHandler):
            def do_POST(self) -> None:
                body = self.rfile.read(int(self.headers["Content-Length"]))
                receiver.requests.append((self.path, dict(self.headers), body))
                answer = receiver.answers[min(len(receiver.requests), len(receiver.answers)) - 1]
                if answer == "drip":
                    with contextlib.suppress(OSError):
                        for _ in range(200):
                            self.wfile.write(b"H")
                            time.sleep(0.05)
                    return
                if answer == "hang up after reading":
                    return
                self.send_response(int(answer))
                if int(answer) in (301, 302, 307):
                    self.send_header("Location", "/elsewhere")
                self.send_header("Content-Length", "0")
                self.end_headers()

            def log_message(self, *_args: object) -> None:
                """Say nothing."""

        server = http.server.ThreadingHTTPServer(("127.0.0.1", 0), Handler)
        server.daemon_threads = True
        if self.tls:
            server.socket = encrypted().wrap_socket(server.socket, server_side=True)
        with running(server) as port:
            yield port


@dataclass
class MailReceiver:
    """An SMTP server that knows what a sender of one message needs.

    ``refuse`` maps a command ("RCPT other@example.org", "DATA", "AUTH", …) to the answer it gets instead.
    """

    security: str = "none"
    refuse: dict[str, str] = field(default_factory=dict)
    greeting_delay_s: float = 0.0
    drip: bool = False
    offers_starttls: bool = True
    mails: list[tuple[str, list[str], str]] = field(default_factory=list)
    logins: list[str] = field(default_factory=list)
    encrypted_mails: int = 0

    @contextlib.contextmanager
    def listen(self) -> Iterator[int]:
        receiver = self

        class Handler(socketserver.StreamRequestHandler):
            def handle(self) -> None:
                with contextlib.suppress(OSError, ssl.SSLError):
                    _converse(receiver, self)
                for part in (self.rfile, self.wfile, self.request):
                    part.close()

        class Server(socketserver.ThreadingTCPServer):
            allow_reuse_address = True
            daemon_threads = True

            def handle_error(self, *_args: object) -> None:
                """A client that does not trust us is no news."""

        with running(Server(("127.0.0.1", 0), Handler)) as port:
            yield port


def _refusal(refuse: dict[str, str], text: str) -> str | None:
    """The answer for a command that is to be refused: its word and, where given, its argument."""
    for command, answer in refuse.items():
        if all(part.lower() in text.lower() for part in command.split()):
            return answer
    return None


def _converse(receiver: MailReceiver, handler: socketserver.StreamRequestHandler) -> None:
    sock, secure = handler.request, False

    def say(line: str) -> None:
        handler.wfile.write(line.encode() + b"\r\n")

    def wrap() -> None:
        nonlocal sock, secure
        sock, secure = encrypted().wrap_socket(sock, server_side=True), True
        handler.request = sock  # the server closes what it finds here
        handler.rfile, handler.wfile = sock.makefile("rb"), sock.makefile("wb", 0)

    if receiver.security == "tls":
        wrap()
    time.sleep(receiver.greeting_delay_s)
    if receiver.drip:
        for _ in range(200):
            handler.wfile.write(b"2")
            time.sleep(0.05)
    say("220 localhost")
    sender, recipients = "", []
    while line := handler.rfile.readline():
        text = line.decode().strip()
        word = text.split()[0].upper() if text else ""
        refusal = _refusal(receiver.refuse, text)
        if refusal is not None:
            say(refusal)
        elif word == "EHLO":
            say("250-localhost")
            for feature in ["STARTTLS"] * (receiver.offers_starttls and not secure) + ["AUTH PLAIN"]:
                say(f"250-{feature}")
            say("250 8BITMIME")
        elif word == "STARTTLS":
            say("220 go on")
            wrap()
        elif word == "AUTH":
            receiver.logins.append(text)
            say("235 welcome")
        elif word == "MAIL":
            sender, recipients = text, []
            say("250 fine")
        elif word == "RCPT":
            recipients.append(text)
            say("250 fine")
        elif word == "DATA":
            say("354 go on")
            body = []
            while (part := handler.rfile.readline()) != b".\r\n":
                body.append(part.decode())
            receiver.mails.append((sender, recipients, "".join(body)))
            receiver.encrypted_mails += secure
            say("250 taken")
        elif word == "QUIT":
            say("221 bye")
            return
        else:
            say("250 fine")
