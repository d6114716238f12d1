"""Every day of a network's history judged in order: charts, incidents, returns and new baselines."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rhovane.stats.budget import threshold
from rhovane.stats.chart import MAX_DEVIATION, MIN_REFERENCE_DAYS, SHIFTS, gather_all, scales, standardised
from rhovane.stats.decisions import Decisions
from rhovane.stats.incident import Incident, Judgement, OpenIncident, onset_day, weighted_mean
from rhovane.stats.network import (
    CLASS_VARIANCE,
    HISTORY_DAYS,
    LEAST_OBSERVED_SHARE,
    MAX_HISTORY_DEVIATION,
    Structure,
    add_class_movement,
    directions,
    duplicate_nodes,
    filtered,
    learnt_covariance,
    references,
    unrest,
)
from rhovane.stats.onset import onset_range
from rhovane.stats.suspect import explain, lag_movement, slipped_node

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

PAIR_SHARE = 0.5
"""Share of the budget of false alarms that goes to pairs; the rest to series and stations."""
RELEARN_DAYS = 7
"""Days between two estimates of the covariance between pairs."""
NODE_REVIEW_DAYS = 28
"""Days between two reviews of which nodes are told apart from their pairs."""
UNREST_POWER = 2
"""Power of the unrest that deviations are divided by; 1 leaves a fifth more false alarms."""
UNREST_DAYS = 5
"""Days over which the unrest elsewhere in the network is averaged."""
SETTLING_DAYS = 7
"""Days after an alarm over which the suspect is judged anew each night, then fixed."""
MOVED = 2.0
"""Standard deviations by which a pair of the suspect must have moved since the onset to count as changed."""
MERGING_DAYS = 10
"""Days after an alarm within which crossings of related charts belong to it."""
MAX_KEPT_DEVIATION = 7.0
"""Deviations that explain an incident are kept inside this."""
RETURN_EVIDENCE = 5.0
"""Log likelihood ratio at which changed pairs count as back at their reference."""
MAX_RETURN_STEP = 2.5
"""One day adds at most this much to it."""
RETURN_OVERLAP_DAYS = 3
"""Days before a return is recognised that already belong to the reference again."""
REBASELINE_SKIP_DAYS = 7
"""Days from the onset on that stay out of the new reference after re-baselining."""
LEARNING, WATCHED, CHANGED, NOT_SCORED, NOT_JUDGED = 0, 1, 2, 3, 4


@dataclass(frozen=True)
class Spans:
    """Lengths in days, as in :func:`rhovane.stats.watch.watch`."""

    baseline_days: int
    guard_days: int
    rebaseline_days: int


@dataclass
class Night:
    """One day's view of the network, for its charts and for explaining an incident."""

    day: int
    mean: Floats
    sd: Floats
    deviation: Floats
    observed: Flags
    covariance: Floats
    direction: Floats


