import numpy as np
import pytest

from rtpaudit.audio.echo import echo_of
from tests.audio.sounds import RATE, noise, reader, silence, sine, through, to_int16


def spoken():
    """Half a minute: one side speaks for five seconds and is silent for five, three times."""
    samples = reader().astype(float)
    turns = [samples[:40000], silence(5), samples[40000:80000], silence(5), samples[16000:56000], silence(5)]
    return np.concatenate(turns)


def answered():
    """What the other side says in the silences of the first: another voice by being read backwards."""
    return 0.6 * spoken()[::-1]


def returned(speech, delay_s, loss_db, scattered):
    """Echo of some speech: later, softer in the telephone band, and by a path of one or many reflections."""
    random = np.random.default_rng(round(1000 * delay_s))
    path = random.normal(0, 1, 64) * np.exp(-np.arange(64) / 12) if scattered else np.ones(1)
    echo = np.concatenate([np.zeros(round(delay_s * RATE)), np.convolve(speech, path)])[: len(speech)]
    return echo * 10 ** (-loss_db / 20) * np.sqrt(band_power(speech) / band_power(np.convolve(speech, path)))


def band_power(sound):
    frequency = np.fft.rfftfreq(len(sound), 1 / RATE)
    return np.sum(np.abs(np.fft.rfft(sound))[(frequency > 250) & (frequency < 3400)] ** 2)


def heard(*parts, floor=-68, law="PCMU"):
    return through(law, to_int16(sum(parts) + noise(len(parts[0]) / RATE, floor)))


@pytest.mark.parametrize("scattered", [False, True])
@pytest.mark.parametrize(("delay_s", "loss_db"), [(0.03, 10), (0.12, 20), (0.3, 30), (0.55, 35), (0.8, 40), (0.25, 45)])
def test_an_echo_is_found_with_its_delay_and_loss(delay_s, loss_db, scattered):
    speech = spoken()
    back = heard(answered(), returned(speech, delay_s, loss_db, scattered))
    found = echo_of(through("PCMA", to_int16(speech)), back, RATE)
    assert found.delay_ms == pytest.approx(1000 * delay_s, abs=3)
    # A path of many reflections colours the speech: its loss depends on what is said.
    assert found.loss_db == pytest.approx(loss_db, abs=3 if scattered else 2)
    assert found.shown_pct == 100
    assert found.confidence_pct > 90


def test_an_echo_that_comes_and_goes_is_still_one():
    speech = spoken()
    suppressed = np.repeat(np.random.default_rng(3).random(30) < 0.4, RATE)
    found = echo_of(to_int16(speech), heard(answered(), returned(speech, 0.2, 20, False) * suppressed), RATE)
    assert found.delay_ms == pytest.approx(200, abs=3)
    assert found.loss_db > 20


@pytest.mark.parametrize("ppm", [30, 100])
def test_clocks_that_drift_do_not_blur_an_echo(ppm):
    speech = np.tile(spoken(), 6)
    echo = returned(speech, 0.3, 25, False)
    drifting = np.interp(np.arange(len(echo)) * (1 + ppm * 1e-6), np.arange(len(echo)), echo)
    found = echo_of(to_int16(speech), heard(np.tile(answered(), 6), drifting), RATE)
    assert found.delay_ms == pytest.approx(300 - 0.09 * ppm, abs=0.1 * ppm + 3)
    assert found.loss_db == pytest.approx(25, abs=2.5)


