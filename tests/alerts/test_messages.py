"""What a night tells: each alert, or one digest for a flood; what keeps failing; nothing that counts attempts."""

from __future__ import annotations

import datetime as dt
from dataclasses import replace

import pytest

from rhovane.alerts import NightNews, night_messages
from rhovane.model import Alert, CorrelationEstimate, MessageKind

DAY = dt.date(2025, 3, 1)
PLANNED = dt.datetime(2025, 3, 2, 3, 40, tzinfo=dt.UTC)
ESTIMATE = CorrelationEstimate(DAY, DAY, 0.5, 600, 60.0, 0.3, 0.7)


def alert(number: int, suspect: str = "series A.NO2") -> tuple[Alert, str]:
    one = Alert(
        number, "A.NO2~B.NO2", "r", "level", "weaker", DAY, DAY, DAY, 9, 1, "s", 5.0, 4.0, ESTIMATE, ESTIMATE,
        ("A.NO2~B.NO2",), suspect, ("Check the inlet.",),
    )  # fmt: skip
    return one, f"headline {number}"


def news(n_alerts: int = 0, **more: object) -> NightNews:
    plain = NightNews(
        "Two stations",
        DAY,
        PLANNED,
        "complete",
        [alert(i + 1) for i in range(n_alerts)],
        caution="Association is not cause.",
    )
    return replace(plain, **more)


@pytest.mark.parametrize(("n", "n_single"), [(0, 0), (1, 1), (10, 10), (11, 0), (40, 0)])
def test_up_to_the_limit_each_alert_is_told_and_above_it_one_digest_takes_their_place(n, n_single):
    messages = night_messages(news(n), flood_above=10)
    kinds = [m.kind for m in messages]
    assert kinds == [MessageKind.ALERT] * n_single + [MessageKind.DIGEST]
    digest = messages[-1]
    assert digest.data["flood"] is (n > 10)
    assert [a["id"] for a in digest.data["new_alerts"]] == list(range(1, n + 1)), "none is left out"
    assert len({m.id for m in messages}) == len(messages)


def test_a_flood_is_grouped_by_suspect():
    found = [alert(i, "station A" if i % 3 else "pair A.NO2~B.NO2") for i in range(1, 13)]
    digest = night_messages(news(new=found), flood_above=10)[-1]
    assert digest.data["groups"] == {"station A": [1, 2, 4, 5, 7, 8, 10, 11], "A.NO2~B.NO2": [3, 6, 9, 12]}
    assert "station A: 8" in digest.text


def test_a_digest_says_what_happened_what_is_silent_and_the_cautions():
    digest = night_messages(
        news(
            1,
            outcome="incomplete",
            troubles=[("source air", "no such folder")],
            failing={"source air": 2},
            silent=[f"S{i}.NO2: never seen" for i in range(15)],
            falling=["A.NO2~B.NO2: coverage 95% a week before, 80% now"],
            next_command="rhovane nightly",
            unreviewed=3,
        ),
        flood_above=10,
    )[-1]
    for words in (
        "incomplete", "1: headline 1", "source air: no such folder", "S0.NO2: never seen", "… and 5 more",
        "80% now", "Next: rhovane nightly", "3 in the log", "Association is not cause.",
    ):  # fmt: skip
        assert words in digest.text
    assert len(digest.data["silent"]) == 15
    assert digest.data["failed"] == [{"part": "source air", "reason": "no such folder", "nights": 2}]
    assert max(map(len, digest.text.splitlines())) <= 80


@pytest.mark.parametrize(("nights", "told"), [(1, 0), (2, 0), (3, 1), (4, 0), (7, 1), (8, 0), (14, 1)])
def test_a_part_that_fails_is_told_by_itself_from_the_third_night_on_and_weekly(nights, told):
    failing = news(outcome="incomplete", troubles=[("source air", "gone")], failing={"source air": nights})
    notices = [m for m in night_messages(failing, flood_above=10) if m.kind is MessageKind.NOTICE]
    assert len(notices) == told
    for one in notices:
        assert one.data["part"] == "source air"
        assert f"{nights} nights running" in " ".join(one.text.split())


def test_the_same_night_tells_the_same_whichever_attempt_it_was():
    def ids(night_id: int) -> list[str]:
        found = [(replace(a, night_id=night_id), h) for a, h in (alert(1), alert(2))]
        return [m.id for m in night_messages(news(new=found), flood_above=10)]

    assert ids(9) == ids(10)
