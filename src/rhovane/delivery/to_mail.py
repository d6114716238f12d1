"""Messages as e-mail over SMTP, encrypted by STARTTLS or TLS."""

from __future__ import annotations

import contextlib
import smtplib
import socket
from email.message import EmailMessage
from email.utils import format_datetime
from pathlib import Path
from typing import Any

from rhovane.delivery.failure import Undelivered
from rhovane.delivery.secret import Secret, read_secret
from rhovane.delivery.time_limit import hang_up_after
from rhovane.delivery.to_http import trusted
from rhovane.model import Message
from rhovane.settings import MailDelivery


def mail_of(settings: MailDelivery, message: Message, source: str) -> EmailMessage:
    """The e-mail of a message. Its Message-ID is the same for every repeat."""
    mail = EmailMessage()
    mail["Subject"] = " ".join(message.title.split())
    mail["From"] = settings.sender
    mail["To"] = ", ".join(settings.to)
    mail["Date"] = format_datetime(message.at)
    mail["Message-ID"] = f"<{message.id}@{settings.sender.partition('@')[2]}>"
    mail["Auto-Submitted"] = "auto-generated"  # RFC 3834: nobody's absence note need answer
    mail["X-Rhovane-Source"] = source
    mail.set_content(message.text, cte="quoted-printable")  # passes servers that know 7 bits only
    return mail


def send_mail(
    settings: MailDelivery, folder: Path, message: Message, source: str, timeout_s: float
) -> str | None:
    """Hand a message to the SMTP server; what it refused while it accepted the rest, None when nothing.

    The time limit holds for the whole exchange.

    Raises
    ------
    Undelivered
        The server could not be reached, took too long, is not trusted, or refused log-in, sender, message or every
        recipient.
    """
    secret = read_secret(settings.password_env, settings.password_file, folder)
    shown = f"{settings.host}:{settings.port}"
    seen: list[smtplib.SMTP] = []
    with hang_up_after(timeout_s, lambda: seen[-1].sock if seen else None) as over:
        try:
            server = _connected(settings, folder, timeout_s, seen)
            refused = _handed_over(server, settings, secret, mail_of(settings, message, source))
        except (smtplib.SMTPException, OSError) as error:
            late = over() or isinstance(error, TimeoutError) or "timed out" in str(error)
            why = f"no answer within {timeout_s:g} s" if late else _why(error, settings, secret)
            for_itself = not late and isinstance(error, smtplib.SMTPDataError) and error.smtp_code >= 500
            raise Undelivered(f"{shown} {why}", others_may_go=for_itself) from None
        finally:
            for one in seen:
                one.close()
    return f"{shown}: refused {', '.join(sorted(refused))}; the others have it" if refused else None


def _why(error: Exception, settings: MailDelivery, secret: Secret) -> str:
    """What went wrong, in words that hold no secret."""
    match error:
        case smtplib.SMTPNotSupportedError():
            return f"does not do as asked: {error} Change delivery.mail.security."
        case smtplib.SMTPAuthenticationError():
            return f"refused the log-in of {settings.user} ({error.smtp_code})"
        case smtplib.SMTPRecipientsRefused():
            return f"refused {', '.join(sorted(error.recipients))}"
        case smtplib.SMTPResponseException():
            return f"answered {error.smtp_code}"
        case _:
            return f"cannot be used: {secret.hide_in(str(error)) or type(error).__name__}"


def _handed_over(
    server: smtplib.SMTP, settings: MailDelivery, secret: Secret, mail: EmailMessage
) -> dict[str, Any]:
    """Give the server the mail, and return the recipients that it refused."""
    if settings.user:
        server.login(settings.user, secret.reveal())
    refused = server.send_message(mail)
    with contextlib.suppress(smtplib.SMTPException, OSError):  # it has the mail; how it parts does not matter
        server.quit()
    return refused


def _connected(
    settings: MailDelivery, folder: Path, timeout_s: float, seen: list[smtplib.SMTP]
) -> smtplib.SMTP:
    place = {
        "host": settings.host,
        "port": settings.port,
        "timeout": timeout_s,
        "local_hostname": socket.gethostname(),  # smtplib would ask the name service, which may take long
    }
    if settings.security == "tls":
        return _Tls(seen, **place, context=trusted(settings.ca_file, folder))
    server = _Plain(seen, **place)
    if settings.security == "starttls":
        server.starttls(context=trusted(settings.ca_file, folder))
    return server


class _Seen:
    """A connection that can be hung up while it is still being made."""

    def __init__(self, seen: list[Any], **place: Any) -> None:
        seen.append(self)
        super().__init__(**place)


class _Plain(_Seen, smtplib.SMTP):
    """Not encrypted, or not yet."""


class _Tls(_Seen, smtplib.SMTP_SSL):
    """Encrypted from the first byte."""
