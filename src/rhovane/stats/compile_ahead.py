"""Compile kernels before they are needed: ``python -m rhovane.stats.compile_ahead windows`` or ``changes``.

Compiled code is kept on disk, so that this is needed once; two processes can do the two parts side by side.
"""

from __future__ import annotations

import sys

import numpy as np

PARTS = ("windows", "changes")


def compile_part(part: str) -> None:
    """Compile the kernels of windows (correlation, significance) or of changes (daily scores, watch).

    Raises
    ------
    ValueError
        There is no such part.
    """
    if part not in PARTS:
        raise ValueError(f"part={part!r} is not known; choose from {', '.join(PARTS)}.")
    rng = np.random.default_rng(1)
    x = rng.normal(size=24 * 150)
    y = x + rng.normal(size=24 * 150)
    if part == "windows":
        from rhovane.stats import partial_window, rank_correlation_test, window_table

        window_table(x, y, window=672, end=[700], min_pairs=500)
        partial_window(x[:700], y[:700], rng.normal(size=(700, 2)), window=672)
        rank_correlation_test(x[:700], y[:700])
        return
    from rhovane.stats.daily_scores import daily_scores
    from rhovane.stats.watch import watch

    scores = [daily_scores(x, y), daily_scores(y, x, controls=rng.normal(size=(24 * 150, 1)))]
    watch(scores, members=[("A.a", "B.a"), ("B.a", "A.a")], false_alarms_per_year=1.0)


if __name__ == "__main__":
    for wanted in sys.argv[1:] or PARTS:
        compile_part(wanted)
