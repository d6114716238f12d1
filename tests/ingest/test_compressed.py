"""Compressed files read as what is in them; what is cut, damaged or too large is refused whole and loudly."""

import gzip
import sys

import numpy as np
import pytest

from ingest.small_network import long_source, only_reason, wide_source

if sys.version_info >= (3, 14):
    from compression import zstd
else:
    from backports import zstd

TEXT = b"time,station,quantity,value\n" + b"".join(
    b"2024-03-%02d %02d:00,KEL,NO2,%d.5\n" % (1 + i // 24, i % 24, i % 7) for i in range(240)
)
PACKERS = {"gzip": gzip.compress, "zstd": zstd.compress}


@pytest.mark.parametrize("pack", PACKERS.values(), ids=PACKERS)
def test_a_compressed_file_holds_the_readings_of_the_plain_one(parse, pack):
    plain, packed = parse(TEXT, long_source()), parse(pack(TEXT), long_source())
    np.testing.assert_array_equal(packed.value, plain.value)
    np.testing.assert_array_equal(packed.hour_start, plain.hour_start)
    assert packed.rejected == ()
    assert packed.rows_read == 240
    assert packed.sha256 != plain.sha256  # of the bytes as they lay there
    assert packed.size_bytes == len(pack(TEXT))


@pytest.mark.parametrize("pack", PACKERS.values(), ids=PACKERS)
def test_members_that_follow_each_other_are_one_file(parse, pack):
    parsed = parse(pack(TEXT[:1000]) + pack(TEXT[1000:]), long_source())
    assert (parsed.rows_read, len(parsed.rejected)) == (240, 0)


def test_zeros_after_a_gzip_file_are_padding(parse):
    assert parse(gzip.compress(TEXT) + bytes(512), long_source()).rows_read == 240


@pytest.mark.parametrize("pack", PACKERS.values(), ids=PACKERS)
@pytest.mark.parametrize("share", [0.2, 0.5, 0.9, 0.999])
def test_a_cut_file_is_refused_whole(parse, pack, share):
    packed = pack(TEXT)
    parsed = parse(packed[: int(len(packed) * share)], long_source())
    assert len(parsed.value) == 0
    assert "Deliver the whole file again" in only_reason(parsed)


@pytest.mark.parametrize("pack", PACKERS.values(), ids=PACKERS)
def test_a_flipped_byte_or_rubbish_behind_the_end_is_never_passed_over(parse, pack):
    packed = bytearray(pack(TEXT))
    packed[len(packed) // 2] ^= 0xFF
    assert len(parse(bytes(packed), long_source()).rejected) >= 1
    assert "Nothing of it was read" in only_reason(parse(pack(TEXT) + b"rubbish", long_source()))


@pytest.mark.parametrize("pack", PACKERS.values(), ids=PACKERS)
def test_a_bomb_is_not_unpacked_beyond_the_limit(parse, pack):
    bomb = pack(b"0" * 30_000_000)
    assert len(bomb) < 40_000
    parsed = parse(bomb, long_source(size_limit_mb=20))
    assert "unpacks to more than 20 MB" in only_reason(parsed)
    assert "raise size_limit_mb" in only_reason(parsed)
    assert parsed.sha256 == ""  # not remembered: it is told every night until someone acts


def test_a_plain_file_beyond_the_limit_is_not_read(parse):
    data = TEXT + b"2024-03-20 00:00,KEL,NO2,1\n" * 40_000
    assert "has more than 1 MB" in only_reason(parse(data, long_source(size_limit_mb=1)))
    assert parse(data[:900_000], long_source(size_limit_mb=1)).rows_read > 30_000


def test_an_archive_and_a_file_compressed_twice_are_named_for_what_they_are(parse):
    assert "zip archive" in only_reason(parse(b"PK\x03\x04" + bytes(100), long_source()))
    assert "compressed twice" in only_reason(parse(gzip.compress(zstd.compress(TEXT)), wide_source()))
