"""The replay beside the requests: once a night, the same in a thread and in a process of its own."""

from __future__ import annotations

import numpy as np

from rhovane.pipeline.looking import stored_evidence
from rhovane.store import open_store
from rhovane.web.tracks import ReplayedWatch
from web.morning_network import MORNING


def test_thread_and_process_replay_the_same(settings):
    with open_store(settings.store_path, read_only=True) as store:
        evidence = stored_evidence(settings, store, MORNING)
    direct = evidence.replayed(settings)
    for small in (evidence.size, evidence.size - 1):  # in a thread, in a process
        replayed = ReplayedWatch(settings, wait_s=120.0, small=small)
        assert replayed.of(evidence.night_id) is None
        replayed.begin(evidence)
        assert replayed.knows(evidence.night_id)
        tracks = replayed.of(evidence.night_id)
        assert np.array_equal(tracks.watch.evidence, direct.watch.evidence, equal_nan=True)
        assert tracks.keys == direct.keys


def test_a_night_is_replayed_once_and_another_night_anew(settings):
    with open_store(settings.store_path, read_only=True) as store:
        evidence = stored_evidence(settings, store, MORNING)
    replayed = ReplayedWatch(settings, wait_s=120.0)
    replayed.begin(evidence)
    first = replayed.of(evidence.night_id)
    replayed.begin(evidence)
    assert replayed.of(evidence.night_id) is first
    assert replayed.of(evidence.night_id + 1) is None
