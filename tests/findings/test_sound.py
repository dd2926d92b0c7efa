"""Sound rules on real speech that the test spoils, and on the same speech spoiled a little less."""

from functools import cache

import numpy as np
import pytest
import soundfile

from rtpaudit.codecs.g711 import encode_pcma, encode_pcmu
from rtpaudit.emodel.g107 import rating
from rtpaudit.findings.rule import Finding
from rtpaudit.planning import PlanningValues
from tests.findings.made import Line, back, found, only
from tests.findings.sip import Said
from tests.sources import ROOT

RATE = 8000


@cache
def speech(name: str = "reader", level_dbov: float = -26.0) -> np.ndarray:
    """Twelve seconds of a voice at an active level, over a faint noise."""
    samples = soundfile.read(ROOT / "fixtures" / "audio" / f"{name}.wav", dtype="float64")[0][: 12 * RATE]
    samples = samples - np.convolve(samples, np.ones(400) / 400, "same")
    active = samples[np.convolve(samples**2, np.ones(800) / 800, "same") > 10 ** (-45 / 10)]
    samples = samples * 10 ** (level_dbov / 20) / np.sqrt(np.mean(active**2))
    return samples + np.random.default_rng(1).normal(0, 10 ** (-66 / 20), len(samples))


def encoded(sound: np.ndarray, payload_type: int = 0) -> bytes:
    samples = np.clip(np.rint(sound * 32768), -32768, 32767).astype(np.int16)
    return (encode_pcmu if payload_type == 0 else encode_pcma)(samples).tobytes()


