"""Where the first call of a new process spends its time when all code was compiled before.

Run: ``python tests/benchmarks/start_profile.py`` (about a minute). Each line is the best of several new processes,
above importing numpy. Writes ``start_profile.md`` beside itself.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
from pathlib import Path

TURNS = 9
GOAL_SECONDS = 0.4
CLOCK = "import time, numpy as np; start = time.perf_counter(); "
STOP = "; print(time.perf_counter() - start)"
# One kernel that does nothing, kept on disk by numba as ours are.
EMPTY_KERNEL = """
import numba

@numba.njit(cache=True, nogil=True)
def nothing(values):
    values[0] = 1.0
"""
CASES = {
    "import numba": "import numba",
    "the same, and one empty kernel called from numba's own cache": "import nothing; nothing.nothing(np.zeros(3))",
    "    of which scipy.linalg, which numba loads to look for BLAS (imported alone)": "import scipy.linalg",
    "import rhovane.stats and what a rolling correlation needs, nothing called": (
        "import rhovane.stats; rhovane.stats.rolling_rank_correlation"
    ),
    "first rolling_rank_correlation (900 rows, window 720, 2 lags)": (
        "from rhovane.stats import rolling_rank_correlation as r; x = np.arange(900.0); r(x, x, window=720, lags=(0, 1))"
    ),
    "first rank_correlation_test (900 rows)": (
        "from rhovane.stats import rank_correlation_test as r; x = np.arange(900.0); r(x, x % 7)"
    ),
}


def seconds(code: str, folder: str) -> float:
    """Return the seconds that ``code`` reports for itself in a new process."""
    run = subprocess.run(
        [sys.executable, "-c", f"import sys; sys.path.insert(0, {folder!r}); {CLOCK}{code}{STOP}"],
        check=True,
        capture_output=True,
        text=True,
    )
    return float(run.stdout)


def main() -> None:
    best = dict.fromkeys(CASES, float("inf"))
    with tempfile.TemporaryDirectory() as folder:
        Path(folder, "nothing.py").write_text(EMPTY_KERNEL, encoding="utf-8")
        for turn in range(TURNS + 1):  # the first turn compiles
            for case, code in CASES.items():
                spent = seconds(code, folder)
                if turn:
                    best[case] = min(best[case], spent)
    lines = [
        "# Where the first call spends its time",
        "",
        f"Written by `python tests/benchmarks/start_profile.py`: best of {TURNS} new processes, seconds above importing numpy; "
        f"all code compiled before. Aim for the first call: {GOAL_SECONDS} s.",
        "",
        "| what | s |",
        "|---|---|",
        *(f"| {case.strip()} | {spent:.2f} |" for case, spent in best.items()),
        "",
        "Numba takes this time to load itself and, at the first call of any kernel, everything that it can compile; it does so "
        "also when the machine code is on disk. What is ours is the difference between the first calls and the empty kernel. "
        "So the aim cannot be met with numba; the time is spent once a process, and a night is one process.",
    ]
    text = "\n".join(lines) + "\n"
    Path(__file__).with_name("start_profile.md").write_text(text, encoding="utf-8")
    print(text)


if __name__ == "__main__":
    main()
