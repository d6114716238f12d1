"""Networks in the states in which an analyst may find them in the morning."""

from __future__ import annotations

import datetime as dt
import multiprocessing
from pathlib import Path

import numpy as np

from flow.small_network import HEADER, SETTINGS, related_series, row
from rhovane.pipeline import STEPS, run_night
from rhovane.settings import Settings, load_settings
from rhovane.store import LATER_COLUMNS, open_store

FIRST_DAY = dt.date(2025, 1, 1)
N_DAYS, CHANGE_DAY = 170, 140
LAST_DAY = FIRST_DAY + dt.timedelta(days=N_DAYS - 1)
RUN_AT = dt.datetime(2025, 6, 20, 3, 40, tzinfo=dt.UTC)  # the night after the last day
MORNING = dt.datetime(2025, 6, 20, 7, 0, tzinfo=dt.UTC)
HOSTILE = "<script>alert(1)</script>"

processes = multiprocessing.get_context("forkserver")


def settings_in(folder: Path) -> Settings:
    """Settings of the small network in a folder, with a third series that nobody delivers and hostile words."""
    text = SETTINGS.replace('key = "A.NO2"\n', f'key = "A.NO2"\nlabel = "{HOSTILE}"\n', 1)
    text = text.replace('"B NO2" = "B.NO2"', '"B NO2" = "B.NO2"\n"C NO2" = "C.NO2"')
    text += '\n[[series]]\nkey = "C.NO2"\nunit = "ug/m3"\n\n[[pair]]\nfirst = "C.NO2"\nsecond = "A.NO2"\n'
    (folder / "feed").mkdir(exist_ok=True)
    (folder / "monitor.toml").write_text(text, encoding="utf-8")
    return load_settings(folder / "monitor.toml")


def reviewed_network(folder: Path) -> Settings:
    """A network whose one relation breaks on day 140: one night over its whole history, one alert."""
    settings = settings_in(folder)
    x, y = related_series(24 * N_DAYS, 0.9, seed=3)
    y[24 * CHANGE_DAY :] = related_series(24 * N_DAYS, 0.0, seed=4)[1][24 * CHANGE_DAY :]
    text = HEADER + "".join(row(h, "A", x[h]) + row(h, "B", y[h]) for h in range(24 * N_DAYS))
    (folder / "feed" / "all.csv").write_text(text + row(0, "A", HOSTILE), encoding="utf-8")
    with open_store(settings.store_path) as store:
        run_night(settings, store, as_of=LAST_DAY, now=RUN_AT)
    return settings


def network_of_one_night(folder: Path) -> Settings:
    """A network with three days of readings and one night."""
    settings = settings_in(folder)
    text = HEADER + "".join(row(h, "A", 10 + h % 7) + row(h, "B", 20 + h % 5) for h in range(72))
    (folder / "feed" / "few.csv").write_text(text, encoding="utf-8")
    with open_store(settings.store_path) as store:
        run_night(
            settings, store, as_of=dt.date(2025, 1, 3), now=dt.datetime(2025, 1, 4, 3, 40, tzinfo=dt.UTC)
        )
    return settings


def network_of_a_failed_night(folder: Path) -> Settings:
    """The same network after a second night that a step stopped."""
    settings = network_of_one_night(folder)

    def stop(_night: object) -> str:
        raise ValueError(f"the disk said {HOSTILE}")

    steps = (STEPS[0], ("windows", stop))
    with open_store(settings.store_path) as store:
        run_night(
            settings,
            store,
            as_of=dt.date(2025, 1, 4),
            now=dt.datetime(2025, 1, 5, 3, 40, tzinfo=dt.UTC),
            steps=steps,
        )
    return settings


def large_settings(folder: Path, n_stations: int = 26, n_pairs: int = 500) -> Settings:
    """Settings of a network with ``n_pairs`` pairs among two quantities at every station."""
    keys = [f"S{i:02d}.{q}" for q in ("NO2", "PM25") for i in range(n_stations)]
    sources = "\n".join(f'"{key.replace(".", " ")}" = "{key}"' for key in keys)
    head, _, rest = SETTINGS.partition('"A NO2" = "A.NO2"\n"B NO2" = "B.NO2"')
    flags = rest.partition("[[series]]")[0]
    series = "".join(f'[[series]]\nkey = "{key}"\nunit = "ug/m3"\n' for key in keys)
    couples = [(a, b) for a in range(n_stations) for b in range(a + 1, n_stations)]
    named = [(keys[q * n_stations + a], keys[q * n_stations + b]) for q in (0, 1) for a, b in couples][
        :n_pairs
    ]
    pairs = "".join(f'[[pair]]\nfirst = "{a}"\nsecond = "{b}"\n' for a, b in named)
    (folder / "feed").mkdir(exist_ok=True)
    (folder / "monitor.toml").write_text(head + sources + flags + series + pairs, encoding="utf-8")
    return load_settings(folder / "monitor.toml")


def large_network(folder: Path, n_days: int) -> Settings:
    """A store of 500 pairs with windows and evidence of ``n_days`` invented days, written as nights would."""
    settings = large_settings(folder)
    rng = np.random.default_rng(1)
    first = FIRST_DAY
    days = np.datetime64(first) + np.arange(n_days)
    ends = days.astype("datetime64[s]").astype(np.int64) + 23 * 3600
    lags = np.array([-2, -1, 0, 1, 2])
    keys = [pair.key for pair in settings.pair]
    last = first + dt.timedelta(days=n_days - 1)
    run_at = dt.datetime.combine(last + dt.timedelta(days=1), dt.time(3, 40), dt.UTC)
    with open_store(settings.store_path) as store, store.transaction():
        store.ensure_series(settings.domain_series())
        night = store.begin_night(
            kind="nightly", as_of=last, now=run_at, settings_hash=settings.settings_hash, program_version="0"
        )
        n_rows = len(keys) * n_days
        rho = np.clip(0.7 + 0.1 * rng.standard_normal(5 * n_rows), -1, 1)
        store.write_windows(
            night,
            {
                "pair_key": np.repeat(np.array(keys, dtype=object), 5 * n_days),
                "window_end": np.tile(np.repeat(ends, 5), len(keys)),
                "lag": np.tile(lags, n_rows),
                "statistic": rho,
                "n_pairs": np.full(5 * n_rows, 160),
                "coverage": 0.95,
                "n_effective": 40.0,
                "p_value": 0.001,
                "low": rho - 0.1,
                "high": np.minimum(rho + 0.1, 1.0),
                "reason": "",
            },
        )
        score = 1.0 + 0.2 * rng.standard_normal(n_rows)
        scores = dict.fromkeys(("innovation", "shape", "course"), score)
        hours = dict.fromkeys(("innovation_hours", "shape_hours", "course_hours"), 24.0)
        recipes = np.array([pair.recipe_hash for _, pair in settings.pairs], dtype=object)
        store.write_evidence(
            night,
            {
                "pair_key": np.repeat(np.array(keys, dtype=object), n_days),
                "recipe_hash": np.repeat(recipes, n_days),
                "day": np.tile(days, len(keys)),
                **scores,
                **hours,
                **dict.fromkeys(LATER_COLUMNS, 0.0),
            },
        )
        store.finish_night(night, now=run_at, outcome="complete", steps=[], counts={})
    return settings


def hold_store(path: Path, held: object, release: object) -> None:
    """In a process of its own: keep the store open until told to let go."""
    with open_store(path):
        held.set()
        release.wait(120)
