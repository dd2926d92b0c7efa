import numpy as np
import pytest

from rtpaudit.codecs import codec_of, decode, g722
from tests.published import published_rows


def test_it_decodes_as_two_other_decoders_do():
    """ITU-T G.722 (11/1988), mode 1: a coded sweep, then octets that no coder would send."""
    rows = published_rows("g722_decode")
    octets = np.array([int(row["octet"]) for row in rows], np.uint8)
    expected = [int(row[column]) for row in rows for column in ("first_sample", "second_sample")]
    assert g722.decode(octets).tolist() == expected


@pytest.mark.parametrize("seed", range(4))
def test_it_decodes_as_the_g722_package_does(seed):
    other = pytest.importorskip("G722")
    octets = np.random.default_rng(seed).integers(0, 256, 20_000, dtype=np.uint8)
    theirs = np.array(other.G722(16000, 64000).decode(octets.tobytes()))
    np.testing.assert_array_equal(g722.decode(octets), theirs)


def test_a_coded_tone_comes_back_as_that_tone():
    other = pytest.importorskip("G722")
    for hz in (300, 1004, 3400, 6000):
        tone = 8000 * np.sin(2 * np.pi * hz * np.arange(16_000) / 16_000)
        octets = np.frombuffer(other.G722(16000, 64000).encode(np.round(tone).astype(int).tolist()), np.uint8)
        spectrum = np.abs(np.fft.rfft(g722.decode(octets)[:16_000] * np.hanning(16_000)))
        assert np.argmax(spectrum) == hz


def test_the_clock_counts_half_of_the_samples():
    """RFC 3551, 4.5.2."""
    codec = codec_of("G722")
    assert codec.clock_rate_hz == 8000
    assert codec.sampling_rate(8000) == 16000
    samples, offsets = decode("G722", np.zeros(480, np.uint8), np.array([0, 160, 480]))
    assert offsets.tolist() == [0, 320, 960]
    assert len(samples) == codec.samples_in(480) == 960


def test_the_steps_of_the_scale_are_powers_of_two():
    """ITU-T G.722 (11/1988), 6.2.1.3: the base of the logarithm is two, in 32 steps an octave; from memory."""
    assert g722.POWERS[0] == 2048
    assert g722.POWERS[16] == round(2048 * 2**0.5)
    assert len(g722.LEVELS_6) == 64
    assert len(g722.LEVELS_4) == len(g722.LOW_STEP) == 16


def test_nothing_decodes_to_nothing():
    assert len(g722.decode(np.empty(0, np.uint8))) == 0
