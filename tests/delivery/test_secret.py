"""Secrets: where they may come from, and that they never show."""

from __future__ import annotations

import pytest

from rhovane.delivery import Undelivered
from rhovane.delivery.secret import Secret, read_secret
from rhovane.model import SettingsError


@pytest.mark.parametrize("mode", [0o644, 0o640, 0o606, 0o601, 0o660])
def test_a_file_that_others_can_touch_is_refused_with_the_remedy(tmp_path, mode):
    path = tmp_path / "secret"
    path.write_text("geheim")
    path.chmod(mode)
    with pytest.raises(Undelivered, match=rf"mode {mode:04o}.*chmod 600") as caught:
        read_secret("", "secret", tmp_path)
    assert "geheim" not in str(caught.value)


@pytest.mark.parametrize("mode", [0o600, 0o400])
def test_a_private_file_is_read_without_its_line_end(tmp_path, mode):
    path = tmp_path / "secret"
    path.write_text("geheim\n")
    path.chmod(mode)
    assert read_secret("", "secret", tmp_path).reveal() == "geheim"


def test_what_is_missing_is_named(tmp_path, monkeypatch):
    monkeypatch.delenv("RHOVANE_NOT_SET", raising=False)
    with pytest.raises(Undelivered, match="RHOVANE_NOT_SET is not set"):
        read_secret("RHOVANE_NOT_SET", "", tmp_path)
    with pytest.raises(Undelivered, match="absent cannot be read"):
        read_secret("", "absent", tmp_path)
    (tmp_path / "empty").touch(mode=0o600)
    with pytest.raises(Undelivered, match="is empty"):
        read_secret("", "empty", tmp_path)
    assert read_secret("", "", tmp_path).reveal() == ""


def test_a_secret_shows_itself_nowhere_but_where_it_is_asked_for():
    secret = Secret("geheim")
    assert "geheim" not in f"{secret} {secret!r} {[secret]} {secret.hide_in('535 geheim is wrong')}"
    assert secret.hide_in("535 geheim is wrong") == "535 ••• is wrong"


MAIL = 'host = "mail.example.org"\nsender = "a@example.org"\nto = ["b@example.org"]\n'


@pytest.mark.parametrize(
    ("lines", "told"),
    [
        ('[delivery.http]\nurl = "https://ana:pw@example.org/"', "leave name and password out"),
        ('[delivery.http]\nurl = "http://example.org/"\ntoken_env = "T"', "only sent over https"),
        ('[delivery.http]\nurl = "ftp://example.org/"', "begins with http"),
        ('[delivery.http]\nurl = "https://example.org/"\ntoken_env = "T"\ntoken_file = "f"', "not both"),
        (f'[delivery.mail]\n{MAIL}user = "a"', "give user together"),
        (f'[delivery.mail]\n{MAIL}user = "a"\npassword_env = "P"\nsecurity = "none"', "only sent encrypted"),
        (
            '[delivery.mail]\nhost = "h"\nsender = "a@example.org"\nto = ["Bo <b@example.org>"]',
            "is not an address",
        ),
        ('[delivery.mail]\nhost = "h"\nsender = "nobody"\nto = ["b@example.org"]', "delivery.mail.sender"),
        ('[delivery.file]\npath = ""', "delivery.file.path"),
        ('[delivery.file]\npath = "a"\nsend = []', "delivery.file.send"),
    ],
)
def test_settings_that_would_leak_or_lead_nowhere_are_refused(with_channels, lines, told):
    with pytest.raises(SettingsError, match=told):
        with_channels(lines + "\n")
