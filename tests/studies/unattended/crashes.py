"""Kill the service at least a hundred times and compare where it ends with an undisturbed one.

    python tests/studies/unattended/crashes.py [KILLS] > tests/studies/unattended/crashes.md

Some minutes. Every walk is killed with SIGKILL after a random time; the next one goes on. When all nights are done
before all kills are, another network is begun with the next seed.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
import time
from collections import Counter
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[2]))

from flow import unattended_walk
from flow.test_unattended_crash import same_state, state_of
from flow.unattended_walk import network_in, walk

N_NIGHTS, LONGEST_S, FIRST_SEED = 10, 2.0, 100


def main(kills: int) -> None:
    """Print the result as Markdown."""
    begun = time.monotonic()
    stages: Counter[str] = Counter()
    n_walks = n_messages = n_alerts = n_repeats = 0
    with tempfile.TemporaryDirectory() as place:
        undisturbed = network_in(Path(place) / "undisturbed")
        walk(undisturbed, N_NIGHTS)
        expected = state_of(undisturbed)
        while stages.total() < kills:
            seed = FIRST_SEED + n_walks
            folder = Path(place) / f"killed-{seed}"
            arguments = [str(folder), str(N_NIGHTS), str(kills - stages.total()), str(seed), str(LONGEST_S)]
            done = subprocess.run(
                [sys.executable, unattended_walk.__file__, *arguments],
                stdout=subprocess.PIPE,
                text=True,
                check=True,
            )
            stages.update(done.stdout.split("\n")[:-1])
            found = state_of(network_in(folder))
            same_state(expected, found, seed)
            n_walks += 1
            n_messages, n_alerts = len(found["received"]), len(found["alerts"])
            n_repeats += len((folder / "out.jsonl").read_text("utf-8").splitlines()) - n_messages
    print("# The service killed at random moments\n")
    print("Made by `python tests/studies/unattended/crashes.py`; the program says what it does.\n")
    print(
        f"{stages.total()} kills over {n_walks} walks of {N_NIGHTS} nights, in {time.monotonic() - begun:.0f} s.\n"
    )
    print("| killed during | times |\n| --- | --- |")
    for stage, n in stages.most_common():
        print(f"| {stage} | {n} |")
    print(
        f"\nAfter the restart every walk ended with the windows, evidence, readings, alerts ({n_alerts}) with their events, nights, "
        f"outbox and received messages ({n_messages}) of the undisturbed one, a valid alert log and a whole copy. No id had "
        f"two contents; {n_repeats} messages or torn lines came a second time, with the same id."
    )


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 120)
