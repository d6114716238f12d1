"""How long pages take: a network of 500 pairs over three years, invented; and the store of a demo, if there is one.

    python tests/benchmarks/page_benchmark.py [CONFIG]

Best of ten of each page, opened as a browser would, the store opened anew each time: wall time, and processor time of
all threads. The replay of the watch, which runs once a night beside the requests, is left out for the large network.
"""

from __future__ import annotations

import datetime as dt
import sys
import tempfile
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))

from starlette.testclient import TestClient

from rhovane.review import alert_entries
from rhovane.settings import Settings, load_settings
from rhovane.store import open_store
from rhovane.web import make_app
from web.morning_network import large_network

TRIES = 10


def measure(title: str, settings: Settings) -> None:
    """Print the times of the pages of one network."""
    with open_store(settings.store_path, read_only=True) as store:
        last = store.last_finished_night()
        alerts = [e.alert.id for e in alert_entries(store, dt.datetime.now(dt.UTC))]
    assert last is not None
    now = dt.datetime.combine(last.as_of + dt.timedelta(days=1), dt.time(7), dt.UTC)
    app = make_app(settings, token=None, clock=lambda: now)
    client = TestClient(app, base_url="http://127.0.0.1")
    pair = settings.pair[0]
    paths = [
        "/",
        "/pairs",
        f"/pair?key={pair.key}",
        f"/one-series?key={pair.first}",
        "/nights",
        "/statistics",
    ]
    paths += [f"/alert/{number}" for number in alerts[:2]]
    if len(settings.pair) > 100:
        client.app.app.state.site.begin_replay = lambda *_: None
    client.get("/")
    print(f"{title}: {len(settings.pair)} pairs, {settings.store_path.stat().st_size / 1e6:.0f} MB")
    time.sleep(15)  # the watch of a small network is replayed by then
    for path in paths:
        times, processor = [], []
        for _ in range(TRIES):
            started, busy = time.perf_counter(), time.process_time()
            response = client.get(path)
            times.append(time.perf_counter() - started)
            processor.append(time.process_time() - busy)
            assert response.status_code == 200
        print(
            f"  {1000 * min(times):6.0f} ms  {1000 * min(processor):6.0f} ms  {len(response.content) / 1e3:6.0f} kB  {path}"
        )


if __name__ == "__main__":
    with tempfile.TemporaryDirectory() as folder:
        measure("500 pairs, 3 years", large_network(Path(folder), 1096))
    if len(sys.argv) > 1:
        measure("demo", load_settings(Path(sys.argv[1])))
