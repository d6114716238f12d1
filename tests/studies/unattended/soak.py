"""Two simulated years of nights in one process: memory, open files and the size of the store.

    python tests/studies/unattended/soak.py [NIGHTS] > tests/studies/unattended/soak.md

Some minutes. The small network of the tests, as the service runs it: feed, night, check, copy, delivery.
"""

from __future__ import annotations

import gc
import os
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[2]))

from flow.unattended_walk import network_in, walk

MB = 1_000_000
MONTH = 30  # nights between two looks


def resident_mb() -> float:
    """Memory of this process now."""
    pages = int(Path("/proc/self/statm").read_text().split()[1])
    return pages * os.sysconf("SC_PAGE_SIZE") / MB


def open_files() -> int:
    """File handles of this process now, without the one that counts them."""
    return len(os.listdir("/proc/self/fd")) - 1


def main(n_nights: int) -> None:
    """Print the result as Markdown."""
    rows: list[tuple[int, float, int, float, float]] = []
    with tempfile.TemporaryDirectory() as place:
        settings = network_in(Path(place))
        last = [time.monotonic()]

        def look(night: int) -> None:
            if (night + 1) % MONTH:
                return
            gc.collect()
            now = time.monotonic()
            size = settings.store_path.stat().st_size / MB
            rows.append((night + 1, resident_mb(), open_files(), size, (now - last[0]) / MONTH))
            last[0] = now
            print(f"{night + 1} nights", file=sys.stderr, flush=True)

        walk(settings, n_nights, after_night=look)
    nights, memory, files, size, _ = (np.array(column) for column in zip(*rows, strict=True))
    slope, level = np.polyfit(nights[1:], size[1:], 1)
    off = np.abs(slope * nights[1:] + level - size[1:]).max()
    print("# Two simulated years in one process\n")
    print(
        "Made by `python tests/studies/unattended/soak.py`; the program says what it does. Seconds depend on what else ran.\n"
    )
    print(
        "| nights | resident MB | open files | store MB | seconds a night |\n| --- | --- | --- | --- | --- |"
    )
    for n, resident, handles, mb, seconds in rows:
        print(f"| {n} | {resident:.0f} | {handles} | {mb:.1f} | {seconds:.2f} |")
    print(
        f"\nMemory grew by {memory.max() / memory[0] - 1:.1%} at most after the first month (aim: 10 %). Open files: {files.min()} to "
        f"{files.max()}. The store grows by {1000 * slope:.1f} kB a night; the largest departure from a straight line is "
        f"{off:.2f} MB of {size[-1]:.1f}."
    )


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 730)
