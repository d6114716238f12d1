"""Messy files, judged by the program and by its row-by-row twin."""

import tempfile
from pathlib import Path

import numpy as np
import pytest

from ingest.small_network import NETWORK, long_source, read_parquet, wide_source
from reference.feed_layouts import Layout, label_of
from reference.naive_ingest import NaiveFeed, naive_ingest
from rhovane.ingest import parse_file

AUTUMN = 1_729_987_200  # 2024-10-27 00:00 UTC, an hour before Central European clocks go back
SPRING = 1_711_843_200
CLOCKS = ["UTC", "+05:30", "civil Europe/Berlin", "civil Europe/Berlin", "civil Australia/Lord_Howe"]
LORD_HOWE_AUTUMN = 1_712_415_600  # 2024-04-06 15:00 UTC: its clocks go back by half an hour
FLAGS = {"V": "pass", "?": "suspect", "M": "missing"}
FLAG_VALUES = {"V": 1, "?": 3, "M": 9}
STAGES = {"P": "preliminary", "R": "verified"}
MESSY_VALUES = [
    "1",
    "2",
    "3",
    "-999",
    "-999.0",
    "",
    " ",
    "x",
    "nan",
    "1e999",
    "1,5",
    "2.5",
    "1_0",
    "+4",
    " 5 ",
    '"6"',
    '"7',
]
MESSY_LABELS = ["2024-10-27 02:07", "2024-10-27 24:61", "", "noon", "2024-13-01 00:00", "2024-03-31 02:30"]


