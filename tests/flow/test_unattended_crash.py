"""The service killed with SIGKILL at random moments: store, alert log and messages are as if nothing had happened."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import numpy as np

from flow import unattended_walk
from flow.test_crash import final_state
from flow.unattended_walk import network_in, walk
from rhovane.settings import Settings
from rhovane.store import open_store

KILLS, N_NIGHTS, SEED, LONGEST_S = 8, 5, 20, 0.5


def told(settings: Settings) -> dict[str, object]:
    """The outbox, and what the receiver has: every id with its only content."""
    with open_store(settings.store_path) as store:
        entries = store.outbox()
    contents: dict[str, str] = {}
    n_torn = 0
    for line in (settings.work_folder / "out.jsonl").read_text("utf-8").splitlines():
        try:
            event = json.loads(line)
        except ValueError:
            n_torn += 1
            continue
        assert contents.setdefault(event["id"], line) == line, f"id {event['id']} has two contents"
    assert n_torn <= KILLS
    return {
        "outbox": [(e.message, e.channel, e.delivered_at is not None) for e in entries],
        "received": contents,
    }


def state_of(settings: Settings) -> dict[str, object]:
    """Everything that matters: store, messages, and that the copy is whole."""
    (copy,) = sorted((settings.work_folder / "backup").glob("*.duckdb"), key=lambda p: p.stat().st_mtime)[-1:]
    with open_store(copy, read_only=True) as store, open_store(settings.store_path) as live:
        assert store.verify() == []
        assert store.newest_date() == live.newest_date()
    return final_state(settings) | told(settings)


def same_state(expected: dict[str, object], found: dict[str, object], seed: int) -> None:
    assert expected.keys() == found.keys()
    for name, value in expected.items():
        if isinstance(value, np.ndarray):
            np.testing.assert_array_equal(found[name], value, err_msg=f"{name} (seed {seed})")
        else:
            assert found[name] == value, f"{name} (seed {seed})"


def test_a_service_killed_again_and_again_ends_where_an_undisturbed_one_does(tmp_path: Path):
    undisturbed, killed = tmp_path / "undisturbed", tmp_path / "killed"
    arguments = [str(killed), str(N_NIGHTS), str(KILLS), str(SEED), str(LONGEST_S)]
    killing = subprocess.run(
        [sys.executable, unattended_walk.__file__, *arguments], capture_output=True, text=True, timeout=300
    )
    assert killing.returncode == 0, killing.stderr
    stages = killing.stdout.split("\n")[:-1]
    walk(network_in(undisturbed), N_NIGHTS)
    expected = state_of(network_in(undisturbed))
    assert len(stages) >= KILLS // 2, stages
    assert len(set(stages)) >= 2, "kills are meant to hit more than one stage"
    assert len(expected["alerts"]) == 1, "the change is meant to be raised"
    assert len(expected["received"]) == N_NIGHTS + 1, "a digest a night, and the alert"
    same_state(expected, state_of(network_in(killed)), SEED)
