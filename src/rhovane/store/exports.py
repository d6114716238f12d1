"""Tables for other programs: CSV or Parquet, complete or not there at all."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from rhovane.model import RhovaneError
from rhovane.store.reading import AS_OF_READINGS
from rhovane.store.session import Session

_FORMATS = {".csv": "format csv, header true", ".parquet": "format parquet"}

_FLAG = """
case r.flag when 1 then 'pass' when 2 then 'not evaluated' when 3 then 'suspect' when 4 then 'fail'
    when 6 then 'below limit' when 9 then 'missing' end
"""
_STAGE = "case r.stage when 0 then 'not verified' when 1 then 'preliminary' when 2 then 'verified' end"

_READINGS = f"""
select s.key as series, s.unit, r.ts as hour_start_utc, r.value, {_FLAG} as flag, {_STAGE} as stage,
       r.result_time as result_time_utc, r.ingest_id
from ({AS_OF_READINGS}) r join series s on s.id = r.series_id order by s.key, r.ts
"""
_WINDOWS = """
select p.text as pair, w.window_end as window_end_utc, w.lag as lag_steps, w.statistic, w.n_pairs, w.coverage,
       w.n_effective, w.p_value, w.low, w.high, nullif(q.text, '') as reason, w.night_id
from window_result w join label p on p.id = w.pair join label q on q.id = w.reason
order by p.text, w.window_end, w.lag
"""
_ALERTS = """
select a.id as alert_id, a.pair_key as pair, a.day, a.night_id, e.seq as event, e.kind as event_kind,
       e.happened_at as event_at_utc, e.who, e.note, e.payload as event_payload, a.payload as alert_payload, e.hash
from alert a left join alert_event e on e.alert_id = a.id order by a.id, e.seq
"""


class Exports(Session):
    """Writing of whole tables to files; the name's ending (.csv, .parquet) decides the form.

    ``about`` stands before the header of a CSV file, in lines that begin with "# ", and under the key
    ``about`` in the metadata of a Parquet file. Times are naive UTC. A file that exists is replaced in one step; a failure leaves it as it was.
    """

    def export_readings(self, path: Path, *, max_ingest_id: int | None = None, about: str = "") -> int:
        """Write all readings, current or as after ingest ``max_ingest_id``; return the number of rows.

        As of an earlier ingest, value and flag are those of that time; stage and result time are those of
        the latest delivery that confirmed the value.
        """
        upto = (
            self.value("select coalesce(max(id), 0) from ingest") if max_ingest_id is None else max_ingest_id
        )
        return self._export(path, _READINGS, {"upto": int(upto)}, about)

    def export_windows(self, path: Path, *, about: str = "") -> int:
        """Write all current window results; return the number of rows."""
        return self._export(path, _WINDOWS, {}, about)

    def export_alerts(self, path: Path, *, about: str = "") -> int:
        """Write the alert log, one row an event; return the number of rows."""
        return self._export(path, _ALERTS, {}, about)

    def _export(self, path: Path, query: str, parameters: Mapping[str, Any], about: str) -> int:
        form = _FORMATS.get(path.suffix.lower())
        if form is None:
            raise RhovaneError(
                f"{path}: files of this kind are not written; name a file that ends in .csv or .parquet."
            )
        if not path.parent.is_dir():
            raise RhovaneError(f"{path.parent}: no such folder; create it, or name another file.")
        part = path.with_name(f".{path.name}.part")
        target = str(part).replace("'", "''")
        if about and path.suffix.lower() == ".parquet":
            form += f", kv_metadata {{about: '{about.replace(chr(39), chr(39) * 2)}'}}"
        try:
            count: int = self.rows(f"copy ({query}) to '{target}' ({form})", parameters)[0][0]
            if about and path.suffix.lower() == ".csv":
                table = part.read_bytes()
                part.write_bytes("".join(f"# {line}\n" for line in about.splitlines()).encode() + table)
            part.replace(path)
        except OSError as error:
            raise RhovaneError(f"{path} cannot be replaced ({error.strerror}); name another file.") from error
        finally:
            part.unlink(missing_ok=True)
        return count