def messy_labels(rng, layout):
    """Labels around a clock change, with gaps, repeats, swaps and nonsense; sometimes newest first."""
    step = layout.step_minutes * 60
    around = LORD_HOWE_AUTUMN if "Howe" in layout.clock else rng.choice([AUTUMN, SPRING])
    first = int(around) - int(rng.integers(0, 4)) * 3600
    starts = [first + i * step for i in range(int(rng.integers(2, 7 * 3600 // step)))]
    labels = [label_of(start, layout) for start in starts]
    for _ in range(int(rng.integers(0, 3))):
        at = int(rng.integers(len(labels)))
        match rng.integers(4):
            case 0:
                del labels[at]
            case 1:
                labels.insert(at, labels[at])
            case 2:
                labels.insert(at, labels.pop())
            case _:
                labels[at] = str(rng.choice(MESSY_LABELS))
        labels = labels or ["noon"]
    return labels[::-1] if rng.random() < 0.2 else labels


def messy_lines(rng, lines, header):
    """A few lines damaged as a whole."""
    for _ in range(int(rng.integers(0, 3))):
        at = int(rng.integers(len(lines)))
        kind = rng.integers(7)
        if kind == 0:
            lines[at] = lines[at][: int(rng.integers(len(lines[at]) + 1))]
        elif kind == 1:
            lines[at] += ",1"
        elif kind == 2:
            lines.insert(at, "")
        elif kind == 3:
            lines[at] = "\0" + lines[at]
        elif kind == 4:
            lines.insert(at, header)
        elif kind == 5:
            lines.insert(at, lines[int(rng.integers(len(lines)))])
        else:
            lines[at] = lines[at].replace(",", ',"', 1)
    end = "\r\n" if rng.random() < 0.3 else "\n"
    return (header + end + end.join(lines) + (end if rng.random() < 0.7 else "")).encode()


def settings_of(rng):
    clock = str(rng.choice(CLOCKS))
    half_hours = "Howe" in clock or rng.random() < 0.4
    return Layout("", clock, str(rng.choice(["start", "end"])), 30 if half_hours else 60)


def twin_of(source, form, **more):
    return NaiveFeed(
        form=form,
        clock=source.clock,
        label=source.label,
        step_minutes=source.step_minutes,
        time_format=source.time_format,
        delimiter=source.delimiter,
        decimal=source.decimal,
        missing=source.missing,
        columns={k: v for k, v in source.columns.model_dump().items() if v},
        series=source.series,
        flags=FLAG_VALUES,
        stages={"P": 1, "R": 2},
        **more,
    )


def compare(data, source, twin, seed):
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "day.csv"
        path.write_bytes(data)
        parsed = parse_file(path, source, NETWORK, read_parquet=read_parquet)
    kept, rejected = naive_ingest(data, twin)
    told = f"seed {seed}:\n{data.decode()}"
    found = [(row.line, row.column) for row in parsed.rejected if row.line]
    assert sorted(found) == rejected, told
    assert parsed.rows_read == len(kept) + len(rejected), told
    columns = (parsed.series_key, parsed.hour_start, parsed.flag, parsed.stage, parsed.line)
    assert [tuple(row) for row in zip(*(c.tolist() for c in columns), strict=True)] == [
        (key, start, flag, stage, line) for key, start, _, flag, stage, line in kept
    ], told
    np.testing.assert_allclose(parsed.value, [k[2] for k in kept], rtol=1e-12, err_msg=told)
    return len(kept), len(rejected)


@pytest.mark.parametrize("block", range(4))
def test_messy_long_files(block):
    totals = np.zeros(2, dtype=int)
    for seed in range(block * 60, block * 60 + 60):
        rng = np.random.default_rng(seed)
        layout = settings_of(rng)
        status = rng.random() < 0.5
        units = rng.random() < 0.5
        extra = {"flag": "qc", "stage": "state"} if status else {}
        source = long_source(
            clock=layout.clock,
            label=layout.label,
            step="30min" if layout.step_minutes == 30 else "1h",
            columns={**extra, **({"unit": "unit"} if units else {})},
            flags=FLAGS if status else {},
            stages=STAGES if status else {},
            missing=[["-999"], ["-999", ""], ["x"], []][rng.integers(4)],
            units={"KEL NO2": "mg/m3"} if units else {},
        )
        factors = {"ug/m3": 1.0, "mg/m3": 1000.0} if units else {}
        twin = twin_of(source, "long", factors=factors, units={"KEL NO2": "mg/m3"} if units else {})
        codes = [("KEL", "NO2"), ("KEL", "O3"), ("TIV", "NO2"), ("KEL", "SO2"), ("UVE", "O3")]
        weights = [0.4, 0.25, 0.25, 0.05, 0.05]
        clean = rng.random() < 0.3
        lines = []
        for label in messy_labels(rng, layout):
            for index in rng.choice(5, size=rng.integers(1, 4), p=weights):
                value = str(rng.integers(0, 6)) if clean else str(rng.choice(MESSY_VALUES))
                fields = [label, *codes[index], value]
                fields += [str(rng.choice(["V", "?", "M", "Q"], p=[0.6, 0.2, 0.15, 0.05]))] if status else []
                fields += [str(rng.choice(["P", "R", ""], p=[0.5, 0.45, 0.05]))] if status else []
                fields += (
                    [str(rng.choice(["ug/m3", "mg/m3", "", "K"], p=[0.6, 0.2, 0.15, 0.05]))] if units else []
                )
                lines.append(",".join(fields))
        header = "time,station,quantity,value" + (",qc,state" if status else "") + (",unit" if units else "")
        totals += compare(messy_lines(rng, lines, header), source, twin, seed)
    assert totals.min() > 100  # both endings are well represented


@pytest.mark.parametrize("block", range(3))
def test_messy_wide_files(block):
    totals = np.zeros(2, dtype=int)
    for seed in range(1000 + block * 60, 1060 + block * 60):
        rng = np.random.default_rng(seed)
        layout = settings_of(rng)
        status = rng.random() < 0.4
        source = wide_source(
            clock=layout.clock,
            label=layout.label,
            step="30min" if layout.step_minutes == 30 else "1h",
            columns={"flag": "qc", "stage": "state"} if status else {},
            flags=FLAGS if status else {},
            stages=STAGES if status else {},
            missing=[["-999"], ["-999", ""], []][rng.integers(3)],
        )
        clean = rng.random() < 0.3
        lines = []
        for label in messy_labels(rng, layout):
            values = rng.integers(0, 6, 3).astype(str) if clean else rng.choice(MESSY_VALUES, 3)
            fields = [label, *map(str, values), "spare"]
            fields += [str(rng.choice(["V", "M", "Q"], p=[0.8, 0.15, 0.05]))] if status else []
            fields += [str(rng.choice(["P", "R"]))] if status else []
            lines.append(",".join(fields))
        header = "time,o3,no2,temp,remark" + (",qc,state" if status else "")
        totals += compare(messy_lines(rng, lines, header), source, twin_of(source, "wide"), seed)
    assert totals.min() > 100
