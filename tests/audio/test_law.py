import numpy as np
import pytest

from rtpaudit.audio.coding import LAWS, octets_of, reread, values
from rtpaudit.audio.law import Law, by_right_law, law_of
from rtpaudit.codecs import g711
from tests.audio.sounds import RATE, noise, reader, silence, sine, through, to_int16

ENCODE = {"PCMU": g711.encode_pcmu, "PCMA": g711.encode_pcma}
DECODE = {"PCMU": g711.decode_pcmu, "PCMA": g711.decode_pcma}
FAULT = {("PCMA", "PCMU"): Law.PCMA_AS_PCMU, ("PCMU", "PCMA"): Law.PCMU_AS_PCMA}
SPEECH = reader()
TONES = {
    "test tone": sine(1004, 5, -16),
    "dial tone": sine(350, 5, -19) + sine(440, 5, -19),
    "2100 Hz": sine(2100, 5, -12),
    "chords": sum(sine(hz, 5, -24) for hz in (220, 277, 330, 440)),
}


def wrongly(law, other, samples):
    """Samples coded by one law and decoded by the other."""
    return DECODE[other](ENCODE[law](samples))


@pytest.mark.parametrize("law", LAWS)
def test_tables_are_those_of_the_codec(law):
    assert (values(law) == DECODE[law](np.arange(256, dtype=np.uint8))).all()
    every = np.arange(-32768, 32768).astype(np.int16)
    miss = np.abs(values(law)[octets_of(every, law)].astype(int) - every)
    assert (miss <= np.abs(DECODE[law](ENCODE[law](every)).astype(int) - every)).all()


@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize("gain", [0.02, 0.1, 1.0, 4.0])
def test_speech_in_its_own_law_is_right(law, gain):
    verdict = law_of(through(law, to_int16(gain * SPEECH.astype(float))), RATE)
    assert verdict.law is Law.RIGHT
    assert verdict.confidence_pct > 60


@pytest.mark.parametrize(("law", "other"), FAULT)
@pytest.mark.parametrize("gain", [0.02, 0.1, 1.0, 4.0])
def test_speech_in_the_other_law_is_told_and_put_right(law, other, gain):
    spoken = to_int16(gain * SPEECH.astype(float))
    heard = wrongly(law, other, spoken)
    verdict = law_of(heard, RATE)
    assert verdict.law is FAULT[law, other]
    assert verdict.confidence_pct > 60
    right = by_right_law(heard, verdict.law)
    # Octets that share a sample in the wrong law (its two zeros) cannot be told apart again.
    assert (right != through(law, spoken)).mean() < 0.02
    assert law_of(right, RATE).law is Law.RIGHT


@pytest.mark.parametrize(("law", "other"), FAULT)
def test_a_fault_further_up_survives_another_coding(law, other):
    heard = wrongly(law, other, SPEECH)
    for next_law in LAWS:
        assert law_of(through(next_law, heard), RATE).law is FAULT[law, other]


@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize("name", TONES)
def test_tones_and_music_are_never_blamed_and_told_where_they_are_wrong(law, name):
    sound = to_int16(TONES[name])
    assert law_of(through(law, sound), RATE).law is Law.RIGHT
    other = LAWS[1 - LAWS.index(law)]
    assert law_of(wrongly(law, other, sound), RATE).law is FAULT[law, other]


@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize("dbov", [-60, -45, -30, -20, -10, -3])
def test_white_noise_is_undecided_in_either_law(law, dbov):
    sound = to_int16(noise(6, dbov))
    other = LAWS[1 - LAWS.index(law)]
    assert law_of(through(law, sound), RATE).law is Law.UNDECIDED
    assert law_of(wrongly(law, other, sound), RATE).law is Law.UNDECIDED


@pytest.mark.parametrize("law", LAWS)
def test_silence_and_idle_code_are_undecided(law):
    for octet in (0xFF, 0x7F, 0xD5, 0x55, 0x54):
        assert law_of(DECODE[law](np.full(80000, octet, np.uint8)), RATE).law is Law.UNDECIDED
    assert law_of(np.empty(0, np.int16), RATE).law is Law.UNDECIDED


@pytest.mark.parametrize("law", LAWS)
def test_random_octets_are_undecided(law):
    octets = np.random.default_rng(5).integers(0, 256, 80000).astype(np.uint8)
    assert law_of(DECODE[law](octets), RATE).law is Law.UNDECIDED


@pytest.mark.parametrize("law", LAWS)
def test_other_faults_of_the_sound_are_not_taken_for_the_wrong_law(law):
    robbed = ENCODE[law](SPEECH)
    robbed[::6] |= 1
    noisy = to_int16(SPEECH + noise(12, -35))
    for sound in (DECODE[law](robbed), through(law, to_int16(20.0 * SPEECH.astype(float))), through(law, noisy)):
        assert law_of(sound, RATE).law is Law.RIGHT


def test_less_than_a_second_of_sound_is_too_little():
    assert law_of(SPEECH[4000:11000], RATE).law is Law.UNDECIDED
    assert law_of(to_int16(silence(5), sine(300, 0.5, -20), silence(5)), RATE).law is Law.UNDECIDED


def test_what_is_right_or_undecided_stays_as_it_is():
    for law in (Law.RIGHT, Law.UNDECIDED):
        assert by_right_law(SPEECH, law) is SPEECH
    assert (by_right_law(SPEECH, Law.PCMA_AS_PCMU) == reread(SPEECH, "PCMU", "PCMA")).all()
