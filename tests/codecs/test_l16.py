import numpy as np
import pytest

from rtpaudit.codecs import codec_of, decode


def test_the_most_significant_octet_comes_first():
    """RFC 3551, 4.5.11."""
    octets = np.array([0x12, 0x34, 0xFF, 0xFE, 0x80, 0x00], np.uint8)
    samples, offsets = decode("L16", octets, np.array([0, 4, 6]))
    assert samples.tolist() == [0x1234, -2, -32768]
    assert samples.dtype == np.int16
    assert offsets.tolist() == [0, 2, 3]


def test_an_odd_octet_does_not_shift_the_packets_after_it():
    octets = np.array([0, 1, 99, 0, 2, 77, 0, 3], np.uint8)
    samples, offsets = decode("L16", octets, np.array([0, 3, 5, 6, 8]))
    assert samples.tolist() == [1, 2, 3]
    assert offsets.tolist() == [0, 1, 2, 2, 3]


@pytest.mark.parametrize("clock_rate_hz", [8000, 16000, 44100])
def test_it_is_sampled_at_its_clock(clock_rate_hz):
    assert codec_of("L16").sampling_rate(clock_rate_hz) == clock_rate_hz


def test_nothing_decodes_to_nothing():
    samples, offsets = decode("L16", np.empty(0, np.uint8), np.array([0]))
    assert len(samples) == 0
    assert offsets.tolist() == [0]


def test_eight_bits_have_an_offset():
    """RFC 3551, 4.5.10: the most negative signal is encoded as zero."""
    samples, offsets = decode("L8", np.array([0, 128, 255], np.uint8), np.array([0, 3]))
    assert samples.tolist() == [-32768, 0, 32512]
    assert offsets.tolist() == [0, 3]
