"""Window results and evidence: the latest night's rows are current, nothing is deleted."""

import datetime as dt

import numpy as np
import pytest

from rhovane.model import RhovaneError
from rhovane.store import EVIDENCE_COLUMNS, WINDOW_COLUMNS


def windows(pairs, ends, lags, statistic, **more):
    """Results of all pairs × ends × lags, in a mixed order."""
    grid = [(p, e, g) for g in lags for p in pairs for e in ends]
    n = len(grid)
    columns = {
        "pair_key": [p for p, _, _ in grid],
        "window_end": np.array([e * 3600 for _, e, _ in grid]),
        "lag": np.array([g for _, _, g in grid]),
        "statistic": np.full(n, statistic),
        "n_pairs": 500,
        "coverage": 0.9,
        "n_effective": np.linspace(40, 50, n),
        "p_value": 0.01,
        "low": np.nan,
        "high": 0.4,
        "reason": None,
    }
    return columns | more


def evidence(pairs, days, score, *, recipe="r1"):
    """Evidence of all pairs × days in May 2024, days outermost."""
    grid = [(p, dt.date(2024, 5, d)) for d in days for p in pairs]
    keys = {"pair_key": [p for p, _ in grid], "recipe_hash": recipe, "day": [d for _, d in grid]}
    return (
        dict.fromkeys(EVIDENCE_COLUMNS, 0.0)
        | keys
        | {"innovation": np.full(len(grid), score), "shape": np.nan}
    )


def test_windows_come_back_in_order_with_nan_and_reasons(store):
    columns = windows(["b~c", "a~b"], [5, 4], [1, -1], 0.5)
    columns["statistic"][0] = np.nan
    columns["reason"] = np.array(["one side is constant"] + [None] * 7, dtype=object)
    store.write_windows(1, columns)
    found = store.read_windows()
    assert set(found) == {*WINDOW_COLUMNS, "night_id"}
    keys = list(zip(found["pair_key"], found["window_end"].tolist(), found["lag"].tolist(), strict=True))
    assert keys == [(p, e * 3600, g) for p in ("a~b", "b~c") for e in (4, 5) for g in (-1, 1)]
    undefined = np.isnan(found["statistic"])
    assert [keys[i] for i in np.flatnonzero(undefined)] == [("b~c", 5 * 3600, 1)]
    assert found["reason"].tolist() == ["one side is constant" if u else None for u in undefined]
    assert np.isnan(found["low"]).all()
    assert found["window_end"].dtype == np.int64
    written = zip(columns["pair_key"], columns["window_end"], columns["lag"], strict=True)
    order = [keys.index(key) for key in written]
    np.testing.assert_array_equal(found["n_effective"][order], columns["n_effective"])


