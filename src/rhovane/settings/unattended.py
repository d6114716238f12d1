"""Settings of nights that run by themselves, of the service, and of what is sent out."""

from __future__ import annotations

import datetime as dt
from typing import Literal, Self
from urllib.parse import urlsplit

from pydantic import Field, field_validator, model_validator

from rhovane.settings.section import Section

Kind = Literal["alert", "digest", "notice"]
LOOPBACK = ("localhost", "127.0.0.1", "::1")


class NightSettings(Section):
    """When the night runs, and what it may take."""

    at: str = Field("03:40", pattern=r"^([01]\d|2[0-3]):[0-5]\d$", description="Standard time, HH:MM.")
    step_limit_minutes: float = Field(
        60,
        gt=0,
        le=1440,
        description="Minutes; longest time for one step. What is left goes to the next night.",
    )
    memory_limit_mb: int = Field(
        4096,
        ge=256,
        le=1_048_576,
        description="MB; peak memory of the process above which a night is incomplete.",
    )

    @property
    def after_midnight(self) -> dt.timedelta:
        """Time from midnight of standard time to the night."""
        return dt.timedelta(hours=int(self.at[:2]), minutes=int(self.at[3:]))


class ServiceSettings(Section):
    """The service that runs the nights by itself."""

    heartbeat_s: int = Field(
        30, ge=1, le=300, description="Seconds between two signs of life, and between two looks at the clock."
    )
    poll_minutes: int = Field(
        30, ge=0, le=1440, description="Minutes between two looks into the feed folders; 0: at night only."
    )
    catch_up_nights: int = Field(
        30,
        ge=1,
        le=3660,
        description="Most missed nights that are made up for, the newest; the rest is told.",
    )
    verify: bool = Field(True, description="Check the whole store after the night.")
    backup: bool = Field(True, description="Copy the store after the night.")
    min_free_mb: int = Field(
        1024, ge=0, le=100_000_000, description="MB free beside the store below which `status` says so."
    )
    log_file: str = Field("", description="File of the log, relative to work_folder; empty: standard error.")
    log_mb: int = Field(10, ge=1, le=10_000, description="MB at which a new log file is begun.")
    log_files: int = Field(5, ge=1, le=1000, description="Older log files that are kept.")


class FileDelivery(Section):
    """Messages appended to a file, one CloudEvent in JSON a line."""

    path: str = Field(min_length=1, description="The file; relative to work_folder.")
    send: tuple[Kind, ...] = Field(
        ("alert", "digest", "notice"), min_length=1, description="What is written."
    )


class HttpDelivery(Section):
    """Messages posted to an address, each as one CloudEvent in structured JSON."""

    url: str = Field(description="http:// or https:// address.")
    send: tuple[Kind, ...] = Field(("alert", "digest", "notice"), min_length=1, description="What is posted.")
    token_env: str = Field("", description="Environment variable that holds a bearer token.")
    token_file: str = Field("", description="File (mode 0600) that holds a bearer token.")
    ca_file: str = Field("", description="Certificates to trust besides the system's (PEM).")

    @field_validator("url")
    @classmethod
    def _address(cls, value: str) -> str:
        parts = urlsplit(value)
        if parts.scheme not in ("http", "https") or not parts.hostname:
            raise ValueError("write an address that begins with http:// or https:// and a host")
        if parts.username or parts.password:
            raise ValueError("leave name and password out of the address; use token_env or token_file")
        return value

    @model_validator(mode="after")
    def _token_is_safe(self) -> Self:
        _one_secret(self.token_env, self.token_file, "token")
        parts = urlsplit(self.url)
        if (self.token_env or self.token_file) and parts.scheme == "http" and parts.hostname not in LOOPBACK:
            raise ValueError("a token is only sent over https://")
        return self


class MailDelivery(Section):
    """Messages as e-mail."""

    host: str = Field(min_length=1, description="SMTP server.")
    port: int = Field(587, ge=1, le=65535, description="Its port: usually 587 (starttls), 465 (tls) or 25.")
    security: Literal["starttls", "tls", "none"] = Field(
        "starttls", description="How the connection is encrypted."
    )
    sender: str = Field(pattern=r"^[^@\s]+@[^@\s]+$", description="Address the messages come from.")
    to: tuple[str, ...] = Field(min_length=1, description="Addresses the messages go to.")
    send: tuple[Kind, ...] = Field(("digest", "notice"), min_length=1, description="What is sent.")
    user: str = Field("", description="Name to log in with; empty: no log-in.")
    password_env: str = Field("", description="Environment variable that holds the password.")
    password_file: str = Field("", description="File (mode 0600) that holds the password.")
    ca_file: str = Field("", description="Certificates to trust besides the system's (PEM).")

    @field_validator("to")
    @classmethod
    def _addresses(cls, value: tuple[str, ...]) -> tuple[str, ...]:
        for address in value:
            name, at, domain = address.partition("@")
            if not (name and at and domain) or any(c.isspace() or c in ",;<>" for c in address):
                raise ValueError(f"{address!r} is not an address such as air@example.org")
        return value

    @model_validator(mode="after")
    def _log_in_is_safe(self) -> Self:
        _one_secret(self.password_env, self.password_file, "password")
        if bool(self.user) != bool(self.password_env or self.password_file):
            raise ValueError("give user together with password_env or password_file, or none of them")
        if self.user and self.security == "none" and self.host not in LOOPBACK:
            raise ValueError('a password is only sent encrypted; set security to "starttls" or "tls"')
        return self


class DeliverySettings(Section):
    """What is sent out, and where to; without a channel nothing is."""

    source: str = Field(
        "/rhovane", min_length=1, pattern=r"^\S+$", description="Source named in messages (URI reference)."
    )
    flood_above: int = Field(
        10, ge=1, le=10_000, description="New alerts in a night above which one grouped digest replaces them."
    )
    retry_minutes: float = Field(
        5, gt=0, le=360, description="Minutes to the second attempt; doubled each time, up to 6 hours."
    )
    timeout_s: float = Field(10, gt=0, le=120, description="Seconds to wait for a receiver.")
    file: FileDelivery | None = Field(None, description="JSON lines file.")
    http: HttpDelivery | None = Field(None, description="HTTP receiver.")
    mail: MailDelivery | None = Field(None, description="E-mail.")

    @property
    def channels(self) -> dict[str, tuple[str, ...]]:
        """What is sent, by the name of the channel."""
        known = {"file": self.file, "http": self.http, "mail": self.mail}
        return {name: one.send for name, one in known.items() if one is not None}


def _one_secret(env: str, file: str, what: str) -> None:
    if env and file:
        raise ValueError(f"give {what}_env or {what}_file, not both")
