"""Damages good feed files in the ways that disks, editors, loggers and ill will do; imports nothing from ``src``."""

from __future__ import annotations

import gzip
import json

import numpy as np

TEXTS = [
    b"\0", b"\0" * 4000, b"\xff\xfe", b"\xef\xbb\xbf", b"\xc3", b"\xe2\x80\xae", b'"', b'""', b"'", b",", b";", b"\t", b"\r",
    b"\n", b"\r\n\r\n", b"\x1f\x8b", b"\x28\xb5\x2f\xfd", b"PK\x03\x04", b"PAR1", b"=1+1", b"=cmd|' /C calc'!A0", b"+1", b"@SUM(A1)",
    b"-", b"--1", b"1e999", b"-1e999", b"1e-999", b"nan", b"inf", b"-Infinity", b"0x10", b"1_000", b"1,5", b"1.5.5", b"<0.5", b"<",
    b"\xd9\xa1", b"../../etc/passwd", b"{}", b"[]", b"null", b"true", b'{"result":', b"[" * 500, b"{" * 500, b"9" * 400, b"0000-01-01 00:00",
    b"9999-12-31 23:00", b"10000-01-01 00:00", b"1969-12-31 23:00", b"0001-01-01 00:00", b"2024-02-30 00:00", b"2024-03-31 02:30",
    b"-2024-01-01", b"2024-01-01T00:00:00+99:99", b"2024-01-01T00:00:00+14:00", b"x" * 200_000, b"$(reboot)", b"%s%n", b"\\", b"\x1b[2J",
]  # fmt: skip


def mutate(data: bytes, rng: np.random.Generator) -> bytes:
    """A file with one to four kinds of damage, each at a random place."""
    for _ in range(int(rng.integers(1, 5))):
        data = DAMAGES[int(rng.integers(len(DAMAGES)))](data, rng)
    return data


def _at(data: bytes, rng: np.random.Generator) -> int:
    return int(rng.integers(len(data) + 1))


def _insert(data: bytes, rng: np.random.Generator) -> bytes:
    at = _at(data, rng)
    return data[:at] + TEXTS[int(rng.integers(len(TEXTS)))] + data[at:]


def _replace_cell(data: bytes, rng: np.random.Generator) -> bytes:
    cells = data.split(b",")
    cells[int(rng.integers(len(cells)))] = TEXTS[int(rng.integers(len(TEXTS)))]
    return b",".join(cells)


def _cut(data: bytes, rng: np.random.Generator) -> bytes:
    return data[: _at(data, rng)]


def _flip(data: bytes, rng: np.random.Generator) -> bytes:
    changed = bytearray(data)
    for at in rng.integers(0, max(len(data), 1), int(rng.integers(1, 20))):
        if at < len(changed):
            changed[at] ^= 1 << int(rng.integers(8))
    return bytes(changed)


def _shuffle_lines(data: bytes, rng: np.random.Generator) -> bytes:
    lines = data.split(b"\n")
    return b"\n".join(lines[i] for i in rng.permutation(len(lines)))


def _repeat_part(data: bytes, rng: np.random.Generator) -> bytes:
    a, b = sorted((_at(data, rng), _at(data, rng)))
    return data[:b] + data[a:b] * int(rng.integers(1, 4)) + data[b:]


def _drop_part(data: bytes, rng: np.random.Generator) -> bytes:
    a, b = sorted((_at(data, rng), _at(data, rng)))
    return data[:a] + data[b:]


def _recode(data: bytes, rng: np.random.Generator) -> bytes:
    codec = ["utf-16", "utf-16-be", "utf-32", "cp1252", "utf-7"][int(rng.integers(5))]
    return data.decode("latin-1").encode(codec, "replace")


def _compress(data: bytes, rng: np.random.Generator) -> bytes:
    packed = gzip.compress(data, mtime=0)
    return packed[: _at(packed, rng)] if rng.random() < 0.3 else packed


def _widen(data: bytes, rng: np.random.Generator) -> bytes:
    header, _, rest = data.partition(b"\n")
    n = int(rng.choice([10, 1000, 50_000]))
    return header + b"," + b",".join(b"c%d" % i for i in range(n)) + b"\n" + rest


def _lengthen(data: bytes, rng: np.random.Generator) -> bytes:
    return data + bytes([int(rng.choice(list(b'x",\n\0[')))]) * int(rng.choice([1000, 200_000]))


def _nest(data: bytes, rng: np.random.Generator) -> bytes:
    depth = int(rng.choice([3, 20, 3000, 200_000]))
    return b"[" * depth + data + (b"]" * depth if rng.random() < 0.7 else b"")


def _edit_json(data: bytes, rng: np.random.Generator) -> bytes:
    """Another value in some member of a JSON document; other bytes are left as they are."""
    try:
        document = json.loads(data)
    except (ValueError, RecursionError):
        return data
    odd = [
        None,
        True,
        -1,
        1e308,
        "",
        [],
        {},
        [[]],
        {"code": {}},
        "NaN",
        10**30,
        "2024-01-01T00:00:00Z/..",
        {"@iot.id": []},
    ]
    here = document
    while isinstance(here, dict | list) and here:
        key = (
            list(here)[int(rng.integers(len(here)))]
            if isinstance(here, dict)
            else int(rng.integers(len(here)))
        )
        if not isinstance(here[key], dict | list) or rng.random() < 0.3:
            here[key] = odd[int(rng.integers(len(odd)))]
            break
        here = here[key]
    return json.dumps(document).encode()


DAMAGES = (
    _insert, _insert, _replace_cell, _replace_cell, _cut, _flip, _shuffle_lines, _repeat_part, _drop_part, _recode, _compress, _widen,
    _lengthen, _nest, _edit_json, _edit_json,
)  # fmt: skip
