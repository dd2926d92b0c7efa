import numpy as np
import pytest

from rtpaudit.audio.robbed_bits import robbed_bits_of
from rtpaudit.codecs import g711
from tests.audio.sounds import noise, packets, reader, rows_of, silence, sine, to_int16

ENCODE = {"PCMU": g711.encode_pcmu, "PCMA": g711.encode_pcma}


def rob(octets, phase, bits=(1, 1, 1, 1)):
    """A, B, C and D in the low bits of frames 6, 12, 18 and 24, counted from ``phase``."""
    robbed = octets.copy()
    for number, bit in enumerate(bits):
        place = slice((phase + 6 * number) % 24, None, 24)
        robbed[place] = robbed[place] & 0xFE | bit
    return robbed


def found(octets, law="PCMU", size=160):
    return robbed_bits_of(*packets(octets, size), law)


def test_frames_are_those_of_the_superframe():
    rows = {row["id"]: row["expected"] for row in rows_of("timing_slips.csv", "RBS")}
    assert [int(one) for one in rows["RBS"].split()] == [6, 12, 18, 24]
    assert [int(one) for one in rows["RBS-D4"].split()] == [6, 12]


@pytest.mark.parametrize("law", ENCODE)
@pytest.mark.parametrize("bits", [(1, 1, 1, 1), (0, 0, 0, 0), (1, 0, 1, 0), (0, 1, 1, 0)])
@pytest.mark.parametrize("phase", [0, 3, 5])
def test_robbed_bits_in_speech_are_found_whatever_they_say(law, bits, phase):
    bench = found(rob(ENCODE[law](reader()), phase, bits), law)
    assert bench.share_pct == 100
    assert bench.trunks == 1
    assert bench.passages >= 4
    assert bench.confidence_pct > 90


def test_two_trunks_out_of_step_rob_two_places():
    assert found(rob(rob(ENCODE["PCMU"](reader()), 0), 2)).trunks == 2


@pytest.mark.parametrize("size", [80, 160, 240])
def test_the_size_of_packets_does_not_matter(size):
    assert found(rob(ENCODE["PCMU"](reader()), 1), size=size) is not None


def test_lost_packets_do_not_move_the_frames():
    octets, start, length, ticks = packets(rob(ENCODE["PCMU"](reader()), 4))
    kept = np.random.default_rng(1).random(len(start)) > 0.1
    assert robbed_bits_of(octets, start[kept], length[kept], ticks[kept], "PCMU").share_pct == 100


@pytest.mark.parametrize("law", ENCODE)
@pytest.mark.parametrize(
    "sound",
    [
        reader(),
        noise(12, -30),
        noise(12, -60),
        silence(12),
        sine(1004, 12, -16),
        sine(1000, 12, -16),
        sine(2000 / 3, 12, -16),
    ],
    ids=["speech", "noise", "faint noise", "silence", "1004 Hz", "1 kHz", "period of 12 samples"],
)
def test_sound_with_all_its_bits_is_not_robbed(law, sound):
    assert found(ENCODE[law](to_int16(sound)), law) is None


def test_random_octets_and_other_codecs_are_not_robbed():
    octets = np.random.default_rng(1).integers(0, 256, 96000).astype(np.uint8)
    assert found(octets) is None
    assert found(rob(octets, 0), "G722") is None
    assert found(octets[:160]) is None
    assert found(octets[:0]) is None
