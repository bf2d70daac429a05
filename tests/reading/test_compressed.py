"""Compressed text: every format alike, damage refused, expansion capped."""

import bz2
import gzip
import hashlib
import lzma
import zlib

import numpy as np
import pytest

from reweight.errors import DataFileError
from reweight.reading import FileLedger, compressed
from reweight.reading.text import TextTable
from reweight.study import Format

PACKERS = {"gzip": gzip.compress, "bzip2": bz2.compress, "xz": lzma.compress}
ROWS = np.random.default_rng(20261201).normal(size=20_000)
TEXT = "".join(f"{row!r}\n" for row in ROWS.tolist()).encode()


@pytest.fixture
def read(tmp_path):
    def numbers(raw, declared=None, ledger=None):
        path = tmp_path / "plain name.dat"
        path.write_bytes(raw)
        table = TextTable(path, declared or Format(), block_size=5000)
        return np.concatenate(list(table.chunks([0], ledger or FileLedger("x"))))[:, 0]

    return numbers


@pytest.mark.parametrize("packer", PACKERS)
def test_what_is_packed_is_told_by_its_bytes_and_read_bit_for_bit(read, packer):
    raw = PACKERS[packer](TEXT)
    ledger = FileLedger("x")
    np.testing.assert_array_equal(read(raw, ledger=ledger), ROWS)
    assert (ledger.rows_read, ledger.size) == (ROWS.size, len(raw))
    assert ledger.sha256 == hashlib.sha256(raw).hexdigest()


@pytest.mark.parametrize("packer", PACKERS)
def test_packed_parts_that_follow_each_other_are_one_text(read, packer):
    """Appending to a packed log packs the new part by itself."""
    middle = TEXT.index(b"\n", len(TEXT) // 2) + 1
    raw = PACKERS[packer](TEXT[:middle]) + PACKERS[packer](TEXT[middle:])
    np.testing.assert_array_equal(read(raw), ROWS)


@pytest.mark.parametrize("packer", PACKERS)
def test_encodings_are_seen_through_the_packing(read, packer):
    np.testing.assert_array_equal(read(PACKERS[packer]("E\r\n1\r\n2\r\n".encode("utf-16"))), [1, 2])


@pytest.mark.parametrize("packer", PACKERS)
@pytest.mark.parametrize("damage", ["cut", "flipped", "rest"])
def test_damage_is_refused(read, packer, damage):
    raw = PACKERS[packer](TEXT)
    flipped = bytearray(raw)
    flipped[len(raw) // 2] ^= 0xFF
    bad = {"cut": raw[:-20], "flipped": bytes(flipped), "rest": raw + b"xx"}[damage]
    with pytest.raises(
        DataFileError,
        match=r"compressed file must be (complete|undamaged).*Copy it again|must hold finite|NUL",
    ):
        read(bad)


@pytest.mark.parametrize("packer", PACKERS)
def test_a_file_that_unpacks_to_far_more_than_its_size_is_refused_unless_allowed(read, packer, monkeypatch):
    monkeypatch.setattr(compressed, "SMALL", 1 << 20)
    raw = PACKERS[packer](b"1\n" * (1 << 20))
    assert len(raw) * compressed.USUAL_EXPANSION < 1 << 20  # else nothing is tested
    with pytest.raises(
        DataFileError, match=r"must not unpack to many times its size.*raise largest_expansion"
    ):
        read(raw)
    assert read(raw, Format(largest_expansion=100_000)).size == 1 << 20


def test_small_files_may_be_packed_as_well_as_they_can(read):
    assert read(lzma.compress(b"1\n" * 500_000)).size == 500_000


def test_a_dictionary_larger_than_any_use_is_refused_before_it_is_allocated(read):
    huge = [{"id": lzma.FILTER_LZMA2, "preset": 0, "dict_size": 1 << 29}]
    packer = lzma.LZMACompressor(filters=[{**huge[0], "dict_size": 1 << 16}])
    raw = bytearray(packer.compress(b"1\n") + packer.flush())
    # The size stands in one byte of the first block's header (XZ file format 1.2, section 5.3.1): 34 means 512 MiB.
    header = raw[12:24]
    assert header[2:4] == bytes([0x21, 0x01])  # LZMA2 with one byte of properties
    header[4] = 34
    raw[12:24] = header[:8] + zlib.crc32(bytes(header[:8])).to_bytes(4, "little")
    with pytest.raises(DataFileError, match=r"compressed file must be undamaged; got: .*[Mm]emory"):
        read(bytes(raw))
