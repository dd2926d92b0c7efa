import numpy as np
import pytest

from rtpaudit.audio.payload import idle_of, repetition_of
from rtpaudit.codecs import g711
from tests.audio.sounds import noise, packets, reader, silence, sine, to_int16

ENCODE = {"PCMU": g711.encode_pcmu, "PCMA": g711.encode_pcma}


def repetition(octets, encoding="PCMU", size=160):
    return repetition_of(*packets(octets, size)[:3], encoding)


@pytest.mark.parametrize("law", ENCODE)
def test_a_payload_that_is_stuck_is_found_with_its_run(law):
    octets = ENCODE[law](reader())
    octets[160 * 100 : 160 * 130] = np.tile(octets[160 * 100 : 160 * 101], 30)
    found = repetition(octets, law)
    assert (found.packets, found.longest_run, found.first) == (29, 29, 100)
    assert found.share_pct == pytest.approx(100 * 29 / 600)
    assert found.confidence_pct == 99


def test_two_copies_in_a_row_may_be_chance():
    octets = ENCODE["PCMU"](reader())
    octets[160 * 101 : 160 * 103] = np.tile(octets[160 * 100 : 160 * 101], 2)
    assert repetition(octets) is None


@pytest.mark.parametrize("law", ENCODE)
@pytest.mark.parametrize(
    "sound",
    [reader(), silence(4), noise(4, -60), sine(1000, 4, -16), sine(400, 4, -20) + sine(450, 4, -20), sine(425, 4, -20)],
    ids=["speech", "silence", "noise", "1 kHz", "ringing in step with packets", "425 Hz"],
)
def test_sound_that_goes_on_is_no_repetition(law, sound):
    assert repetition(ENCODE[law](to_int16(sound)), law) is None


def test_short_payloads_of_other_codecs_may_say_silence():
    stuck = np.tile(np.arange(10, dtype=np.uint8), 100)
    assert repetition(stuck, "G729", 10) is None
    longer = np.tile(np.arange(40, dtype=np.uint8), 100)
    found = repetition(longer, "opus", 40)
    assert found.packets == 99
    assert found.confidence_pct <= 70


@pytest.mark.parametrize(("law", "own", "other"), [("PCMU", (0xFF, 0x7F), 0xD5), ("PCMA", (0xD5, 0x55), 0xFF)])
def test_idle_code_all_call_long_is_told_from_a_quiet_line(law, own, other):
    random = np.random.default_rng(1)
    idle = idle_of(*packets(random.choice(own, 16000).astype(np.uint8))[:3], law)
    assert (idle.packets, idle.share_pct, idle.whole_call) == (100, 100, True)
    foreign = idle_of(*packets(np.full(16000, other, np.uint8))[:3], law)
    assert (foreign.packets, foreign.foreign_packets, foreign.whole_call) == (0, 100, True)
    half = np.concatenate([ENCODE[law](reader())[:16000], np.full(16000, own[0], np.uint8)])
    some = idle_of(*packets(half)[:3], law)
    assert some.share_pct == pytest.approx(50, abs=15)
    assert not some.whole_call
    quiet = idle_of(*packets(ENCODE[law](to_int16(noise(4, -68))))[:3], law)
    assert (quiet.packets, quiet.whole_call) == (0, False)


def test_idle_code_is_a_matter_of_g711_and_of_a_second_at_least():
    octets = np.full(16000, 0xFF, np.uint8)
    assert idle_of(*packets(octets)[:3], "G722") is None
    assert idle_of(*packets(octets[:4000])[:3], "PCMU") is None


def test_payloads_that_leave_the_buffer_are_left_out():
    octets, start, length, _ = packets(np.full(16000, 0xFF, np.uint8))
    start[50], length[51] = 15990, 30000
    assert idle_of(octets, start, length, "PCMU").packets == 98
    assert repetition_of(octets, start - 8000, length, "PCMU") is None
    assert repetition_of(octets, start[:0], length[:0], "PCMU") is None
