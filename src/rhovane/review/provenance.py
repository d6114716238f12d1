"""Which files and lines the readings behind an alert came from."""

from __future__ import annotations

import dataclasses
import datetime as dt
from dataclasses import dataclass
from typing import Any

from rhovane.model import Alert, RhovaneError
from rhovane.prepare import days_of
from rhovane.settings import Settings
from rhovane.store import Origin, Store


@dataclass(frozen=True)
class Provenance:
    """The origins of the readings of an alert's pair, from ``first`` to ``last`` day (standard time)."""

    first: dt.date
    last: dt.date
    origins: tuple[Origin, ...]

    def as_json(self) -> dict[str, Any]:
        """Plain values for ``--json``."""
        plain = dataclasses.asdict(self)
        for origin in plain["origins"]:
            for name in ("first_hour", "last_hour"):
                origin[name] = origin[name].isoformat()
        return {
            **plain,
            "first": self.first.isoformat(),
            "last": self.last.isoformat(),
            "origins": list(plain["origins"]),
        }


def provenance_of(settings: Settings, store: Store, alert: Alert) -> Provenance:
    """The origins of every reading before and after the onset, as they were when the alert was raised.

    Members, controls and wind direction alike; where the settings no longer name the pair, its members only.

    Raises
    ------
    RhovaneError
        The store does not know a series of the pair.
    """
    recipe = next((p for p in settings.pair if p.key == alert.pair_key), None)
    keys = (
        tuple(alert.pair_key.partition("[")[0].split("~")) if recipe is None else settings.series_of(recipe)
    )
    days = days_of(settings.network.standard_offset)
    first, last = alert.before.first_day, alert.after.last_day
    start, end = days.moment(days.start_of(first)), days.moment(days.end_of(last))
    origins = store.origins(keys, start, end, max_ingest_id=alert.data_version)
    if not origins:
        raise RhovaneError(
            f"alert {alert.id}: the store holds no readings of {', '.join(keys)} from {first} to {last} any more. "
            "Run `rhovane verify`, and compare with a backup."
        )
    return Provenance(first, last, tuple(origins))
