"""Time stamps against whole numbers of any size, and the search for blocks."""

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from rtpaudit.capture import pcapng_blocks as blocks
from rtpaudit.capture.pcapng_options import time_unit
from tests.craft import pcapng, pcapng_section, rtp_frame
from tests.naive import captures as naive

ANY_TICKS = st.one_of(
    st.integers(0, 2**64 - 1), st.integers(0, 2**32), st.integers(2**64 - 1000, 2**64 - 1), st.integers(2**62, 2**63)
)


@settings(max_examples=600)
@given(ticks=ANY_TICKS, resolution=st.integers(0, 255), offset_s=st.integers(-(2**33), 2**31))
def test_a_time_stamp_is_what_whole_numbers_make_of_it(ticks: int, resolution: int, offset_s: int) -> None:
    found = {9: bytes([resolution]), 14: offset_s.to_bytes(8, "little", signed=True)}
    ours = blocks.to_ns(ticks >> 32, ticks & 0xFFFFFFFF, *time_unit(found, big=False))
    theirs = naive.time_ns(ticks, resolution, offset_s)
    if resolution <= 127 and resolution > 27:
        # Below two nanoseconds all that such a clock can count; it is taken as none.
        assert abs(ours - max(offset_s * 10**9, 0)) <= 2
    elif theirs - offset_s * 10**9 <= blocks.LATEST_NS - 10**9:
        assert ours == min(max(theirs, 0), blocks.LATEST_NS)
    else:
        assert 0 <= ours <= blocks.LATEST_NS


def test_a_search_finds_the_next_section_whatever_its_byte_order() -> None:
    for big in (False, True):
        octets = np.frombuffer(b"\x0a" * 1001 + pcapng([rtp_frame(0)], big_endian=big), np.uint8)
        assert blocks.find_block(octets, 0, not big) == 1001


def test_a_search_wants_a_second_block_or_the_end() -> None:
    lone = b"\x55" * 7 + pcapng_section() + b"\x55" * 50
    assert blocks.find_block(np.frombuffer(lone, np.uint8), 0, False) == -1
    assert blocks.find_block(np.frombuffer(lone[:-50], np.uint8), 0, False) == 7