def line(sound: np.ndarray, octets: bytes | None = None, make=Line, **changes) -> Line:
    """A stream that says something."""
    octets = octets or encoded(sound, changes.get("payload_type", 0))
    marks = {k: octets[160 * k : 160 * (k + 1)] for k in range(len(octets) // 160)}
    return make(count=len(marks), marks=marks, **changes)


def other(sound: np.ndarray | None = None, **changes) -> Line:
    """The opposite direction: another voice, half a call later."""
    said = np.roll(speech("guest"), 6 * RATE) if sound is None else sound
    return line(said, make=back, **changes)


def heard(*parts) -> list[Finding]:
    return [one for one in found(*parts, sound=True) if one.severity != "remark"]


def test_two_people_who_talk_at_the_usual_level_have_no_finding() -> None:
    assert heard(line(speech()), other()) == []


@pytest.mark.parametrize(("gain_db", "expected"), [
    (-11, []),
    (-13.5, ["level-unequal"]),
    (-18, ["level-low", "level-unequal"]),
    (10, []),
    (15, ["level-high"]),
])  # fmt: skip
def test_level_counts_below_minus_42_and_above_minus_14_and_12_apart(gain_db, expected) -> None:
    """Both voices have -26 dBov; the method of P.56 is right to about half a decibel."""
    spoken = speech() * 10 ** (gain_db / 20)
    partner = speech("guest") * 10 ** (min(max(gain_db, 0), 5) / 20)
    findings = heard(line(np.tanh(spoken / 0.95) * 0.95), other(np.roll(partner, 6 * RATE)))
    assert sorted(one.finding for one in findings) == sorted(expected)


def test_peaks_at_the_extremes_of_the_code_are_clipped() -> None:
    one = heard(line(np.clip(speech() * 8, -1, 1)), other())[0]
    assert one.finding == "clipping"
    assert "extremes of the code" in one.says


@pytest.mark.parametrize(("noise_dbov", "there"), [(-50, False), (-42, True)])
def test_noise_in_the_pauses_counts_from_minus_48(noise_dbov, there) -> None:
    noisy = speech() + np.random.default_rng(2).normal(0, 10 ** (noise_dbov / 20), 12 * RATE)
    findings = heard(line(noisy), other())
    assert [one.finding for one in findings] == ["noise"] * there


def test_points_of_noise_are_those_of_circuit_noise() -> None:
    """dBm0 is 6.18 above dBov in mu-law, and flat noise counts 2.5 dB less when weighted; 130 ms from mouth to ear."""
    noisy = speech() + np.random.default_rng(2).normal(0, 10 ** (-46 / 20), 12 * RATE)
    one = only("noise", heard(line(noisy), other()))
    Nc = one.measured + 6.18 - 2.5
    expected = float(rating(Ta=130).R - rating(PlanningValues(Nc=Nc), Ta=130).R)
    assert one.r_points == pytest.approx(expected, abs=0.1)


@pytest.mark.parametrize(("level_dbov", "there"), [(-60, False), (-48, True)])
def test_hum_counts_from_minus_55(level_dbov, there) -> None:
    t = np.arange(12 * RATE) / RATE
    wave = sum(np.sin(2 * np.pi * 50 * k * t) / k for k in (1, 2, 3))
    hum = wave * 10 ** (level_dbov / 20) / np.sqrt(np.mean(wave**2))
    findings = heard(line(speech() + hum), other())
    assert [one.finding for one in findings] == ["hum"] * there
    if there:
        assert "multiples of 50 Hz" in findings[0].says


def test_a_stream_of_silence_is_dead_air() -> None:
    one = heard(line(np.zeros(12 * RATE)), other())[0]
    assert (one.finding, one.severity) == ("dead-air", "fault")
    assert "callee heard nothing" in one.says


def test_a_room_in_which_nobody_speaks_is_not() -> None:
    room = np.random.default_rng(3).normal(0, 10 ** (-58 / 20), 12 * RATE)
    assert "dead-air" not in [one.finding for one in heard(line(room), other())]


def silent(sound: np.ndarray, seconds: float) -> np.ndarray:
    """The same with nothing in it from 4 s on."""
    made = sound.copy()
    made[4 * RATE : int((4 + seconds) * RATE)] = 0
    return made


@pytest.mark.parametrize(("seconds", "there"), [(4.5, False), (6.5, True)])
def test_a_line_that_goes_dead_both_ways_counts_from_five_seconds(seconds, there) -> None:
    findings = heard(line(silent(speech(), seconds)), other(silent(np.roll(speech("guest"), 6 * RATE), seconds)))
    assert [one.finding for one in findings] == ["dead-air"] * there


@pytest.mark.parametrize(("changes", "there"), [
    ([], True),
    ([(4500.0, "sendonly"), (9500.0, "sendrecv")], False),
    ([(4500.0, "sendonly"), (5000.0, "sendrecv")], True),
])  # fmt: skip
def test_silence_on_hold_is_no_dead_line(changes, there) -> None:
    said = Said(changes=changes, bye_ms=16_100.0).frames()
    both = line(silent(speech(), 6.5)), other(silent(np.roll(speech("guest"), 6 * RATE), 6.5))
    assert ("dead-air" in [one.finding for one in heard(said, *both)]) is there


def test_one_side_that_goes_mute_is_a_concern() -> None:
    one = heard(line(silent(speech(), 6.5)), other())[0]
    assert (one.finding, one.severity) == ("dead-air", "concern")


def test_own_speech_that_comes_back_is_echo_of_who_spoke() -> None:
    """24 s: the caller speaks first and hears itself; then the callee answers."""
    spoken = np.concatenate([speech(), speech("desk")[: 4 * RATE], np.zeros(8 * RATE)])
    answer = np.concatenate([np.zeros(16 * RATE), speech("guest")[: 8 * RATE]])
    late = np.concatenate([np.zeros(int(0.12 * RATE)), spoken])[: len(spoken)] * 10 ** (-14 / 20)
    room = np.random.default_rng(5).normal(0, 10 ** (-66 / 20), len(spoken))
    one = only("echo", heard(line(spoken + room), other(answer + late + room[::-1])))
    assert one.severity == "fault"
    assert one.measured == pytest.approx(120, abs=3)
    assert one.says.startswith("The caller hears itself")
