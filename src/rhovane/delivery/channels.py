"""The channels that the settings name."""

from __future__ import annotations

from collections.abc import Callable

from rhovane.delivery.to_file import append_line
from rhovane.delivery.to_http import post
from rhovane.delivery.to_mail import send_mail
from rhovane.model import Message
from rhovane.settings import Settings

Send = Callable[[Message], str | None]  # what was refused by some while others accepted, or None


def channel_of(settings: Settings, name: str) -> Send | None:
    """What sends a message over a channel or raises ``Undelivered``; None when the settings have no such channel."""
    delivery, folder, timeout_s = settings.delivery, settings.work_folder, settings.delivery.timeout_s
    if name == "file" and (to_file := delivery.file) is not None:
        return lambda message: append_line(folder / to_file.path, message, delivery.source)
    if name == "http" and (to_http := delivery.http) is not None:
        return lambda message: post(to_http, folder, message, delivery.source, timeout_s)
    if name == "mail" and (to_mail := delivery.mail) is not None:
        return lambda message: send_mail(to_mail, folder, message, delivery.source, timeout_s)
    return None