class Replay:
    """State of the watch while it walks over the days; :meth:`run` does all of them.

    ``score`` and ``weight`` have shape (n_pairs, n_days), ``lagged`` (n_pairs, n_days, 5); ``ready`` is the
    first day on which each pair is judged.
    """

    def __init__(
        self,
        score: Floats,
        weight: Floats,
        lagged: Floats,
        ready: NDArray[np.int64],
        structure: Structure,
        spans: Spans,
        false_alarms_per_year: float,
        decisions: Decisions,
    ) -> None:
        n_pairs, n_days = score.shape
        n_charts = len(structure.hypotheses)
        self.score, self.weight, self.lagged, self.ready = score, weight, lagged, ready
        self.structure, self.spans = structure, spans
        self.first = int(ready.min(initial=n_days))
        self.learnt: Floats | None = None
        self.usable = np.isfinite(score)
        self.frozen = np.full((3, n_pairs), np.nan)
        self.held = np.zeros(n_pairs, dtype=bool)
        self.statistic = np.zeros((n_charts, 2, len(SHIFTS)))
        self.counted, self.scaled = np.full((n_charts, n_days), np.nan), np.full((n_charts, n_days), np.nan)
        self.unrest = np.full((n_charts, n_days), np.nan)
        self.spoiled = np.zeros((n_charts, n_days), dtype=bool)
        self.kept = np.full((n_pairs, n_days), np.nan)
        self.values = np.full((n_charts, n_days), np.nan)
        self.limits = np.full((n_charts, n_days), np.nan)
        self.means, self.sds = np.full((n_pairs, n_days), np.nan), np.full((n_pairs, n_days), np.nan)
        self.state = np.zeros((n_pairs, n_days), dtype=np.int8)
        self.open: list[OpenIncident] = []
        self.closed: list[Incident] = []
        self.is_node = np.array([h.kind != "pair" for h in structure.hypotheses], dtype=bool)
        belongs = np.zeros((n_charts, n_pairs), dtype=bool)
        for h, one in enumerate(structure.hypotheses):
            belongs[h, one.pairs] = True
        self.belongs = belongs
        # Charts are related where one of their pairs shares a class or a series with one of the other's.
        self.touches = (belongs @ structure.related.astype(int)) > 0
        same_class = structure.classes[:, None] == structure.classes[None, :]
        self.same_class = (belongs @ same_class.astype(int)) > 0
        self.rate = false_alarms_per_year
        self.live = self.is_node.copy()
        self.limit = np.full(n_charts, np.inf)
        self._share_budget()
        self.known = decisions.known_on(-1, belongs, n_days)

    def run(self) -> tuple[Incident, ...]:
        """Judge every day; the incidents in order of their alarm day."""
        for day in range(self.score.shape[1]):
            self.judge(day)
        return self.incidents()

    def judge(self, day: int) -> None:
        """Judge one day; days must come in order."""
        decisions = self.known.decisions
        if decisions.turning(day):
            self.known = decisions.known_on(day, self.belongs, self.score.shape[1])
            # What a chart gathered from days that are set aside now is not held against the pair.
            self.statistic[self.belongs[:, decisions.reaching_back(day)].any(axis=1)] = 0.0
        for incident in [i for i in self.open if decisions.renewed(i.pairs, day)]:
            self._close(incident, day, "new baseline")
        night = self._night(day)
        self.means[:, day], self.sds[:, day] = night.mean, night.sd
        if day >= self.first:
            self._judge_charts(night, review=(day - self.first) % NODE_REVIEW_DAYS == 0)
            self.limits[:, day] = self.limit
            for incident in list(self.open):
                self._follow(incident, night)
            self._raise(night)
        self._record_state(night)

    def incidents(self) -> tuple[Incident, ...]:
        """All incidents so far, in order of their alarm day."""
        done = self.closed + [i.closed(None, None) for i in self.open]
        return tuple(sorted(done, key=lambda i: (i.alarm_day, i.pairs)))

    def _share_budget(self) -> None:
        """Thresholds: half the budget to pairs, half over the nodes that are told apart from them."""
        n_nodes = int(self.live.sum())
        pairs = PAIR_SHARE if n_nodes else 1.0
        length = self.spans.baseline_days
        self.limit[~self.is_node] = threshold(
            pairs * self.rate / max(self.structure.n_pairs, 1), baseline_days=length
        )
        if n_nodes:
            self.limit[self.is_node] = threshold(
                (1.0 - pairs) * self.rate / n_nodes, baseline_days=length, one_sided=True
            )

    def _night(self, day: int) -> Night:
        """References and deviations of one day."""
        spans = self.spans
        mean, sd, total, _ = references(
            self.score,
            self.weight,
            self.known.referable(self.usable),
            day,
            spans.guard_days,
            spans.baseline_days,
            MIN_REFERENCE_DAYS,
        )
        held = np.isfinite(self.frozen[0])
        mean, sd, total = (np.where(held, f, v) for f, v in zip(self.frozen, (mean, sd, total), strict=True))
        # A pair that still learns may yet choose another score: nothing of it may enter today's decisions.
        learning = day < self.ready
        mean, sd = np.where(learning, np.nan, mean), np.where(learning, np.nan, sd)
        deviation = (self.score[:, day] - mean) / (sd * np.sqrt(1.0 / self.weight[:, day] + 1.0 / total))
        deviation[self.known.unjudged[:, day]] = np.nan
        observed = np.isfinite(deviation) & ~self.held
        self.kept[observed, day] = np.clip(deviation[observed], -MAX_KEPT_DEVIATION, MAX_KEPT_DEVIATION)
        empty = np.empty((0, 0))
        return Night(day, mean, sd, deviation, observed, empty, empty)

    def _judge_charts(self, night: Night, *, review: bool) -> None:
        """Every hypothesis's deviation of the day, after network control, into its chart."""
        day, guard = night.day, self.spans.guard_days
        begin, end = max(0, day - guard - HISTORY_DAYS), max(0, day - guard)
        past = (self.score[:, begin:end] - night.mean[:, None]) / night.sd[:, None]
        past *= np.sqrt(self.weight[:, begin:end])
        known = self.known.referable(self.usable)[:, begin:end] & np.isfinite(past)
        past = np.clip(np.where(known, past, 0.0), -MAX_HISTORY_DEVIATION, MAX_HISTORY_DEVIATION)
        night.direction, movement = directions(
            self.is_node, self.belongs, night.mean, night.sd, self.weight[:, day]
        )
        if self.learnt is None or (day - self.first) % RELEARN_DAYS == 0:
            self.learnt = learnt_covariance(past, known, self.structure.related)
        night.covariance = self.learnt.copy()
        scored = np.isfinite(night.deviation)
        add_class_movement(night.covariance, self.structure.classes, scored, movement, CLASS_VARIANCE)
        seen = np.flatnonzero(night.observed)
        if not len(seen):
            return
        inverse = np.zeros_like(night.covariance)
        inverse[np.ix_(seen, seen)] = np.linalg.inv(night.covariance[np.ix_(seen, seen)])
        if review:
            self.live = self.is_node & ~duplicate_nodes(self.structure, night.direction, inverse)
            self._share_budget()
        size = np.abs(night.direction)
        full = size.sum(axis=1)
        judged = (full > 0) & (size[:, seen].sum(axis=1) >= LEAST_OBSERVED_SHARE * full)
        judged &= self.live | ~self.is_node
        plain = (self.score[:, day] - night.mean) / night.sd * np.sqrt(self.weight[:, day])
        today = np.where(night.observed, plain, 0.0)
        t, n = filtered(
            night.direction, inverse, today, past, known.astype(np.float64), self.spans.baseline_days
        )
        raw = standardised(t, n, judged)
        clean = np.clip(raw, -MAX_DEVIATION, MAX_DEVIATION)
        self.counted[:, day] = np.where(self.spoiled[:, day], np.nan, clean)
        z = raw / scales(self.known.outputs(self.counted), day, guard)
        self.unrest[:, day] = unrest(z[: self.structure.n_pairs], self.touches)
        z /= self._weather(day)
        self.scaled[:, day] = np.clip(z, -MAX_DEVIATION, MAX_DEVIATION)
        gather_all(self.scaled[:, day], np.nan_to_num(night.mean), self.statistic, self.values[:, day])
        self.values[np.isnan(self.scaled[:, day]), day] = np.nan

    def _weather(self, day: int) -> Floats:
        """What each chart's deviation is divided by: 1, or the squared unrest elsewhere in the last days."""
        recent = self.unrest[:, max(0, day - UNREST_DAYS + 1) : day + 1]
        n = np.isfinite(recent).sum(axis=1)
        mean = np.nansum(recent, axis=1) / np.maximum(n, 1)
        return np.maximum(np.where(n > 0, mean, 1.0), 1.0) ** UNREST_POWER

    def _raise(self, night: Night) -> None:
        """New incidents from charts above their limit; crossings related to a young one belong to it."""
        day = night.day
        above = self.values[:, day] - self.limit
        above[np.isnan(self.scaled[:, day])] = -np.inf
        for chart in np.argsort(-above, kind="stable"):
            if not above[chart] > 0.0:
                break
            pairs = self.structure.hypotheses[chart].pairs
            young = [
                i for i in self.open
                if (not i.settled or day - i.alarm_day <= MERGING_DAYS) and i.reach[pairs].any()
            ]  # fmt: skip
            if young:
                self.statistic[chart] = 0.0
                continue
            onset = onset_day(self.scaled[chart], day, self.first)
            value, limit = float(self.values[chart, day]), float(self.limit[chart])
            span = onset_range(self.scaled[chart], day, self.first)
            incident = OpenIncident(day, onset, int(chart), value, limit, span)
            incident.pairs = pairs
            incident.reach = self.touches[chart].copy()
            self._spoil(pairs, onset, day + SETTLING_DAYS)
            incident.first = incident.last = self._judged(incident, night)
            lead = incident.first.lead
            incident.before = float(night.mean[lead])
            rows = slice(onset, day + 1)
            incident.after = weighted_mean(self.score[lead, rows], self.weight[lead, rows])
            self.open.append(incident)
            self.statistic[self._reached(incident)] = 0.0

    def _spoil(self, pairs: NDArray[np.int64], first: int, last: int) -> None:
        """Keep the days of an incident out of the scales of all charts that share a class with it."""
        charts = self.same_class[:, pairs].any(axis=1)
        self.spoiled[charts, first : last + 1] = True
        self.counted[charts, first : last + 1] = np.nan

    def _reached(self, incident: OpenIncident) -> Flags:
        """Charts related to an incident."""
        return np.asarray((self.belongs & incident.reach).any(axis=1))

    def _judged(self, incident: OpenIncident, night: Night) -> Judgement:
        """Where to look first, from the days since the onset; the incident's pairs follow it."""
        rows = slice(incident.onset_day, night.day + 1)
        found = explain(
            self.structure,
            np.flatnonzero(self._reached(incident)),
            self.kept[:, rows],
            night.covariance,
            night.direction,
            night.mean,
        )
        chart = incident.chart if found is None else found.hypothesis
        lead = int(self.structure.hypotheses[chart].pairs[0]) if found is None else found.lead
        recent = slice(max(incident.onset_day, night.day - SETTLING_DAYS + 1), night.day + 1)
        lagged = np.where(self.known.unjudged[:, recent, None], np.nan, self.lagged[:, recent])
        mean = np.nan_to_num(night.mean)
        steps = lag_movement(self.structure, self.structure.hypotheses[chart], lagged, mean)
        if steps and not self.is_node[chart]:
            node = slipped_node(self.structure, lead, lagged, mean)
            if node is not None:
                chart = node
                steps = lag_movement(self.structure, self.structure.hypotheses[chart], lagged, mean) or steps
        one = self.structure.hypotheses[chart]
        incident.pairs, incident.lead = one.pairs, lead
        incident.reach |= self.touches[chart]
        kind = "timing" if steps else "strength"
        return Judgement(night.day, (one.kind, one.name), tuple(map(int, one.pairs)), lead, kind, steps)

    def _follow(self, incident: OpenIncident, night: Night) -> None:
        """One more day of an open incident: judged anew, settled, returned or re-baselined."""
        day = night.day
        if not incident.settled:
            incident.last = self._judged(incident, night)
            if day - incident.alarm_day >= SETTLING_DAYS:
                self._settle(incident, night)
            else:
                return
        pairs = incident.pairs
        mine = self.held[pairs]
        seen = mine & np.isfinite(night.deviation[pairs])
        if seen.sum() >= 0.5 * len(pairs):
            change = incident.change[seen]
            squares = max(float(change @ change), 1e-9)
            noise = night.covariance[np.ix_(pairs[seen], pairs[seen])]
            information = squares**2 / max(float(change @ noise @ change), 1e-9)
            today = np.clip(night.deviation[pairs[seen]], -MAX_HISTORY_DEVIATION, MAX_HISTORY_DEVIATION)
            remaining = float(change @ today) / squares
            step = (0.5 - remaining) * min(information, 1.0)
            incident.back = max(0.0, incident.back + float(np.clip(step, -MAX_RETURN_STEP, MAX_RETURN_STEP)))
        if incident.back > RETURN_EVIDENCE:
            self._close(incident, day, "returned")
        elif (  # days that are set aside cannot become the new normal
            day - incident.alarm_day >= self.spans.rebaseline_days and not self.known.barred[pairs, day].any()
        ):
            self._close(incident, day, "new baseline")

    def _settle(self, incident: OpenIncident, night: Night) -> None:
        """Fix the suspect; those of its pairs that moved keep their old reference and stop being judged."""
        incident.settled = True
        onset = incident.onset_day
        self._spoil(incident.pairs, onset, night.day)
        rows = self.kept[incident.pairs, onset : night.day + 1]
        n = np.maximum(np.isfinite(rows).sum(axis=1), 1)
        total = np.nansum(rows, axis=1)
        moved = np.abs(total) >= MOVED * np.sqrt(n)
        moved |= incident.pairs == incident.lead
        pairs = incident.pairs = incident.pairs[moved]
        incident.change = (total / n)[moved]
        before = references(
            self.score, self.weight, self.known.referable(self.usable), max(onset, self.first),
            self.spans.guard_days, self.spans.baseline_days, MIN_REFERENCE_DAYS,
        )  # fmt: skip
        free = pairs[~self.held[pairs]]
        self.frozen[:, free] = before[:3, free]
        self.held[free] = True
        self.usable[pairs, onset:] = False
        self.statistic[self._reached(incident)] = 0.0

    def _close(self, incident: OpenIncident, day: int, ending: str) -> None:
        """End an incident: its pairs are judged again, against the old reference or a new one."""
        self.open.remove(incident)
        self.closed.append(incident.closed(day, ending))
        others = {int(p) for i in self.open if i.settled for p in i.pairs}
        for p in incident.pairs:
            if p in others:
                continue
            self.frozen[:, p] = np.nan
            self.held[p] = False
            begin = (
                day - RETURN_OVERLAP_DAYS
                if ending == "returned"
                else incident.onset_day + REBASELINE_SKIP_DAYS
            )
            if ending != "returned":
                self.usable[p, :begin] = False
            self.usable[p, begin:] = np.isfinite(self.score[p, begin:])
        self.statistic[self.belongs[:, incident.pairs].any(axis=1)] = 0.0

    def _record_state(self, night: Night) -> None:
        """What each pair was in at the end of the day."""
        state = np.where(np.isfinite(night.deviation), WATCHED, NOT_SCORED)
        state[self.known.unjudged[:, night.day]] = NOT_JUDGED
        state[night.day < self.ready] = LEARNING
        for incident in self.open:
            state[incident.pairs] = CHANGED
        self.state[:, night.day] = state
