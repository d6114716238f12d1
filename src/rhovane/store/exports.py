"""Tables for other programs: CSV, Parquet or JSON, complete or not there at all."""

from __future__ import annotations

import json
import shutil
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from rhovane.model import RhovaneError
from rhovane.store.clock import naive_utc
from rhovane.store.nights import NightRecord
from rhovane.store.session import Session

_FORMATS = {
    ".csv": "format csv, header true",
    ".parquet": "format parquet",
    ".json": "format json, array true",
}

_FLAG = """
case r.flag when 1 then 'pass' when 2 then 'not evaluated' when 3 then 'suspect' when 4 then 'fail'
    when 9 then 'missing' end
"""
_STAGE = "case r.stage when 0 then 'not verified' when 1 then 'preliminary' when 2 then 'verified' end"

# Each row is a state of a reading, from the ingest that brought or confirmed it until before the one that ended it.
STATES_AS_OF = """
    select * from reading where confirmed_by <= $upto
    union all by name
    select * exclude superseded_by from reading_history where confirmed_by <= $upto and superseded_by > $upto
    union all by name
    select * exclude replaced_by from reading_confirmation where confirmed_by <= $upto and replaced_by > $upto
"""
_READINGS = f"""
select s.key as series, s.unit, r.ts as hour_start_utc, r.value, {_FLAG} as flag, {_STAGE} as stage,
       r.result_time as result_time_utc, r.ingest_id
from ({STATES_AS_OF}) r join series s on s.id = r.series_id order by s.key, r.ts
"""
_WINDOWS = """
select p.text as pair, w.window_end as window_end_utc, w.lag as lag_steps, w.statistic, w.n_pairs, w.coverage,
       w.n_effective, w.p_value, w.low, w.high, nullif(q.text, '') as reason, w.night_id
from (
    select * from window_result where $night is null or night_id <= $night
    union all by name
    select * exclude superseded_by from window_result_history where night_id <= $night and superseded_by > $night
) w join label p on p.id = w.pair join label q on q.id = w.reason
order by p.text, w.window_end, w.lag
"""
_ALERTS = """
select a.id as alert_id, a.pair_key as pair, a.day, a.night_id, e.seq as event, e.kind as event_kind,
       e.happened_at as event_at_utc, e.who, e.note, e.payload as event_payload, a.payload as alert_payload, e.hash
from alert a left join alert_event e on e.alert_id = a.id and ($until is null or e.happened_at <= $until)
where $night is null or a.night_id <= $night order by a.id, e.seq
"""


class Exports(Session):
    """Writing of whole tables to files; the name's ending (.csv, .parquet, .json) decides the form.

    ``about`` stands before the header of a CSV file, in lines that begin with "# ", under the key ``about`` in
    the metadata of a Parquet file, and under ``about`` beside the rows of a JSON file. Times are naive UTC. With
    ``night`` a file holds exactly what the store held when that night had finished. A file that exists is
    replaced in one step; a failure leaves it as it was.
    """

    def export_readings(
        self,
        path: Path,
        *,
        max_ingest_id: int | None = None,
        night: NightRecord | None = None,
        about: str = "",
    ) -> int:
        """Write all readings, current, or as after ingest ``max_ingest_id`` or a night; return the number of rows."""
        upto = max_ingest_id if night is None else night.data_version
        if upto is None:
            upto = self.value("select coalesce(max(id), 0) from ingest")
        return self._export("readings", path, _READINGS, {"upto": int(upto)}, about)

    def export_windows(self, path: Path, *, night: NightRecord | None = None, about: str = "") -> int:
        """Write all window results, current or of a night; return the number of rows."""
        return self._export("windows", path, _WINDOWS, {"night": night and night.night_id}, about)

    def export_alerts(self, path: Path, *, night: NightRecord | None = None, about: str = "") -> int:
        """Write the alert log, one row an event; return the number of rows.

        As of a night: the alerts raised up to it, with the events that had happened when it finished.
        """
        until = None if night is None or night.finished is None else naive_utc(night.finished)
        wanted = {"night": night and night.night_id, "until": until}
        return self._export("alerts", path, _ALERTS, wanted, about)

    def _export(self, what: str, path: Path, query: str, parameters: Mapping[str, Any], about: str) -> int:
        suffix = path.suffix.lower()
        form = _FORMATS.get(suffix)
        if form is None:
            raise RhovaneError(
                f"{path}: files of this kind are not written; name a file that ends in .csv, .parquet or .json."
            )
        if not path.parent.is_dir():
            raise RhovaneError(f"{path.parent}: no such folder; create it, or name another file.")
        part = path.with_name(f".{path.name}.part")
        target = str(part).replace("'", "''")
        if about and suffix == ".parquet":
            form += f", kv_metadata {{about: '{about.replace(chr(39), chr(39) * 2)}'}}"
        try:
            count: int = self.rows(f"copy ({query}) to '{target}' ({form})", parameters)[0][0]
            if about and suffix == ".csv":
                _wrap(part, "".join(f"# {line}\n" for line in about.splitlines()), "")
            elif suffix == ".json":
                _wrap(part, f'{{"about": {json.dumps(about, ensure_ascii=False)}, "{what}": ', "}\n")
            part.replace(path)
        except OSError as error:
            raise RhovaneError(f"{path} cannot be replaced ({error.strerror}); name another file.") from error
        finally:
            part.unlink(missing_ok=True)
        return count


def _wrap(path: Path, before: str, after: str) -> None:
    """Put text before and after what a file holds, without holding it in memory."""
    whole = path.with_name(path.name + ".whole")
    try:
        with path.open("rb") as table, whole.open("wb") as stream:
            stream.write(before.encode())
            shutil.copyfileobj(table, stream)
            stream.write(after.encode())
        whole.replace(path)
    finally:
        whole.unlink(missing_ok=True)