def test_windows_are_filtered_by_pair_span_and_lag(store):
    store.write_windows(1, windows(["a~b", "b~c"], range(10), [-1, 0, 1], 0.5))
    hour = lambda h: dt.datetime.fromtimestamp(3600 * h, dt.UTC)  # noqa: E731
    found = store.read_windows("b~c", hour(3), hour(6), 0)
    assert found["pair_key"].tolist() == ["b~c"] * 3
    assert (found["window_end"] // 3600).tolist() == [3, 4, 5]
    assert len(store.read_windows(lag=1)["lag"]) == 20
    nothing = store.read_windows("x~y")
    assert {name: len(column) for name, column in nothing.items()} == dict.fromkeys(nothing, 0)


@pytest.mark.parametrize("seed", range(3))
def test_current_windows_are_those_of_the_latest_night_and_all_others_are_kept(store, seed):
    rng = np.random.default_rng(seed)
    latest, written = {}, 0
    for night in range(1, 8):
        pairs = [p for p in ("a", "b", "c") if rng.random() < 0.7] or ["a"]
        ends = np.unique(rng.integers(0, 6, size=4))
        store.write_windows(night, windows(pairs, ends, [0, 1], night / 10))
        rows = [(p, int(e) * 3600, g) for p in pairs for e in ends for g in (0, 1)]
        latest |= dict.fromkeys(rows, night)
        written += len(rows)
    found = store.read_windows()
    keys = zip(found["pair_key"], found["window_end"].tolist(), found["lag"].tolist(), strict=True)
    assert dict(zip(keys, found["night_id"].tolist(), strict=True)) == latest
    assert len(found["lag"]) == len(latest)
    np.testing.assert_allclose(found["statistic"], found["night_id"] / 10)
    assert store.value("select count(*) from window_result_history") == written - len(latest)
    assert store.value("select count(*) from window_result_history where superseded_by <= night_id") == 0


def test_retired_windows_are_in_the_history_only(store):
    store.write_windows(1, windows(["a", "b"], [1, 2], [0], 0.5))
    store.retire_windows(2, ["a", "unknown"])
    assert store.read_windows()["pair_key"].tolist() == ["b", "b"]
    assert store.rows("select night_id, superseded_by from window_result_history") == [(1, 2), (1, 2)]


def test_windows_accept_datetime64_and_empty_columns(store):
    columns = windows(["a"], [1], [0], 0.5)
    store.write_windows(1, columns | {"window_end": np.array(["2024-05-01T03:00"], "datetime64[m]")})
    assert store.read_windows()["window_end"].tolist() == [1_714_532_400]
    store.write_windows(2, {name: [] for name in WINDOW_COLUMNS})
    store.write_evidence(2, {name: [] for name in EVIDENCE_COLUMNS})
    assert store.read_windows()["night_id"].tolist() == [1]
    assert store.read_evidence()["day"].dtype == "datetime64[D]"


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"lag": np.array([0, 0])}, "1 keys .* occur more than once"),
        ({"rho": 1.0}, r"not known \['rho'\]"),
        ({"statistic": np.zeros(3)}, "different lengths"),
    ],
)
def test_windows_that_cannot_be_meant_are_refused(store, change, words):
    with pytest.raises(RhovaneError, match=words):
        store.write_windows(1, windows(["a"], [1], [0, 1], 0.5) | change)
    incomplete = windows(["a"], [1], [0, 1], 0.5)
    del incomplete["coverage"]
    with pytest.raises(RhovaneError, match=r"missing \['coverage'\]"):
        store.write_windows(1, incomplete)
    assert len(store.read_windows()["lag"]) == 0


def test_evidence_is_kept_by_pair_recipe_and_day(store):
    store.write_evidence(1, evidence(["b", "a"], [1, 2, 3], 1.0))
    store.write_evidence(1, evidence(["a"], [1], 5.0, recipe="r2"))
    store.write_evidence(2, evidence(["a"], [3, 4], 2.0))
    found = store.read_evidence(recipe_hashes=["r1"])
    assert set(found) == {*EVIDENCE_COLUMNS, "night_id"}
    rows = list(zip(found["pair_key"], found["day"].tolist(), found["innovation"].tolist(), strict=True))
    day = lambda d: dt.date(2024, 5, d)  # noqa: E731
    assert rows == [
        ("a", day(1), 1.0), ("a", day(2), 1.0), ("a", day(3), 2.0), ("a", day(4), 2.0),
        ("b", day(1), 1.0), ("b", day(2), 1.0), ("b", day(3), 1.0),
    ]  # fmt: skip
    assert np.isnan(found["shape"]).all()
    assert store.read_evidence(recipe_hashes=["r2"])["innovation"].tolist() == [5.0]
    inside = store.read_evidence(pair_keys=["b"], start=day(2), end=day(3))
    assert (inside["pair_key"].tolist(), inside["day"].tolist()) == (["b"], [day(2)])
    assert len(store.read_evidence(pair_keys=[])["day"]) == 0
    assert store.rows("select night_id, superseded_by, innovation from evidence_history") == [(1, 2, 1.0)]
    with pytest.raises(RhovaneError, match="occur more than once among the evidence"):
        store.write_evidence(3, evidence(["a", "a"], [9], 0.0))
