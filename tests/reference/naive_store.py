"""What the store must hold, from the definition, one delivery at a time, in dictionaries.

The current reading of an hour is the delivery of greatest precedence among all that have come. A
delivery counts as new, revised or unchanged by comparison with the reading current before it came.
"""

from __future__ import annotations

from typing import NamedTuple


class NaiveDelivery(NamedTuple):
    """One reading of one file; ``value`` is None where the source says missing."""

    series: str
    hour: int
    value: float | None
    flag: int
    stage: int
    result_time: int
    line: int


class NaiveFile(NamedTuple):
    """One file: where it is from, its content hash in hexadecimal, its readings, its number of bad rows."""

    source: str
    sha256: str
    deliveries: list[NaiveDelivery]
    rejected: int


def precedence(delivery, sha256):
    """Greater means: counts more. Depends on what was delivered, not on when it arrived."""
    value = float("-inf") if delivery.value is None else delivery.value
    return (delivery.stage, delivery.result_time, sha256[:16], delivery.line, delivery.flag, value)


class NaiveStore:
    """Files go in one after the other; everything that ever came is remembered."""

    def __init__(self):
        self.ledger = []  # (source, sha256), in order of ingest number from 1
        self.counts = []  # (new, revised, unchanged) of each
        self.arrivals = {}  # (series, hour) -> list of (ingest number, delivery, sha256)
        self.losers = []  # (series, hour, value, flag) of every delivery that differed and lost

    def append(self, file):
        """Take in a file; its counts (new, revised, unchanged), or None for content known already."""
        if (file.source, file.sha256) in self.ledger:
            return None
        self.ledger.append((file.source, file.sha256))
        number = len(self.ledger)
        counts = [0, 0, 0]
        for delivery in file.deliveries:
            key = (delivery.series, delivery.hour)
            before = self.winner(key, number)
            self.arrivals.setdefault(key, []).append((number, delivery, file.sha256))
            if before is None:
                counts[0] += 1
            elif (before.value, before.flag) == (delivery.value, delivery.flag):
                counts[2] += 1
            else:
                counts[1] += 1
                loser = before if self.winner(key, number) is not before else delivery
                self.losers.append((*key, loser.value, loser.flag))
        self.counts.append(tuple(counts))
        return self.counts[-1]

    def winner(self, key, upto):
        """The current delivery of an hour after ingest ``upto``; None when none has come."""
        candidates = [(d, sha) for number, d, sha in self.arrivals.get(key, []) if number <= upto]
        if not candidates:
            return None
        return max(candidates, key=lambda c: precedence(*c))[0]

    def content(self, upto=None):
        """(series, hour) -> (value, flag, stage, result time), now or as after ingest ``upto``."""
        upto = len(self.ledger) if upto is None else upto
        out = {}
        for key in self.arrivals:
            best = self.winner(key, upto)
            if best is not None:
                out[key] = (best.value, best.flag, best.stage, best.result_time)
        return out

    def changed_since(self, ingest):
        """Series -> first hour whose value or flag was set by an ingest after the given one."""
        first = {}
        for key in self.arrivals:
            set_by = self._set_by(key)
            if set_by > ingest:
                first[key[0]] = min(first.get(key[0], key[1]), key[1])
        return first

    def _set_by(self, key):
        """The ingest from which on the current value and flag of an hour have stood without a break."""
        numbers = sorted({number for number, _, _ in self.arrivals[key]})
        now = self.winner(key, numbers[-1])
        since = None
        for number in numbers:
            then = self.winner(key, number)
            if (then.value, then.flag) != (now.value, now.flag):
                since = None
            elif since is None:
                since = number
        return since
