"""How fast the rank correlations are, against what an analyst would otherwise run: one table of ratios.

Run: ``python tests/benchmarks/rank_benchmark.py`` (about a minute). Competitors take turns in one process and the
best of several turns counts, in processor time of the thread (for two cores: time on the clock), so that other
work on the machine touches the ratios little.
"""

from __future__ import annotations

import subprocess
import sys
import time
import warnings
from collections.abc import Callable

import numba
import numpy as np
import pandas as pd
from scipy.stats import spearmanr

from rhovane.stats import correlate_network, rank_correlation_test, rolling_rank_correlation, window_scan
from rhovane.stats.compiled import run_tasks

HOURS = 8760
STEP = 24
LAGS = range(-24, 25)
TURNS = 7
GOALS = {168: 8.0, 720: 4.0, 2160: 1.8}
SPINS = 1_500_000  # turns of the bare loop, about as long as the correlations of one pair


def workload(n_series: int, seed: int = 1) -> np.ndarray:
    """Hourly series of slow processes, one decimal, 5 % random gaps and an outage each."""
    rng = np.random.default_rng(seed)
    common = np.cumsum(rng.normal(size=HOURS)) * 0.05
    values = (common[:, None] + rng.normal(size=(HOURS, n_series)) * 3).round(1)
    values[rng.random(values.shape) < 0.05] = np.nan
    for column in range(n_series):
        start = int(rng.integers(0, HOURS - 72))
        values[start : start + 72, column] = np.nan
    return values


def best_of_turns(clock: Callable[[], float], *competitors: Callable[[], object]) -> list[float]:
    """Return the best time of each competitor; they take turns."""
    times: list[list[float]] = [[] for _ in competitors]
    for competitor in competitors:
        competitor()
    for _ in range(TURNS):
        for record, competitor in zip(times, competitors, strict=True):
            start = clock()
            competitor()
            record.append(clock() - start)
    return [min(record) for record in times]


def line(what: str, found: str, goal: str) -> None:
    print(f"{what:<72} {found:>14} {goal:>12}")


def against_rolling_pearson() -> None:
    values = workload(2)
    x, y = pd.Series(values[:, 0]), pd.Series(values[:, 1])
    for window, goal in GOALS.items():
        fewest = int(np.ceil(0.75 * window))
        n_windows = (HOURS - window) // STEP + 1

        def pearson(window: int = window, fewest: int = fewest) -> object:
            return x.shift(3).rolling(window, min_periods=fewest).corr(y)

        def ranks(window: int = window) -> object:
            return correlate_network(values, [(0, 1)], window=window, step=STEP, lags=LAGS, threads=1)

        slow, fast = best_of_turns(time.thread_time, pearson, ranks)
        per_pearson, per_rank = slow / n_windows, fast / n_windows / len(LAGS)
        line(
            f"rolling Spearman, window {window}, against pandas' rolling Pearson "
            f"({1e6 * per_rank:.2f} : {1e6 * per_pearson:.2f} µs)",
            f"{per_pearson / per_rank:.1f} x",
            f">= {goal:g} x",
        )


def against_spearmanr() -> None:
    values = workload(2)
    x, y = pd.Series(values[:, 0]), pd.Series(values[:, 1])
    window, lags = 720, (0, 5, -24)
    table = rolling_rank_correlation(values[:, 0], values[:, 1], window=window, step=STEP, lags=lags)
    rows = range(0, len(table.end), 6)
    results: dict[tuple[int, int], float] = {}

    def sliced() -> None:
        for row in rows:
            stop = int(table.end[row]) + 1
            for column, lag in enumerate(lags):
                pairs = pd.DataFrame({"x": x.shift(max(lag, 0)), "y": y.shift(max(-lag, 0))})
                complete = pairs.iloc[stop - window : stop].dropna()
                enough = len(complete) >= table.min_pairs
                results[row, column] = spearmanr(complete.x, complete.y).statistic if enough else np.nan

    start = time.thread_time()
    sliced()
    per_slice = (time.thread_time() - start) / len(results)
    (fast,) = best_of_turns(
        time.thread_time,
        lambda: correlate_network(values, [(0, 1)], window=window, step=STEP, lags=LAGS, threads=1),
    )
    per_rank = fast / len(table.end) / len(LAGS)
    line("against pandas slices and spearmanr, window 720", f"{per_slice / per_rank:,.0f} x", ">= 1,000 x")
    expected = np.array([results[row, column] for row in rows for column in range(len(lags))])
    found = table.statistic[list(rows)].ravel()
    same = bool((np.isnan(expected) == np.isnan(found)).all())
    gap = float(np.nanmax(np.abs(expected - found)))
    line("    largest difference; not-a-number in the same places", f"{gap:.1e}; {same}", "<= 1e-12")


