import numpy as np
import pytest

from rtpaudit.audio.progress import progress_tones
from rtpaudit.audio.scan import scan
from rtpaudit.audio.tones import tone_bursts
from tests.audio.sounds import RATE, noise, reader, silence, sine, through, to_int16


def pair(low, high, seconds):
    return sine(low, seconds, -22) + sine(high, seconds, -22)


def again(burst, pause, times):
    return np.concatenate([np.concatenate([burst, silence(pause)])] * times)


def named(sound, floor=-70, law="PCMU"):
    samples = through(law, to_int16(sound + noise(len(sound) / RATE, floor)))
    return progress_tones(tone_bursts(samples, scan(samples, RATE)))


CADENCES = {
    "dial, North America": (pair(350, 440, 3), "dial", 3.0, None),
    "ringing, North America": (again(pair(440, 480, 2), 4, 2), "ringing", 2.0, 4.0),
    "busy, North America": (again(pair(480, 620, 0.5), 0.5, 4), "busy", 0.5, 0.5),
    "congestion, North America": (again(pair(480, 620, 0.25), 0.25, 6), "congestion", 0.25, 0.25),
    "dial, 425 Hz": (sine(425, 4, -20), "dial", 4.0, None),
    "ringing, 425 Hz": (again(sine(425, 1, -20), 4, 3), "ringing", 1.0, 4.0),
    "ringing, 440 Hz": (again(sine(440, 1.5, -20), 3.5, 3), "ringing", 1.5, 3.5),
    "busy, 425 Hz": (again(sine(425, 0.48, -20), 0.48, 5), "busy", 0.48, 0.48),
    "congestion, 425 Hz": (again(sine(425, 0.24, -20), 0.24, 6), "congestion", 0.24, 0.24),
    "busy, 400 Hz": (again(sine(400, 0.375, -20), 0.375, 5), "busy", 0.375, 0.375),
    "ringing, double": (
        again(np.concatenate([pair(400, 450, 0.4), silence(0.2), pair(400, 450, 0.4)]), 2, 3),
        "ringing",
        0.4,
        0.2,
    ),
    "fax calling": (again(sine(1100, 0.5, -20), 3, 3), "fax calling (CNG)", 0.5, 3.0),
    "fax answering": (sine(2100, 3.2, -20), "fax or modem answering (CED)", 3.2, None),
}


@pytest.mark.parametrize("law", ["PCMU", "PCMA"])
@pytest.mark.parametrize("case", CADENCES)
def test_a_tone_is_named_by_frequency_and_cadence(case, law):
    """Common practice: ITU-T E.180 and Supplement 2, North American practice, T.30, from memory."""
    sound, name, on, off = CADENCES[case]
    (tone,) = named(np.concatenate([silence(0.35), sound, silence(0.25)]), law=law)
    assert tone.name == name
    assert tone.on_s == pytest.approx(on, abs=0.03)
    assert tone.off_s == pytest.approx(off, abs=0.05) if off else np.isnan(tone.off_s)
    assert tone.confidence_pct >= 75
    assert tone.from_s == pytest.approx(0.35, abs=0.021)


def test_the_special_information_tone_is_three_rising_frequencies():
    rising, falling = (950, 1400, 1800), (1800, 1400, 950)
    (tone,) = named(np.concatenate([sine(hz, 0.33, -20) for hz in rising]))
    assert tone.name == "special information"
    assert tone.frequencies_hz == pytest.approx(rising, abs=4)
    assert named(np.concatenate([sine(hz, 0.33, -20) for hz in falling])) == []


def test_an_answer_tone_with_phase_reversals_is_still_one():
    """V.8 and G.168, from memory: 2100 Hz, turned by 180 degrees every 450 ms."""
    pieces = [sine(2100, 0.45, -20, phase=np.pi * k) for k in range(8)]
    found = named(np.concatenate(pieces))
    assert {one.name for one in found} <= {"fax or modem answering (CED)"}
    assert found[0].to_s - found[0].from_s == pytest.approx(3.6, abs=0.1)


def test_tones_of_one_call_follow_in_order():
    found = named(np.concatenate([pair(350, 440, 2), silence(2), again(pair(440, 480, 2), 4, 2), reader()]))
    assert [one.name for one in found] == ["dial", "ringing"]


@pytest.mark.parametrize("hz", [700, 1004, 1020, 2600])
def test_other_tones_bear_no_name(hz):
    assert named(sine(hz, 4, -20)) == []


def test_speech_bears_no_name():
    assert named(reader().astype(float)) == []
