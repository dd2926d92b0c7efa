"""Rules about how sound was coded, on real speech that the test codes wrongly."""

import numpy as np
import pytest

from rtpaudit.codecs.g711 import PCMA_SAMPLES, encode_pcma
from tests.findings.made import found, only
from tests.findings.test_sound import RATE, encoded, heard, line, other, speech


def test_octets_of_the_other_law_are_a_fault() -> None:
    one = heard(line(speech(), encoded(speech(), payload_type=8)), other())[0]
    assert (one.finding, one.severity) == ("wrong-law", "fault")
    assert "A-law decoded as mu-law" in one.says


def test_a_low_bit_that_is_stuck_in_every_sixth_octet_is_signalling() -> None:
    octets = np.frombuffer(encoded(speech()), np.uint8).copy()
    octets[2::6] |= 1
    one = only("robbed-bits", heard(line(speech(), octets.tobytes()), other()))
    assert "1 trunk" in one.says


def test_every_seventh_is_not() -> None:
    octets = np.frombuffer(encoded(speech()), np.uint8).copy()
    octets[2::7] |= 1
    assert "robbed-bits" not in [one.finding for one in heard(line(speech(), octets.tobytes()), other())]


@pytest.mark.parametrize("slips", [0, 10])
def test_frames_that_are_said_twice_are_slips(slips) -> None:
    sound, size = speech(), RATE // 100
    cuts = [int((1 + k) * RATE + 37) for k in range(slips)]
    parts = np.split(sound, cuts)
    joined = [
        parts[0],
        *(np.concatenate([sound[cut - size : cut], part]) for cut, part in zip(cuts, parts[1:], strict=True)),
    ]
    findings = heard(line(np.concatenate(joined)[: len(sound)]), other())
    assert ("clock-slips" in [one.finding for one in findings]) is (slips > 0)


def test_speech_that_was_coded_by_the_other_law_before_is_told() -> None:
    first = PCMA_SAMPLES[encode_pcma(np.rint(speech() * 32768).astype(np.int16))] / 32768
    one = only("second-transcoding", heard(line(first), other()))
    assert "was coded as PCMA before" in one.says


def suppressed(cut_s: float):
    """Six talkspurts with pauses in which nothing is sent, each without its first moments."""
    sound, spurts = speech("desk"), []
    loud = np.convolve(sound**2, np.ones(160) / 160, "same") > 10 ** (-45 / 10)
    first = int(np.flatnonzero(loud)[0])
    # One phrase again and again: its beginning is known, so that it can be cut.
    begin = max(0, first - 160)
    for k in range(6):
        at = begin + int(cut_s * RATE)
        spurts.append((k * 2.0 + 0.1, sound[at : at + RATE]))
    ticks, payloads = [], []
    for at, part in spurts:
        octets = encoded(part)
        for k in range(len(octets) // 160):
            ticks.append(int(at * RATE) + 160 * k)
            payloads.append(octets[160 * k : 160 * (k + 1)])
    made = line(sound)
    made.count, made.marks = len(ticks), dict(enumerate(payloads))
    made.ticks, made.sent_ms = np.array(ticks), np.array(ticks) / 8.0
    return made


@pytest.mark.parametrize(("cut_s", "there"), [(0.0, False), (0.12, True)])
def test_talkspurts_that_begin_in_the_middle_are_clipped(cut_s, there) -> None:
    findings = found(suppressed(cut_s), other(), sound=True)
    assert ("speech-start-clipped" in [one.finding for one in findings]) is there


def key(seconds: float) -> np.ndarray:
    """The key 5 as tones (ITU-T Q.23, from memory)."""
    t = np.arange(int(seconds * RATE)) / RATE
    return 0.1 * (np.sin(2 * np.pi * 770 * t) + np.sin(2 * np.pi * 1336 * t))


def with_event(tone: bool):
    """A call in which a key goes as an event, with or without its tones before it."""
    sound = speech().copy()
    if tone:
        sound[200 * 160 - 640 : 200 * 160] = key(0.08)
    made = line(sound)
    kinds, ticks = np.zeros(made.count, int), np.arange(made.count) * 160
    for k in range(8):
        row = 200 + k
        kinds[row], ticks[row] = 101, 200 * 160
        made.marks[row] = bytes([5, (k >= 5) << 7 | 10]) + (160 * min(k + 1, 5)).to_bytes(2, "big")
    made.payload_type, made.ticks = kinds, ticks
    return made


@pytest.mark.parametrize("tone", [True, False])
def test_a_key_that_goes_twice_is_told(tone) -> None:
    findings = heard(with_event(tone), other())
    assert ("digits-twice" in [one.finding for one in findings]) is tone
    if tone:
        assert "1 of 1 digit" in only("digits-twice", findings).says
