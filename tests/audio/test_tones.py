import numpy as np
import pytest

from rtpaudit.audio.scan import scan
from rtpaudit.audio.tones import steady_tones, tone_bursts
from tests.audio.sounds import RATE, inputs_of, noise, reader, rows_of, silence, sine, through, to_int16


def bursts(sound, rate=RATE):
    samples = sound if sound.dtype == np.int16 else to_int16(sound)
    return tone_bursts(samples, scan(samples, rate))


def steady(samples, encoding="PCMU", rate=RATE):
    scanned = scan(samples, rate)
    return steady_tones(samples, scanned, tone_bursts(samples, scanned), encoding)


@pytest.mark.parametrize("row", rows_of("sound_levels.csv", "SNR-PCM"), ids=lambda row: row["id"])
def test_signal_to_distortion_of_each_law_is_as_published(row):
    given = inputs_of(row)
    law, level = given["law"], float(given["level_dBm0"])
    overload = {"PCMU": (4 * 8159, 3.17), "PCMA": (8 * 4096, 3.14)}[law]
    peak = overload[0] * 10 ** ((level - overload[1]) / 20)
    (tone,) = steady(through(law, to_int16(peak * np.sin(2 * np.pi * 1004 * np.arange(80000) / RATE))), law)
    assert tone.signal_to_distortion_db == pytest.approx(float(row["expected"]), abs=float(row["tolerance"]))
    assert tone.frequency_hz == pytest.approx(1004, abs=0.01)
    assert tone.level_dbm0 == pytest.approx(level, abs=0.1)


def test_the_lab_tone_has_its_stated_frequency_and_level():
    """captures/lab: 1004 Hz, peak amplitude 7168 of 32768, -10.00 dBm0 as mu-law, -10.06 as A-law."""
    tone = to_int16(7168 * np.sin(2 * np.pi * 1004 * np.arange(80000) / RATE))
    for law, dbm0 in (("PCMU", -10.00), ("PCMA", -10.06)):
        (found,) = steady(through(law, tone), law)
        assert found.level_dbm0 == pytest.approx(dbm0, abs=0.05)


def test_noise_beside_a_tone_is_distortion():
    (tone,) = steady(to_int16(sine(1020, 5, -16) + noise(5, -36)))
    assert tone.signal_to_distortion_db == pytest.approx(20, abs=0.3)
    assert tone.frequency_hz == pytest.approx(1020, abs=0.05)


def test_a_harmonic_is_distortion_and_an_offset_is_none():
    (tone,) = steady(to_int16(sine(1004, 5, -16) + sine(3012, 5, -46) + 500))
    assert tone.signal_to_distortion_db == pytest.approx(30, abs=0.3)
    assert tone.level_dbov == pytest.approx(-16, abs=0.02)


def test_tones_of_wideband_have_the_same_figures_but_no_dbm0():
    (tone,) = steady(to_int16(sine(1004, 3, -16, rate=16000)), "opus", 16000)
    assert (tone.frequency_hz, tone.level_dbov) == pytest.approx((1004, -16), abs=0.02)
    assert np.isnan(tone.level_dbm0)


def test_a_burst_has_its_start_and_end_to_a_block():
    (one, two) = bursts(np.concatenate([silence(0.5), sine(425, 0.3, -20), silence(0.4), sine(425, 2, -30)]))
    assert (one.from_s, one.to_s, two.from_s, two.to_s) == pytest.approx((0.5, 0.8, 1.2, 3.2), abs=0.021)
    assert (one.level_dbov, two.level_dbov) == pytest.approx((-20, -30), abs=0.1)
    assert (*one.frequencies_hz, *two.frequencies_hz) == pytest.approx((425, 425), abs=1)


@pytest.mark.parametrize("pair", [(350, 440), (440, 480), (480, 620), (400, 450)])
@pytest.mark.parametrize("floor", [-80, -40])
def test_two_tones_at_once_are_told_apart(pair, floor):
    (burst,) = bursts(sine(pair[0], 0.5, -20) + sine(pair[1], 0.5, -22) + noise(0.5, floor))
    assert burst.frequencies_hz == pytest.approx(pair, abs=2)
    assert burst.level_dbov == pytest.approx(10 * np.log10(10**-2 + 10**-2.2), abs=0.3)


def test_frequencies_that_follow_at_once_are_bursts_of_their_own():
    found = bursts(np.concatenate([sine(950, 0.33, -20), sine(1400, 0.33, -20), sine(1800, 0.33, -20)]))
    assert [one.frequencies_hz for one in found] == [pytest.approx((hz,), abs=3) for hz in (950, 1400, 1800)]


@pytest.mark.parametrize("sound", [reader(), noise(10, -20), noise(10, -45), silence(10)])
def test_speech_noise_and_silence_hold_no_tones(sound):
    assert bursts(sound) == []
    assert steady(to_int16(sound)) == []


def test_an_hour_of_one_tone_is_one_burst():
    samples = np.tile(to_int16(sine(1000, 1, -20, phase=0.0)), 600)
    (burst,) = bursts(samples)
    assert burst.duration_s == pytest.approx(600, abs=0.02)


@pytest.mark.parametrize("count", [0, 1, 79, 80, 799])
def test_little_sound_is_no_tone(count):
    assert bursts(sine(1000, 1, -20)[:count]) == []