def test_lost_packets_do_not_hide_an_echo():
    random = np.random.default_rng(2)
    speech = spoken()
    kept = [np.repeat(random.random(len(speech) // 160) > 0.05, 160) for _ in range(2)]
    back = heard(answered(), returned(speech, 0.15, 25, True))
    found = echo_of(to_int16(speech) * kept[0], back * kept[1], RATE)
    assert found.delay_ms == pytest.approx(150, abs=3)


def test_an_echo_at_16_khz_is_the_same():
    speech = np.repeat(spoken(), 2)
    back = np.repeat(answered() + returned(spoken(), 0.2, 20, False), 2)
    found = echo_of(to_int16(speech), to_int16(back + noise(30, -68, rate=16000)), 16000)
    assert (found.delay_ms, found.loss_db) == pytest.approx((200, 20), abs=2)


def test_where_the_other_side_never_speaks_an_announcement_both_ways_is_possible():
    speech = spoken()
    found = echo_of(to_int16(speech), heard(returned(speech, 0.2, 20, False)), RATE)
    assert found.delay_ms == pytest.approx(200, abs=3)
    assert found.confidence_pct < 80


def test_a_return_louder_than_any_hybrid_is_doubted_and_the_same_sound_is_no_echo():
    speech = spoken()
    loud = echo_of(to_int16(speech), heard(answered(), returned(speech, 0.1, 4, False)), RATE)
    assert loud is None or loud.confidence_pct <= 50
    for delay_s in (0.0, 0.1):
        assert echo_of(to_int16(speech), heard(returned(speech, delay_s, 0, False)), RATE) is None


def test_what_comes_before_the_speech_is_no_echo():
    speech = spoken()
    earlier = np.roll(speech, -400) * 0.1
    assert echo_of(to_int16(speech), heard(answered(), earlier), RATE) is None


@pytest.mark.parametrize("share", [0.05, 0.3, 1.0])
@pytest.mark.parametrize("shift", [3, 11, 17])
def test_speech_over_speech_is_no_echo(share, shift):
    one = np.tile(reader(), 3).astype(float)
    other = share * np.roll(np.tile(reader()[::-1], 3), shift * RATE)
    for first, second in ((one, other), (other, one)):
        assert echo_of(through("PCMU", to_int16(first)), heard(second), RATE) is None


def test_turns_without_echo_have_none():
    for floor in (-80, -68, -55):
        assert echo_of(to_int16(spoken()), heard(answered(), floor=floor), RATE) is None
        assert echo_of(to_int16(answered()), heard(spoken(), floor=floor), RATE) is None


def music(seconds, seed, notes_a_second):
    random = np.random.default_rng(seed)
    sound = np.zeros(round((seconds + 2) * RATE))
    for first in range(0, round(seconds * RATE), RATE // notes_a_second):
        hz = random.choice([131, 165, 196, 220, 262, 330, 392, 440, 523])
        note = sum(sine(hz * k, 1, -24) / k for k in (1, 2, 3)) * np.exp(-np.arange(RATE) / 900)
        sound[first : first + RATE] += note
    return sound[: round(seconds * RATE)]


@pytest.mark.parametrize("notes_a_second", [2, 4])
@pytest.mark.parametrize("loss_db", [0, 10, 20])
@pytest.mark.parametrize("delay_s", [0.0, 0.05, 0.25])
def test_the_same_music_both_ways_is_no_echo(notes_a_second, loss_db, delay_s):
    played = music(30, 4, notes_a_second)
    other_way = np.roll(played, round(delay_s * RATE)) * 10 ** (-loss_db / 20)
    for first, second in ((played, other_way), (other_way, played)):
        assert echo_of(through("PCMU", to_int16(first)), heard(second), RATE) is None


@pytest.mark.parametrize("second", [silence(30), noise(30, -50), sine(425, 30, -30)], ids=["silence", "noise", "tone"])
def test_silence_noise_and_tones_are_no_echo(second):
    assert echo_of(to_int16(spoken()), to_int16(second), RATE) is None
    assert echo_of(to_int16(second), to_int16(spoken()), RATE) is None
    assert echo_of(to_int16(second), to_int16(second), RATE) is None


@pytest.mark.parametrize("count", [0, 1, 8000, 20000])
def test_a_short_call_tells_nothing(count):
    assert echo_of(to_int16(spoken())[:count], to_int16(answered()), RATE) is None
    assert echo_of(to_int16(spoken()), to_int16(answered())[:count], RATE) is None
