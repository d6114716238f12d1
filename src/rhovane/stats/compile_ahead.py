"""Compile kernels before they are needed: ``python -m rhovane.stats.compile_ahead [windows] [scores] [watch]``.

Compiled code is kept on disk, so that this is needed once; several processes can do the parts side by side.
"""

from __future__ import annotations

import sys

import numpy as np

PARTS = ("windows", "scores", "watch")


def compile_part(part: str) -> None:
    """Compile the kernels of windows (correlation, significance), of daily scores, or of the watch.

    Raises
    ------
    ValueError
        There is no such part.
    """
    if part not in PARTS:
        raise ValueError(f"part={part!r} is not known; choose from {', '.join(PARTS)}.")
    rng = np.random.default_rng(1)
    n_days = 150
    x = rng.normal(size=24 * n_days)
    y = x + rng.normal(size=24 * n_days)
    match part:
        case "windows":
            from rhovane.stats import partial_window, rank_correlation_test, window_table

            window_table(x, y, window=672, end=[700], min_pairs=500)
            partial_window(x[:700], y[:700], rng.normal(size=(700, 2)), window=672)
            rank_correlation_test(x[:700], y[:700])
        case "scores":
            from rhovane.stats.daily_scores import daily_scores

            daily_scores(y, x, controls=rng.normal(size=(24 * n_days, 1)))
        case _:
            from rhovane.stats.daily_scores import DailyScores
            from rhovane.stats.watch import watch

            day, hours = np.arange(n_days, dtype=np.int64), np.full(n_days, 24.0)
            pairs = [
                DailyScores(day, s, hours, s, hours, rng.normal(size=(n_days, 5)))
                for s in rng.normal(size=(2, n_days))
            ]
            watch(pairs, members=[("A.a", "B.a"), ("B.a", "A.a")], false_alarms_per_year=1.0)


if __name__ == "__main__":
    for wanted in sys.argv[1:] or PARTS:
        compile_part(wanted)
