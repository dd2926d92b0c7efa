"""gzip, xz and zstd, whole, in several members, cut and damaged."""

import gzip
import io
import lzma
import random
import zlib
from collections.abc import Callable

import pyarrow
import pytest

from rtpaudit.capture.compressed import PIECE, Plain, compression


def zstd(octets: bytes) -> bytes:
    return bytes(pyarrow.compress(octets, codec="zstd", asbytes=True))


PACKERS: dict[str, Callable[[bytes], bytes]] = {"gzip": gzip.compress, "xz": lzma.compress, "zstd": zstd}
EACH = pytest.mark.parametrize("name", PACKERS)
CHANCE = random.Random(1)
# What packs badly, what packs well, and what packs badly again.
PLAIN = CHANCE.randbytes(200_000) + b"abcdefghi" * 300_000 + CHANCE.randbytes(50_000)


def unpack(name: str, packed: bytes) -> tuple[bytes, str]:
    plain = Plain(io.BytesIO(packed), name)
    pieces = list(plain)
    assert all(0 < len(piece) <= PIECE for piece in pieces)
    return b"".join(pieces), plain.fault


@EACH
def test_a_whole_file_comes_out_whole(name: str) -> None:
    packed = PACKERS[name](PLAIN)
    assert compression(packed) == name
    assert unpack(name, packed) == (PLAIN, "")


@EACH
def test_members_in_a_row_count_as_one(name: str) -> None:
    assert unpack(name, PACKERS[name](PLAIN) + PACKERS[name](b"more")) == (PLAIN + b"more", "")


@EACH
def test_nothing_packed_is_nothing(name: str) -> None:
    assert unpack(name, PACKERS[name](b"")) == (b"", "")


def decodable(name: str, cut: bytes) -> int:
    """Octets that the libraries make of a cut file in one go."""
    decoder = zlib.decompressobj(31) if name == "gzip" else lzma.LZMADecompressor()
    return len(decoder.decompress(cut))


@pytest.mark.parametrize("name", ["gzip", "xz"])
@pytest.mark.parametrize("share", [0.0, 0.3, 0.8, 0.99])
def test_a_cut_file_gives_all_that_was_in_it(name: str, share: float) -> None:
    packed = PACKERS[name](PLAIN)
    cut = packed[: int(len(packed) * share) + 2]
    plain, fault = unpack(name, cut)
    assert plain == PLAIN[: decodable(name, cut)]
    assert fault


@pytest.mark.parametrize("cut", [2, 100_000, 250_000, -1])
def test_a_cut_zstd_file_gives_all_whole_blocks(cut: int) -> None:
    plain, fault = unpack("zstd", zstd(PLAIN)[:cut])
    assert plain == PLAIN[: len(plain)]
    # A block holds at most 128 KiB (RFC 8878, 3.1.1.2, from memory); what does not pack is as long packed as plain.
    assert len(plain) > min(cut if cut > 0 else len(PLAIN), len(PLAIN)) - 2 * 131_072
    assert fault


@EACH
def test_wrong_octets_in_the_middle_keep_what_came_before(name: str) -> None:
    packed = bytearray(PACKERS[name](PLAIN))
    packed[150_000:150_100] = CHANCE.randbytes(100)
    plain, _ = unpack(name, bytes(packed))
    # The octets before the fault do not pack, so that there are as many of them in as out.
    assert plain[:149_000] == PLAIN[:149_000]


@EACH
def test_octets_behind_the_end_are_said_to_be_strange(name: str) -> None:
    plain, fault = unpack(name, PACKERS[name](PLAIN) + b"strange!")
    assert plain == PLAIN
    # liblzma passes over what is no stream behind a whole one.
    assert bool(fault) == (name != "xz")


def test_a_zstd_file_may_begin_with_a_frame_that_holds_no_data() -> None:
    packed = b"\x50\x2a\x4d\x18\x04\x00\x00\x00abcd" + zstd(PLAIN)
    assert compression(packed) == "zstd"
    assert unpack("zstd", packed) == (PLAIN, "")


@EACH
def test_noise_behind_the_magic_number_is_a_fault(name: str) -> None:
    packed = PACKERS[name](b"")[:4] + CHANCE.randbytes(5000)
    assert unpack(name, packed)[1]


def test_other_octets_are_not_compressed() -> None:
    assert compression(b"") == ""
    assert compression(b"\xd4\xc3\xb2\xa1") == ""
