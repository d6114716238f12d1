"""Good files of every form, damaged at random, and what must hold for whatever becomes of them."""

from __future__ import annotations

import gzip
from pathlib import Path

import numpy as np

from ingest.small_network import NETWORK, long_source, wide_source
from reference.feed_layouts import Layout, write_long, write_sensorthings, write_wide
from reference.feed_mutations import mutate
from rhovane.ingest import describe_rejections, parse_file
from rhovane.model import ParsedFile
from rhovane.settings import SourceSettings
from rhovane.store import read_parquet

AUTUMN = 1_729_987_200 - 3 * 3600  # three hours before 2024-10-27 00:00 UTC: clocks go back in the file
STARTS = [AUTUMN + 3600 * i for i in range(12)]
WORDS_OF_A_REMEDY = 4  # fewest words in a reason that says what was found and what to do


def good_files(folder: Path) -> list[tuple[str, SourceSettings, bytes]]:
    """Form, settings and bytes of a good file of each form."""
    readings = [
        (s, q, t, float(t % 7)) for t in STARTS for s, q in (("KEL", "NO2"), ("KEL", "O3"), ("TIV", "NO2"))
    ]
    columns = {"no2": [float(i) for i in range(12)], "o3": [None, *range(11)], "temp": [0.5] * 12}
    civil = Layout("wide", clock="civil Europe/Berlin")
    streams = [((q, q), t, 1.5) for t in STARTS for q in ("NO2", "O3")]
    things = long_source(
        form="long sensorthings",
        columns={
            "time": "phenomenonTime",
            "station": "",
            "quantity": "Datastream",
            "value": "result",
            "issued": "resultTime",
        },
        series={"NO2": "KEL.NO2", "O3": "KEL.O3"},
    )
    flags = "time,station,quantity,value,q,issued\n" + "".join(
        f"2024-03-01 {h:02d}:00,KEL,NO2,{'<0.5' if h % 3 else 'ND'},{'AB'[h % 2]},2024-03-02 00:00\n"
        for h in range(24)
    )
    flagged = long_source(
        columns={"flag": "q", "issued": "issued"}, flags={"A": "pass", "B": "suspect"}, below_limit="half",
        not_detected=["ND"], limits={"KEL NO2": 1},
    )  # fmt: skip
    table = folder / "good.parquet"
    import duckdb

    with duckdb.connect() as connection:
        connection.execute(
            "copy (select timestamp '2024-03-01' + interval (i) hour as time, i * 1.5 as no2, i as o3, 1.0 as temp from range(24) t(i)) "
            f"to '{table}' (format parquet)"
        )
    return [
        ("long", long_source(missing=["-999"]), write_long(readings, Layout("long"))),
        ("wide", wide_source(clock="civil Europe/Berlin", missing=["-999"]), write_wide(STARTS, columns, civil)),
        ("flagged", flagged, flags.encode()),
        ("packed", long_source(), gzip.compress(write_long(readings, Layout("long")), mtime=0)),
        ("headers", wide_source(preamble_lines=1, header_rows=2, comment="#", series={"no2 u": "KEL.NO2"}), b"note\ntime,no2\n,u\n# c\n2024-03-01 00:00,1\n"),
        ("things", things, write_sensorthings(streams, "page")),
        ("arrays", things, write_sensorthings(streams, "data arrays")),
        ("parquet", wide_source(form="wide parquet"), table.read_bytes()),
    ]  # fmt: skip


def damaged_files(folder: Path, seeds: range) -> list[tuple[str, SourceSettings, bytes]]:
    """One damaged file a seed, of the forms in turn."""
    good = good_files(folder)
    out = []
    for seed in seeds:
        form, source, data = good[seed % len(good)]
        source = source.model_copy(update={"size_limit_mb": 4})
        out.append((f"{form}, seed {seed}", source, mutate(data, np.random.default_rng(seed))))
    return out


def parse_and_hold(folder: Path, told: str, source: SourceSettings, data: bytes) -> ParsedFile:
    """Parse a file and demand what must hold for any bytes whatever."""
    path = folder / "day.csv"
    path.write_bytes(data)
    parsed = parse_file(path, source, NETWORK, read_parquet=read_parquet)
    n_rejected = sum(row.line > 0 for row in parsed.rejected)
    assert parsed.rows_read == len(parsed.value) + n_rejected, told
    assert len(parsed.value) or parsed.rejected, f"{told}: nothing came out, and nothing was told"
    assert not np.isinf(parsed.value).any(), told
    assert len(set(zip(parsed.series_key.tolist(), parsed.hour_start.tolist(), strict=True))) == len(
        parsed.value
    ), told
    for row in parsed.rejected:
        assert len(row.reason.split()) >= WORDS_OF_A_REMEDY, f"{told}: {row}"
        assert len(row.reason) < 10_000, f"{told}: a reason of {len(row.reason)} characters"
        assert len(row.raw) < 20_000, f"{told}: raw text of {len(row.raw)} characters"
    "\n".join(describe_rejections(parsed)).encode("utf-8")  # can be printed and stored
    return parsed