@numba.njit(nogil=True)
def spin(turns: int) -> int:
    """Return a number that takes ``turns`` dependent whole-number operations: one core, no memory."""
    state = np.int64(1)
    for _ in range(turns):
        state = (state * 6364136223846793005 + 1442695040888963407) ^ (state >> 17)
    return state


def cores_and_significance() -> None:
    values = workload(20)
    rng = np.random.default_rng(2)
    pairs = [tuple(int(i) for i in rng.choice(20, 2, replace=False)) for _ in range(60)]

    def network(threads: int, significance: bool = False) -> Callable[[], object]:
        return lambda: correlate_network(
            values[:4000], pairs, window=720, step=STEP, lags=LAGS, threads=threads, significance=significance
        )

    def bare_loops(threads: int) -> Callable[[], object]:
        return lambda: run_tasks([lambda: spin(SPINS)] * len(pairs), threads)

    # A loop that touches no memory tells what two threads are worth on this machine at this moment.
    one, two, loop_one, loop_two = best_of_turns(
        time.perf_counter, network(1), network(2), bare_loops(1), bare_loops(2)
    )
    line("60 pairs on two cores against one (time on the clock)", f"{one / two:.2f} x", ">= 1.7 x")
    line(
        "    a loop without memory, shared the same way, in turns with it", f"{loop_one / loop_two:.2f} x", ""
    )
    line("    reached of what that loop reaches", f"{100 * one / two * loop_two / loop_one:.0f} %", "")
    one, two = best_of_turns(time.process_time, network(1), network(2))
    line("    processor time that sharing the work adds", f"{100 * (two / one - 1):.0f} %", "")
    # What the calling thread does while the others work is waiting: its own processor time is not shared.
    (alone,) = best_of_turns(time.thread_time, network(2))
    busier = (two - alone) * (1 / 2 + 1 / len(pairs))  # at worst one pair more than the other
    line("    what two free cores would give, from processor times", f"{one / (alone + busier):.2f} x", "")
    plain, tested = best_of_turns(time.thread_time, network(1), network(1, True))
    line("significance of every correlation adds", f"{100 * (tested / plain - 1):.0f} %", "<= 50 %")


def single_windows() -> None:
    values = workload(2)[:800]
    x, y = values[:, 0], values[:, 1]
    scan, test = best_of_turns(
        time.thread_time,
        lambda: [window_scan(x, y, window=672, lags=range(-3, 4)) for _ in range(50)],
        lambda: [rank_correlation_test(x[-672:], y[-672:]) for _ in range(50)],
    )
    line(
        "window_scan, window 672, 7 lags, significance and intervals",
        f"{1000 * scan / 50:.2f} ms",
        "<= 1.5 ms",
    )
    line("rank_correlation_test, 672 rows", f"{1000 * test / 50:.2f} ms", "")


def start_up() -> None:
    def seconds(code: str) -> float:
        best = np.inf
        for _ in range(3):
            start = time.perf_counter()
            subprocess.run([sys.executable, "-c", code], check=True)
            best = min(best, time.perf_counter() - start)
        return float(best)

    bare = seconds("import numpy")
    call = (
        "import numpy as np; from rhovane.stats import rolling_rank_correlation as r; x = np.arange(900.); "
    )
    first = seconds(call + "r(x, x, window=720, lags=(0, 1))")
    line(
        "first call in a new process, code already compiled, above importing numpy",
        f"{first - bare:.2f} s",
        "<= .4 s",
    )


def main() -> None:
    warnings.simplefilter("ignore")
    line("what", "found", "goal")
    against_rolling_pearson()
    against_spearmanr()
    cores_and_significance()
    single_windows()
    start_up()


if __name__ == "__main__":
    main()
