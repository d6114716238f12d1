"""SMTP servers that accept, refuse, dawdle and cannot be trusted."""

from __future__ import annotations

import base64
import email
import email.policy
import time

import pytest

from delivery.receivers import MailReceiver
from rhovane.delivery import Undelivered, channel_of

SECRET = "geheim-4711"


def channel(with_channels, port: int, more: str = "", security: str = "none", timeout_s: float = 10):
    settings = with_channels(
        f'[delivery]\ntimeout_s = {timeout_s}\n[delivery.mail]\nhost = "localhost"\nport = {port}\nsecurity = "{security}"\n'
        f'sender = "watch@example.org"\nto = ["ana@example.org", "bo@example.org"]\n{more}'
    )
    return channel_of(settings, "mail")


@pytest.mark.parametrize("security", ["starttls", "tls"])
def test_a_mail_is_sent_encrypted_after_log_in(message, with_channels, tmp_path, security):
    (tmp_path / "secret").write_text(SECRET + "\n")
    (tmp_path / "secret").chmod(0o600)
    receiver = MailReceiver(security=security)
    more = 'user = "watch"\npassword_file = "secret"\nca_file = "ca.pem"\n'
    with receiver.listen() as port:
        assert channel(with_channels, port, more, security)(message) is None
    (sender, recipients, text) = receiver.mails[0]
    assert "watch@example.org" in sender
    assert len(recipients) == 2
    assert receiver.encrypted_mails == 1
    assert base64.b64decode(receiver.logins[0].split()[-1]) == b"\0watch\0" + SECRET.encode()
    mail = email.message_from_string(text, policy=email.policy.default)
    assert mail["Subject"] == message.title
    assert mail["Message-ID"] == f"<{message.id}@example.org>"
    assert mail.get_content().splitlines() == message.text.splitlines()


@pytest.mark.parametrize("security", ["starttls", "tls"])
def test_a_server_without_a_trusted_certificate_gets_nothing(message, with_channels, security):
    receiver = MailReceiver(security=security)
    with receiver.listen() as port, pytest.raises(Undelivered, match="certificate"):
        channel(with_channels, port, security=security)(message)
    assert receiver.mails == []


def test_a_server_that_cannot_encrypt_gets_nothing_and_the_setting_is_named(message, with_channels):
    receiver = MailReceiver(offers_starttls=False)
    with receiver.listen() as port, pytest.raises(Undelivered, match=r"STARTTLS.*delivery.mail.security"):
        channel(with_channels, port, security="starttls")(message)
    assert receiver.mails == []


@pytest.mark.parametrize(
    ("refuse", "told", "others"),
    [
        ({"DATA": "554 not this"}, "answered 554", True),
        ({"DATA": "451 later"}, "answered 451", False),
        ({"MAIL": "550 not you"}, "answered 550", False),
        ({"RCPT": "550 nobody"}, r"refused ana@example.org, bo@example.org", False),
    ],
)
def test_refusals_are_told(message, with_channels, refuse, told, others):
    receiver = MailReceiver(refuse=refuse)
    with receiver.listen() as port, pytest.raises(Undelivered, match=told) as caught:
        channel(with_channels, port)(message)
    assert caught.value.others_may_go is others
    assert receiver.mails == []


def test_one_refused_recipient_is_remarked_and_the_others_are_not_sent_to_again(message, with_channels):
    receiver = MailReceiver(refuse={"RCPT bo@example.org": "550 nobody"})
    with receiver.listen() as port:
        remark = channel(with_channels, port)(message)
    assert "refused bo@example.org" in remark
    assert len(receiver.mails) == 1


def test_a_refused_log_in_shows_no_password(message, with_channels, monkeypatch):
    monkeypatch.setenv("RHOVANE_TEST_PASSWORD", SECRET)
    receiver = MailReceiver(refuse={"AUTH": f"535 {SECRET} is wrong"})
    more = 'user = "watch"\npassword_env = "RHOVANE_TEST_PASSWORD"\n'
    with (
        receiver.listen() as port,
        pytest.raises(Undelivered, match=r"refused the log-in of watch") as caught,
    ):
        channel(with_channels, port, more)(message)
    assert SECRET not in repr(caught.value)


@pytest.mark.parametrize("slow", [{"greeting_delay_s": 6.0}, {"drip": True}])
def test_a_server_that_dawdles_is_left_after_the_time_limit(message, with_channels, slow):
    with MailReceiver(**slow).listen() as port:
        begun = time.monotonic()
        with pytest.raises(Undelivered, match=r"no answer within 0\.5 s"):
            channel(with_channels, port, timeout_s=0.5)(message)
        assert time.monotonic() - begun < 5  # dripping would take 10 s


def test_a_server_that_hangs_up_when_it_has_the_mail_counts_as_having_it(message, with_channels):
    receiver = MailReceiver(refuse={"QUIT": "421 no manners"})
    with receiver.listen() as port:
        assert channel(with_channels, port)(message) is None
    assert len(receiver.mails) == 1
