"""An old store written anew: the same content, less space, series together."""

import dataclasses

import numpy as np
import pytest

from rhovane.model import StoreDamaged
from rhovane.store import open_store, tidy
from rhovane.store.manifest import manifest_path, read_manifest
from store.building import FIRST_HOUR, KEYS, NOW, SERIES, parsed_file


def everything(store):
    return {t: sorted(store.rows(f"select * from {t}"), key=repr) for t in store.tables_of()}


def test_tidied_store_holds_the_same_in_order_and_goes_on(used):
    path = used.path
    before = everything(used)
    used.close()
    done = tidy(path, lambda: open_store(path))
    assert done.bytes_after == path.stat().st_size
    with open_store(path) as store:
        assert everything(store) == before
        assert store.verify() == []
        in_order = store.rows("select series_id, ts from reading order by rowid")
        assert in_order == sorted(in_order)
        assert read_manifest(path) == store.holds()
        new = parsed_file([{"series": KEYS[0], "hour": 99, "value": 1.0}])
        assert store.append_files([new], now=NOW)[0].new == 1
    assert {p.name for p in path.parent.iterdir()} == {path.name, manifest_path(path).name}


def test_store_grown_day_by_day_becomes_smaller(path):
    n_days, n = 15, 24 * 300
    with open_store(path, threads=1) as store:
        store.ensure_series(SERIES)
        rng = np.random.default_rng(4)
        for day in range(n_days):
            hours = np.tile(FIRST_HOUR + 3600 * (np.arange(24 * 100) + 2400 * day), 3)
            file = dataclasses.replace(
                parsed_file([]), sha256=f"{day:064x}", rows_read=n, series_key=np.repeat(KEYS, n // 3),
                hour_start=hours, value=rng.integers(0, 50, n).astype(float), flag=np.ones(n, int),
                stage=np.ones(n, int), result_time=hours, line=np.arange(n) + 2,
            )  # fmt: skip
            store.append_files([file], now=NOW)
    done = tidy(path, lambda: open_store(path, threads=1))
    assert done.bytes_after < 0.8 * done.bytes_before
    assert done.as_json()["seconds_after"] > 0


def test_copy_that_lost_rows_never_takes_the_place_of_the_store(used, monkeypatch):
    path = used.path
    used.close()
    before = path.read_bytes()
    other = path.with_name("empty.duckdb")
    with open_store(other):
        pass
    monkeypatch.setattr("rhovane.store.tidying.held_by", lambda _part: read_manifest(other))
    with pytest.raises(StoreDamaged, match="was left as it was"):
        tidy(path, lambda: open_store(path))
    assert path.read_bytes() == before
    assert not list(path.parent.glob(".*"))
