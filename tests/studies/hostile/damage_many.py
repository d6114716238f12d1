"""Parse many damaged feed files and count what became of them; tells every seed that broke a promise.

PYTHONPATH=src:demo_feed:tests python tests/studies/hostile/damage_many.py --first 0 --files 5000
"""

from __future__ import annotations

import argparse
import tempfile
import time
from collections import Counter
from pathlib import Path

from ingest.hostile import damaged_files, parse_and_hold

SLOW_S = 2.0  # seconds above which a file is named


def main() -> None:
    """Run the study and print its table."""
    arguments = argparse.ArgumentParser(description=__doc__)
    arguments.add_argument("--first", type=int, default=0)
    arguments.add_argument("--files", type=int, default=5000)
    given = arguments.parse_args()
    ends: Counter[tuple[str, str]] = Counter()
    broken: list[str] = []
    slowest = (0.0, "")
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        for told, source, data in damaged_files(folder, range(given.first, given.first + given.files)):
            began = time.process_time()
            try:
                parsed = parse_and_hold(folder, told, source, data)
            except Exception as error:  # noqa: BLE001  a study: every broken promise is listed
                broken.append(f"{told}: {type(error).__name__}: {str(error)[:300]}")
                end = "broke a promise"
            else:
                n = len(parsed.value)
                end = (
                    "all rows read"
                    if n == parsed.rows_read and n
                    else "some rows read"
                    if n
                    else "nothing read, told why"
                )
            ends[told.partition(",")[0], end] += 1
            slowest = max(slowest, (time.process_time() - began, told))
            if slowest[0] > SLOW_S and slowest[1] == told:
                broken.append(f"{told}: took {slowest[0]:.1f} s")
    forms, kinds = sorted({f for f, _ in ends}), sorted({e for _, e in ends})
    print("| form | " + " | ".join(kinds) + " |\n| --- |" + " ---: |" * len(kinds))
    for form in forms:
        print(f"| {form} | " + " | ".join(str(ends[form, kind]) for kind in kinds) + " |")
    print(f"\nslowest: {slowest[0]:.2f} s of processor time ({slowest[1]})")
    print("\n".join(broken) or "no promise broken")


if __name__ == "__main__":
    main()
